"""Where, within one step, a particle first meets a boundary or the loss cone."""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import compiled, stand_apart
from tracer.status import Cause

from .drift import depth_in_cone, slope_at
from .step import along

OUTER, INNER, CONE = int(Cause.OUTER), int(Cause.INNER), int(Cause.ATMOSPHERE)

SAMPLES = 8  # of the interpolant of one step: a smooth piece of path, at most a fraction of a turn
SECANTS = 30
NEAR = 1e-9  # fractions of a step
SHRINKS = 24  # leaves 1e-5 of a step: a graze is missed where it is less than 1e-10 of the path deep
GOLDEN = 0.6180339887498949
SLIGHT = 1e-3  # of a step
AIMED = 1e-4  # the same, of a path that is only aimed at
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
    stand_apart()
    r = along(F[0], F[1], F[2], F[3], F[4], F[5], F[6], F[7], x)
    if which == OUTER:
        return r - outer
    if which == INNER:
        return inner - r
    phi = along(F[8], F[9], F[10], F[11], F[12], F[13], F[14], F[15], x)
    return depth_in_cone(r, phi, p, foot_re, C)


@compiled
def highest(which: Any, F: Any, a: Any, b: Any, outer: Any, inner: Any, foot_re: Any, p: Any, C: Any) -> Any:
    """Fraction between `a` and `b` where the excess is largest, by golden sections."""
    stand_apart()
    x, y = b - GOLDEN * (b - a), a + GOLDEN * (b - a)
    gx = excess_along(which, F, x, outer, inner, foot_re, p, C)
    gy = excess_along(which, F, y, outer, inner, foot_re, p, C)
    for _ in range(SHRINKS):
        if gy > gx:
            a, x, gx = x, y, gy
            y = a + GOLDEN * (b - a)
            gy = excess_along(which, F, y, outer, inner, foot_re, p, C)
        else:
            b, y, gy = y, x, gx
            x = b - GOLDEN * (b - a)
            gx = excess_along(which, F, x, outer, inner, foot_re, p, C)
    return x if gx > gy else y


@compiled
def root(
    which: Any, F: Any, a: Any, b: Any, ga: Any, gb: Any, outer: Any, inner: Any, foot_re: Any, p: Any, C: Any
) -> Any:
    """Fraction between `a`, where the excess `ga` is negative, and `b`, where `gb` is not, at which it turns.

    The Illinois method (Dowell & Jarratt 1971), down to what a step on the true path is started from.
    """
    stand_apart()
    for _ in range(SECANTS):
        x = b - gb * (b - a) / (gb - ga)
        g = excess_along(which, F, x, outer, inner, foot_re, p, C)
        if g == 0.0 or abs(x - b) < NEAR:
            return x
        if (g < 0.0) == (gb < 0.0):
            ga = 0.5 * ga
        else:
            a, ga = b, gb
        b, gb = x, g
    return b


@compiled
def first_crossing(which: Any, F: Any, outer: Any, inner: Any, foot_re: Any, p: Any, C: Any) -> Any:
    """Smallest fraction of the step at which the excess turns from negative to positive; NEVER if it does not.

    Between samples that are all negative the path may touch the limit and return. Next to the largest of three
    neighbours it rises by less than half of what they differ; only if that could reach the limit is the summit
    searched for. Before the second sample and after the last but one it has a summit if it turns there.
    """
    stand_apart()
    before = ga = excess_along(which, F, 0.0, outer, inner, foot_re, p, C)
    rising = excess_along(which, F, SLIGHT, outer, inner, foot_re, p, C) > ga
    width = 1.0 / SAMPLES
    for i in range(1, SAMPLES + 1):
        b = i * width
        gb = excess_along(which, F, b, outer, inner, foot_re, p, C)
        if ga < 0.0 <= gb:
            return root(which, F, b - width, b, ga, gb, outer, inner, foot_re, p, C)
        top, lowest = max(before, ga, gb), min(before, ga, gb)
        summit = ga >= max(before, gb) or (i == 2 and rising and before >= ga)
        if i == SAMPLES and gb >= ga:
            summit = excess_along(which, F, 1.0 - SLIGHT, outer, inner, foot_re, p, C) > gb
        if i > 1 and before < 0.0 and top < 0.0 and summit and top + 0.5 * (top - lowest) >= 0.0:
            start = max(b - 2.0 * width, 0.0)
            x = highest(which, F, start, b, outer, inner, foot_re, p, C)
            gx = excess_along(which, F, x, outer, inner, foot_re, p, C)
            if gx >= 0.0:
                g0 = excess_along(which, F, start, outer, inner, foot_re, p, C)
                return root(which, F, start, x, g0, gx, outer, inner, foot_re, p, C)
        before, ga = ga, gb
    return NEVER


@compiled
def shift_to(
    which: Any, t: Any, r: Any, phi: Any, h: Any, outer: Any, inner: Any, foot_re: Any, p: Any, C: Any, D: Any
) -> Any:  # fmt: skip
    """Newton's step in time from the end of a step of length `h` to the limit, the slopes there, and how far off the
    end is."""
    stand_apart()
    by_r, by_phi = slope_at(t, r, phi, p, C, D)
    small = 1e-5 * h
    g = excess(which, r, phi, outer, inner, foot_re, p, C)
    rate = (excess(which, r + by_r * small, phi + by_phi * small, outer, inner, foot_re, p, C) - g) / small
    return -g / rate, by_r, by_phi, abs(g)


@compiled
def straight_crossing(r: Any, rn: Any, h: Any, k: Any, kn: Any, limit: Any) -> Any:
    """Fraction of a step at which a path that only rises, or only falls, passes `limit`: from the cubic through its
    ends, a place to aim at."""
    stand_apart()
    a, b, ga, gb = 0.0, 1.0, r - limit, rn - limit
    x = b
    for _ in range(SECANTS):
        last = x
        x = b - gb * (b - a) / (gb - ga)
        y = 1.0 - x
        g = r * y + rn * x + x * y * (h * (k * y - kn * x) + (rn - r) * (x - y)) - limit
        if abs(x - last) < AIMED:
            break
        if (g < 0.0) == (gb < 0.0):
            ga = 0.5 * ga
        else:
            a, ga = b, gb
        b, gb = x, g
    return x


@compiled
def initial_step(k1: Any, l1: Any, tolerance: Any) -> Any:
    """A first guess in hours: a hundredth of the time scale of the motion, smaller for a finer tolerance."""
    pace = abs(k1) + abs(l1) + 1e-12
    return min(1.0, 0.3 * np.sqrt(np.sqrt(tolerance * 1e4)) / pace)
