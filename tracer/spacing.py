"""Numbers along a range: where its points lie, by the spacing asked for."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from fields.units import Floats
from tracer.scenario import Quantity


def grid_points(name: str, quantity: Quantity, place: NDArray[np.int64]) -> Floats:
    """The points number `place` of a grid quantity, counted from 0; only what is asked for is made.

    A full circle of local time is divided into as many parts as it has points, since its ends are one place.
    """
    if quantity.kind != "range":
        return np.asarray(quantity.values, dtype=float)[place]
    begin, end = ends(name, quantity)
    closed = name == "mlt_h" and end - begin == 24.0
    intervals = quantity.n if closed else max(quantity.n - 1, 1)
    return spaced(place / intervals, begin, end, quantity.spacing)


def ends(name: str, quantity: Quantity) -> tuple[float, float]:
    """Both ends of a range; local time runs eastward, through midnight when it ends below its start."""
    begin, end = quantity.values
    return (begin, end + 24.0) if name == "mlt_h" and end < begin else (begin, end)


def spaced(u: Floats, begin: float, end: float, spacing: str) -> Floats:
    """The value at the fraction `u` of a range, 0 to 1; both ends come out exactly.

    ``linear``: uniform; ``area``: uniform in the square; ``log``: uniform in the logarithm; ``isotropic``: angles in
    degrees, uniform in their cosine.
    """
    between = SPACINGS[spacing](u, begin, end)
    inside = np.clip(between, min(begin, end), max(begin, end))
    return np.where(u <= 0.0, begin, np.where(u >= 1.0, end, inside))


def _linear(u: Floats, begin: float, end: float) -> Floats:
    return begin + (end - begin) * u


def _area(u: Floats, begin: float, end: float) -> Floats:
    return np.sqrt(begin * begin + (end - begin) * (end + begin) * u)


def _log(u: Floats, begin: float, end: float) -> Floats:
    return np.asarray(begin * np.exp(u * np.log(end / begin)))


def _isotropic(u: Floats, begin: float, end: float) -> Floats:
    """cos a uniform: from the complement near 90 degrees, from 1 - cos a = 2 sin^2(a/2) near 0, so no digits
    cancel."""
    cosine = _linear(u, *np.sin(np.radians([90.0 - begin, 90.0 - end])))
    half_versine = _linear(u, *np.sin(np.radians([begin / 2, end / 2])) ** 2)
    near_90 = 90.0 - np.degrees(np.arcsin(np.clip(cosine, -1.0, 1.0)))
    near_0 = 2.0 * np.degrees(np.arcsin(np.sqrt(np.clip(half_versine, 0.0, 1.0))))
    return np.where(cosine < 0.5, near_90, near_0)


SPACINGS: dict[str, Callable[[Floats, float, float], Floats]] = {
    "linear": _linear,
    "area": _area,
    "log": _log,
    "isotropic": _isotropic,
}
