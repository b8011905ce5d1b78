"""Loading numba's library of functions without scipy's linear algebra, which no kernel calls."""

from __future__ import annotations

import importlib
import sys
from types import ModuleType

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
