"""Opening a result, whatever kind it is."""

from __future__ import annotations

import os

from tracer import store, store_access
from tracer.access_records import AccessResult
from tracer.records import Result


def open(path: str | os.PathLike[str]) -> Result | AccessResult:
    """A trajectory file or an access file; what it is, is told by its content.

    Returns
    -------
    Result or AccessResult
        Larger columns are read when asked for.

    Raises
    ------
    InputError
        When it is missing, neither of the two, of a newer format, incomplete, truncated or damaged.
    """
    return store_access.open(path) if store.kind(path) == "access" else store.open(path)
