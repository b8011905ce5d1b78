"""``python -m tracer`` is ``driftrose``."""

import sys

from tracer.cli import main

sys.exit(main())
