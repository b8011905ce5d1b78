"""The stages for all lanes are a file that a script writes from the method's constants: the two must not part."""

from __future__ import annotations

import importlib.util
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]


def test_the_stages_are_what_the_script_writes() -> None:
    spec = importlib.util.spec_from_file_location("write_stages", ROOT / "scripts" / "write_stages.py")
    assert spec is not None
    assert spec.loader is not None
    script = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(script)
    assert (ROOT / "tracer" / "kernels" / "source" / "stages.py").read_text(encoding="utf-8") == script.text()
