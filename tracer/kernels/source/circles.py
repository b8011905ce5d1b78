"""Where H is stationary along a boundary circle: there a level curve touches the boundary, from inside or outside."""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import compiled

from .energy import energy, sample_circle

SAMPLES = 256  # azimuths at which a circle is looked at
SIDE, PHI, LEVEL, RISE, BEND = range(5)  # columns: +1 outer or -1 inner, azimuth, H, dH/dx, sign of d2H/dphi2


@compiled
def stationary_between(edge: Any, low: Any, high: Any, at_low: Any, at_high: Any, F: Any) -> Any:
    """The azimuth between `low` and `high` where dH/dphi changes sign: false position, with the Illinois rule."""
    middle, stayed = low, 0
    for _ in range(100):
        before, middle = middle, low - at_low * (high - low) / (at_high - at_low)
        if not low < middle < high:
            middle = 0.5 * (low + high)
        value = energy(edge, middle, F)[2]
        if value == 0.0 or abs(middle - before) <= 1e-15:
            break
        if (value < 0.0) == (at_low < 0.0):
            low, at_low = middle, value
            at_high *= 0.5 if stayed > 0 else 1.0
            stayed = 1
        else:
            high, at_high = middle, value
            at_low *= 0.5 if stayed < 0 else 1.0
            stayed = -1
    return middle


@compiled
def nearest_touch_of_zero(edge: Any, middle: Any, step: Any, F: Any) -> Any:
    """The extremum of dH/dphi between ``middle - step`` and ``middle + step``, and its value: by parabolas."""
    left, right = energy(edge, middle - step, F)[2], energy(edge, middle + step, F)[2]
    value = energy(edge, middle, F)[2]
    for _ in range(12):
        bend = left - 2.0 * value + right
        if bend == 0.0:
            break
        move = 0.5 * step * (left - right) / bend
        middle += min(max(move, -step), step)
        step *= 0.25
        left, right = energy(edge, middle - step, F)[2], energy(edge, middle + step, F)[2]
        value = energy(edge, middle, F)[2]
    return middle, value


@compiled
def circle_points(edge: Any, side: Any, F: Any, found: Any, count: Any) -> Any:
    """Append the stationary points along a boundary circle to `found`; returns their number then, -1 if too many."""
    n = SAMPLES
    W = np.empty(3 * n)
    sample_circle(edge, n, W, F)
    step = 2.0 * np.pi / n
    for j in range(n):
        here, there, phi = W[n + j], W[n + (j + 1) % n], step * j - np.pi
        if (here < 0.0) != (there < 0.0):
            count = keep_point(edge, side, phi, phi + step, here, there, F, found, count)
            continue
        # both ends of one sign: twice through zero in between, or nearly so?
        before = W[n + (j + n - 1) % n]
        if (before < 0.0) == (here < 0.0) and abs(here) < abs(before) and abs(here) <= abs(there):
            middle, value = nearest_touch_of_zero(edge, phi, step, F)
            if (value < 0.0) != (here < 0.0):
                low, high = middle - step, middle + step
                count = keep_point(edge, side, low, middle, energy(edge, low, F)[2], value, F, found, count)
                count = keep_point(edge, side, middle, high, value, energy(edge, high, F)[2], F, found, count)
    return count


@compiled
def keep_point(
    edge: Any, side: Any, low: Any, high: Any, at_low: Any, at_high: Any, F: Any, found: Any, count: Any
) -> Any:
    """Append the stationary point between two azimuths."""
    if count < 0 or count >= found.shape[0]:
        return -1
    phi = stationary_between(edge, low, high, at_low, at_high, F)
    level, rise, _, _ = energy(edge, phi, F)
    found[count, SIDE], found[count, PHI], found[count, LEVEL], found[count, RISE] = side, phi, level, rise
    found[count, BEND] = 1.0 if at_high > at_low else -1.0
    return count + 1
