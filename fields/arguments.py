"""What may be asked of a field line: arguments checked once, for every implementation. Never a silent NaN."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from fields.errors import InputError
from fields.units import Floats


def pitch(cot2: ArrayLike) -> Floats:
    """cot^2 of an equatorial pitch angle."""
    value = np.asarray(cot2, dtype=float)
    if not np.all((value >= 0) & np.isfinite(value)):
        raise InputError("not the cot^2 of a pitch angle", "a finite number of at least 0", key="cot2")
    return value


def invariant(k: ArrayLike) -> Floats:
    """A second invariant."""
    value = np.asarray(k, dtype=float)
    if not np.all((value >= 0) & np.isfinite(value)):
        raise InputError("not a second invariant", "a finite number of at least 0", key="k")
    return value


def angle(phi: ArrayLike) -> Floats:
    """An azimuth in radians."""
    value = np.asarray(phi, dtype=float)
    if not np.all(np.isfinite(value)):
        raise InputError("not an angle", "a finite number of radians", key="phi")
    return value


def distance(r: ArrayLike) -> Floats:
    """A distance in R_E."""
    value = np.asarray(r, dtype=float)
    if not np.all((value > 0) & np.isfinite(value)):
        raise InputError("not a positive distance", "r above 0 R_E", key="r_re")
    return value
