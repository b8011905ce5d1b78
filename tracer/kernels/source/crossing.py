"""Where, within one step, a particle first meets a boundary or the loss cone."""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import compiled
from tracer.status import Cause

from .drift import depth_in_cone, slope
from .step import along, trial

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
    """`excess` at fraction `x` of the step."""
    return excess(which, along(F, 0, x), along(F, 8, x), outer, inner, foot_re, p, C)


@compiled
def highest(which: Any, F: Any, a: Any, b: Any, outer: Any, inner: Any, foot_re: Any, p: Any, C: Any) -> Any:
    """Fraction between `a` and `b` where the excess is largest: a touch between two samples must not slip through."""
    for _ in range(SHRINKS):
        left, right = a + 0.382 * (b - a), a + 0.618 * (b - a)
        if excess_along(which, F, left, outer, inner, foot_re, p, C) < excess_along(
            which, F, right, outer, inner, foot_re, p, C
        ):
            a = left
        else:
            b = right
    return 0.5 * (a + b)


@compiled
def first_crossing(which: Any, F: Any, outer: Any, inner: Any, foot_re: Any, p: Any, C: Any) -> Any:
    """Smallest fraction of the step at which the excess turns from negative to positive; NEVER if it does not."""
    a, ga = 0.0, excess_along(which, F, 0.0, outer, inner, foot_re, p, C)
    before = ga
    for i in range(1, SAMPLES + 1):
        b = i / SAMPLES
        gb = excess_along(which, F, b, outer, inner, foot_re, p, C)
        top = b
        if gb < 0.0 and ga < 0.0 and (ga > before or i == 1 or i == SAMPLES or ga > gb):
            # a maximum may hide between the neighbours of a
            low = max(a - 1.0 / SAMPLES, 0.0)
            top = highest(which, F, low, b, outer, inner, foot_re, p, C)
            if excess_along(which, F, top, outer, inner, foot_re, p, C) >= 0.0:
                a, ga, gb = low, -1.0, 0.0
        if ga < 0.0 <= gb:
            lo, hi = a, top
            for _ in range(BISECTIONS):
                middle = 0.5 * (lo + hi)
                if excess_along(which, F, middle, outer, inner, foot_re, p, C) < 0.0:
                    lo = middle
                else:
                    hi = middle
            return hi
        before = ga
        a, ga = b, gb
    return NEVER


@compiled
def polished(
    which: Any, x: Any, t: Any, r: Any, phi: Any, h: Any, k1: Any, l1: Any,
    outer: Any, inner: Any, foot_re: Any, p: Any, C: Any, D: Any,
) -> Any:  # fmt: skip
    """Step length, r and phi at the crossing near fraction `x`, by Newton on true steps: as accurate as the path
    itself."""
    step = x * h
    for _ in range(POLISHINGS):
        re, pe, _, _ = trial(t, r, phi, step, k1, l1, p, C, D)
        ke, le = slope(t + step, re, pe, p, C, D)
        small = 1e-5 * h
        g = excess(which, re, pe, outer, inner, foot_re, p, C)
        rate = (excess(which, re + ke * small, pe + le * small, outer, inner, foot_re, p, C) - g) / small
        shift = -g / rate
        if not abs(shift) < 1e-2 * abs(h):  # a touch: the rate vanishes, the interpolant's point stands
            break
        step = step + shift
    re, pe, _, _ = trial(t, r, phi, step, k1, l1, p, C, D)
    return step, re, pe


@compiled
def may_cross(r: Any, rn: Any, step: Any, k1: Any, kn: Any, outer: Any, inner: Any) -> Any:
    """Whether the path may have left the domain: half the step at the larger speed bounds what it strays from its
    ends."""
    stray = 0.5 * abs(step) * max(abs(k1), abs(kn))
    return max(r, rn) + stray >= outer or min(r, rn) - stray <= inner


@compiled
def may_enter_cone(
    g: Any, gn: Any, r: Any, rn: Any, phi: Any, pn: Any, step: Any,
    k1: Any, l1: Any, kn: Any, ln: Any, foot_re: Any, p: Any, C: Any,
) -> Any:  # fmt: skip
    """Whether the loss cone may have been entered, judged from both ends and the middle of the Hermite cubic."""
    rm = 0.5 * (r + rn) + 0.125 * step * (k1 - kn)
    pm = 0.5 * (phi + pn) + 0.125 * step * (l1 - ln)
    gm = depth_in_cone(rm, pm, p, foot_re, C)
    top = max(g, gn, gm)
    return not top + 0.5 * (top - min(g, gn, gm)) < 0.0


@compiled
def initial_step(k1: Any, l1: Any, tolerance: Any) -> Any:
    """A first guess in hours: a hundredth of the time scale of the motion, smaller for a finer tolerance."""
    pace = abs(k1) + abs(l1) + 1e-12
    return min(1.0, 0.3 * np.sqrt(np.sqrt(tolerance * 1e4)) / pace)
