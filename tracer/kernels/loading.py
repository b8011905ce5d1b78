"""Numba without what a kernel that stands on the disk does not need: it takes less than half the time to load."""

from __future__ import annotations

import importlib
import sys
from types import ModuleType
from typing import Any

LIBRARY = "numba.np.arraymath"
BLAS = "scipy.linalg.cython_blas"


def load_library() -> None:
    """Have numba load what it loads before its first kernel, a quarter of a second sooner than it would.

    Numba only wants to know whether scipy's BLAS can be imported; it imports it again, and in earnest, when it
    compiles a function that calls it. So an empty module stands in for it while numba asks.
    """
    if LIBRARY in sys.modules or BLAS in sys.modules:
        return
    stand_in = ModuleType(BLAS)
    sys.modules[BLAS] = stand_in
    try:
        importlib.import_module(LIBRARY)
    finally:
        if sys.modules.get(BLAS) is stand_in:
            del sys.modules[BLAS]


def look_on_disk_first(function: Any) -> None:
    """Have a function with a disk cache look there before numba loads all that it compiles with.

    Numba does so in the other order, which takes a fifth of a second. Of all this, machine code from the disk needs
    the reference counts only. What is not found there is compiled as ever: numba's compiler sees for itself that
    everything is loaded.
    """
    from numba.core.runtime.nrt import rtsys

    cache = getattr(function, "_cache", None)
    load = getattr(cache, "load_overload", None)
    if cache is None or load is None:  # another numba, with other names inside: it takes its own time
        return

    def load_overload(signature: Any, context: Any) -> Any:
        def first_only() -> None:
            del context.refresh
            rtsys.initialize(context)

        context.refresh = first_only  # hides the method; numba holds its lock all the while
        try:
            return load(signature, context)
        finally:
            vars(context).pop("refresh", None)

    cache.load_overload = load_overload
