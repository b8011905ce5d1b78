"""The equations of `bench_storm` in (r, phi), compiled: the right-hand side of the general tools."""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import lru_cache
from typing import Any

from bench_mirror import lookup
from bench_storm import OPTIONS
from numba import njit


@lru_cache(maxsize=8)
def compiled_rates(top: float) -> Callable[..., Any]:
    """dr/dt and dphi/dt of (r, phi, g, c, kappa / sqrt(r), w, a), for kappa up to `top`."""
    if top > 0.0:
        mirror = lookup(top)
    else:

        @njit(forceinline=True, **OPTIONS)
        def mirror(kappa):  # type: ignore[no-untyped-def]
            return 1.0, 3.0

    @njit(**OPTIONS)
    def rates(r, phi, g, c, k, w, a):  # type: ignore[no-untyped-def]
        P, Q = mirror(k * math.sqrt(r))
        b = a * r * r * r
        return b * r * math.cos(phi), w - g * Q / math.sqrt(r * (r * r * r + c * P)) - 2.0 * b * math.sin(phi)

    return rates
