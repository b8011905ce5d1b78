"""Which region a place lies in: followed backward in time, or looked up among the boundary curves."""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import compiled

from .energy import curvature, drift_sense, energy
from .levels import INNER, OUTER, QUICK, ROUND, walk
from .stationary import principal, root_near

# tracer/steady/kinds.py says what they mean
UNDECIDED, OPEN_SOURCE, OPEN_ELSEWHERE, OPEN_INNER, INNER_ONLY, CLOSED_AROUND, CLOSED_APART = range(7)
FIRST_STEP = 0.02
ROUNDING = 1e-13  # of an azimuth
STILL = 1e-4  # so near an extremum every level curve is closed


@compiled
def in_sector(phi: Any, sector: Any) -> Any:
    """Whether an azimuth lies in the sector from ``sector[0]`` eastward to ``sector[1]``, its ends included."""
    east = (phi - sector[0]) % (2.0 * np.pi)
    return east <= sector[1] - sector[0] + ROUNDING or east >= 2.0 * np.pi - ROUNDING


@compiled
def at_rest(x: Any, phi: Any, edges: Any, F: Any) -> Any:
    """The region of a place whose level curve is too small to be followed: closed beside an extremum of H."""
    nx, nphi, there = root_near(x, phi, edges, STILL, F)
    if there:
        small, big, _, _ = principal(*curvature(nx, nphi, 1e-3, F))
        if small * big > 0.0:
            return CLOSED_APART
    return UNDECIDED


@compiled
def region_at_level(x: Any, phi: Any, level: Any, edges: Any, sector: Any, circles: Any, F: Any) -> Any:
    """Region of the level curve through a place, and the azimuth of its entry, NaN where it has none."""
    none = np.empty((0, 4))
    kept = np.empty((0, 2))
    sense = drift_sense(F)
    end, _, at, _, _ = walk(x, phi, level, -sense, FIRST_STEP, F, edges, QUICK, circles, none, kept)
    if end == OUTER:
        return (OPEN_SOURCE if in_sector(at, sector) else OPEN_ELSEWHERE), at
    if end == ROUND:
        return (CLOSED_AROUND if abs(at - phi) > np.pi else CLOSED_APART), np.nan
    if end == INNER:
        end, _, _, _, _ = walk(x, phi, level, sense, FIRST_STEP, F, edges, QUICK, circles, none, kept)
        if end == OUTER:
            return OPEN_INNER, at
        if end == INNER:
            return INNER_ONLY, at
        return UNDECIDED, np.nan
    return at_rest(x, phi, edges, F), np.nan


@compiled
def region_of(x: Any, phi: Any, edges: Any, sector: Any, circles: Any, F: Any) -> Any:
    """Region of a place, and the azimuth of its entry."""
    return region_at_level(x, phi, energy(x, phi, F)[0], edges, sector, circles, F)
