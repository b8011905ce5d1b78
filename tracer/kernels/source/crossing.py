"""Where, within one step, a particle first meets a boundary or the loss cone."""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import compiled
from tracer.status import Cause

from .drift import depth_in_cone, slope_at
from .step import along, trial_at

OUTER, INNER, CONE = int(Cause.OUTER), int(Cause.INNER), int(Cause.ATMOSPHERE)

SAMPLES = 8  # of the interpolant of one step: a smooth piece of path, at most a fraction of a turn
BISECTIONS = 50
SHRINKS = 40
POLISHINGS = 3
NEVER = 2.0  # a fraction beyond the end of the step


@compiled
def excess(which: Any, r: Any, phi: Any, outer: Any, inner: Any, foot_re: Any, p: Any, C: Any) -> Any:
    """How far the point lies beyond a limit; positive beyond."""
    if which == OUTER:
        return r - outer
    if which == INNER:
        return inner - r
    return depth_in_cone(r, phi, p, foot_re, C)


@compiled
def excess_along(which: Any, F: Any, x: Any, outer: Any, inner: Any, foot_re: Any, p: Any, C: Any) -> Any:
    """`excess` at fraction `x` of the step whose interpolant is `F`."""
    r = along(F[0], F[1], F[2], F[3], F[4], F[5], F[6], F[7], x)
    if which == OUTER:
        return r - outer
    if which == INNER:
        return inner - r
    phi = along(F[8], F[9], F[10], F[11], F[12], F[13], F[14], F[15], x)
    return depth_in_cone(r, phi, p, foot_re, C)


@compiled
def highest(which: Any, F: Any, a: Any, b: Any, outer: Any, inner: Any, foot_re: Any, p: Any, C: Any) -> Any:
    """Fraction between `a` and `b` where the excess is largest."""
    for _ in range(SHRINKS):
        left, right = a + 0.382 * (b - a), a + 0.618 * (b - a)
        rising = excess_along(which, F, right, outer, inner, foot_re, p, C) - excess_along(
            which, F, left, outer, inner, foot_re, p, C
        )
        if rising > 0.0:
            a = left
        else:
            b = right
    return 0.5 * (a + b)


@compiled
def root(which: Any, F: Any, a: Any, b: Any, outer: Any, inner: Any, foot_re: Any, p: Any, C: Any) -> Any:
    """Fraction between `a`, where the excess is negative, and `b`, where it is not, at which it turns."""
    for _ in range(BISECTIONS):
        middle = 0.5 * (a + b)
        if excess_along(which, F, middle, outer, inner, foot_re, p, C) < 0.0:
            a = middle
        else:
            b = middle
    return b


@compiled
def first_crossing(which: Any, F: Any, outer: Any, inner: Any, foot_re: Any, p: Any, C: Any) -> Any:
    """Smallest fraction of the step at which the excess turns from negative to positive; NEVER if it does not.

    Between samples that are all negative the path may touch the limit and return. Next to the largest of three
    neighbours it rises by less than they differ; only if that could reach the limit is the summit searched for.
    """
    before = ga = excess_along(which, F, 0.0, outer, inner, foot_re, p, C)
    width = 1.0 / SAMPLES
    for i in range(1, SAMPLES + 1):
        b = i * width
        gb = excess_along(which, F, b, outer, inner, foot_re, p, C)
        if ga < 0.0 <= gb:
            return root(which, F, b - width, b, outer, inner, foot_re, p, C)
        top, lowest = max(before, ga, gb), min(before, ga, gb)
        summit = ga >= before or i == 2 or i == SAMPLES
        if i > 1 and before < 0.0 and top < 0.0 and summit and top + (top - lowest) >= 0.0:
            start = max(b - 2.0 * width, 0.0)
            x = highest(which, F, start, b, outer, inner, foot_re, p, C)
            if excess_along(which, F, x, outer, inner, foot_re, p, C) >= 0.0:
                return root(which, F, start, x, outer, inner, foot_re, p, C)
        before, ga = ga, gb
    return NEVER


@compiled
def polished(
    which: Any, x: Any, t: Any, r: Any, phi: Any, h: Any, k1: Any, l1: Any,
    outer: Any, inner: Any, foot_re: Any, p: Any, C: Any, D: Any,
) -> Any:  # fmt: skip
    """Step length, r and phi at the crossing near fraction `x`: as accurate as the path itself.

    Newton's method on true steps, from the interpolant's point; a last shift of less than 1e-6 of the step is taken
    to first order.
    """
    step = x * h
    for _ in range(POLISHINGS):
        re, pe = trial_at(t, r, phi, step, k1, l1, p, C, D)
        ke, le = slope_at(t + step, re, pe, p, C, D)
        small = 1e-5 * h
        g = excess(which, re, pe, outer, inner, foot_re, p, C)
        rate = (excess(which, re + ke * small, pe + le * small, outer, inner, foot_re, p, C) - g) / small
        shift = -g / rate
        if not abs(shift) < 1e-2 * abs(h):  # a touch: the rate vanishes, the interpolant's point stands
            return step, re, pe
        if abs(shift) < 1e-6 * abs(h):
            return step + shift, re + ke * shift, pe + le * shift
        step = step + shift
    re, pe = trial_at(t, r, phi, step, k1, l1, p, C, D)
    return step, re, pe


@compiled
def initial_step(k1: Any, l1: Any, tolerance: Any) -> Any:
    """A first guess in hours: a hundredth of the time scale of the motion, smaller for a finer tolerance."""
    pace = abs(k1) + abs(l1) + 1e-12
    return min(1.0, 0.3 * np.sqrt(np.sqrt(tolerance * 1e4)) / pace)
