"""One particle after another, in the plainest way: what the lanes are held against. Not used by a run."""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import TWO_PI, compiled, entry_point, rough_power

from .advance import (
    BAD_STEPS, CAUSE, CONE_OFF, CONE_STOP, CONE_TIME, DRIFTING, END_ENERGY, END_MLT, END_PITCH, END_R, FAILED,
    GOOD_STEPS, TIME, TURNED, first_saved, segment_at,
)  # fmt: skip
from .crossing import CONE, INNER, NEVER, OUTER, excess, first_crossing, initial_step
from .drift import depth_in_cone, observed, slope_at
from .field import drivers
from .lanes import GROW, LONGEST, MOST_STEPS, SAFETY, SHORTEST, SHRINK
from .step import along, interpolant, trial, trial_at

POLISHINGS = 3


@compiled
def write(track: Any, i: Any, j: Any, r: Any, phi: Any, p: Any, C: Any) -> None:
    """One saved point."""
    track[i, 0, j] = r
    track[i, 1, j], track[i, 2, j], track[i, 3, j] = observed(r, phi, p, C)


@compiled
def path(F: Any, x: Any) -> Any:
    """r and phi at fraction `x` of the step whose interpolant is `F`."""
    return (
        along(F[0], F[1], F[2], F[3], F[4], F[5], F[6], F[7], x),
        along(F[8], F[9], F[10], F[11], F[12], F[13], F[14], F[15], x),
    )


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
def meeting(
    F: Any, t: Any, r: Any, phi: Any, step: Any, k1: Any, l1: Any, watching: Any, rules: Any, p: Any, C: Any, D: Any
) -> Any:
    """What the step met first: cause or DRIFTING, its time, place, and when the cone was entered (NaN if not)."""
    _, outer, inner, foot_re, cone, _ = rules
    x, which, cone_t = NEVER, DRIFTING, np.nan
    for candidate in (OUTER, INNER):
        found = first_crossing(candidate, F, outer, inner, foot_re, p, C)
        if found < x:
            x, which = found, candidate
    cone_x = first_crossing(CONE, F, outer, inner, foot_re, p, C) if watching else NEVER
    if cone_x < NEVER and cone_x <= x:
        at, re, pe = polished(CONE, cone_x, t, r, phi, step, k1, l1, outer, inner, foot_re, p, C, D)
        cone_t = t + at
        if cone == CONE_STOP:
            return CONE, cone_t, re, pe, cone_t
    if which == DRIFTING:
        return DRIFTING, t + step, r, phi, cone_t
    at, _, pe = polished(which, x, t, r, phi, step, k1, l1, outer, inner, foot_re, p, C, D)
    return which, t + at, outer if which == OUTER else inner, pe, cone_t


@compiled
def follow(P: Any, C: Any, edges: Any, segments: Any, rules: Any, times: Any, end: Any, track: Any, i: Any) -> None:
    """Integrate particle `i`."""
    sign, outer, inner, foot_re, cone, tolerance = rules
    r, phi, t, t_end = P[i, 0], P[i, 1], P[i, 2], P[i, 7]
    p = (P[i, 3], P[i, 4], P[i, 5], P[i, 6])
    turns, cause, accepted, rejected = 0.0, DRIFTING, 0, 0
    seg = segment_at(edges, t, sign)
    D = drivers(segments[seg], 0, 1)
    k1, l1 = slope_at(t, r, phi, p, C, D)
    j = first_saved(times, t, sign)
    if j < times.size and times[j] == t:
        write(track, i, j, r, phi, p, C)
        j += 1
    if cone != CONE_OFF and depth_in_cone(r, phi, p, foot_re, C) >= 0.0:
        end[i, CONE_TIME] = t
        cause = CONE if cone == CONE_STOP else cause
    if r > outer or (r == outer and sign * k1 > 0.0):
        cause = OUTER
    if r < inner or (r == inner and sign * k1 < 0.0):
        cause = INNER
    h = initial_step(k1, l1, tolerance)
    while cause == DRIFTING and t != t_end:
        limit = edges[seg + 1] if sign > 0.0 else edges[seg]
        limit = limit if sign * (t_end - limit) > 0.0 else t_end
        left = sign * (limit - t)
        clipped = h > 0.5 * left
        step = sign * (left if h >= left else (0.5 * left if clipped else h))
        tn = limit if h >= left else t + step
        rn, pn, error, stages = trial(t, r, phi, step, k1, l1, p, C, D)
        q = error / tolerance
        factor = min(max(SAFETY * rough_power((q if q < 1e30 else 1e30) + 1e-30, -0.125), SHRINK), GROW)
        if not q <= 1.0:
            rejected += 1
            h = abs(step) * factor
            cause = FAILED if h < SHORTEST else cause
            continue
        accepted += 1
        h = min(max(h, abs(step) * factor) if clipped else abs(step) * factor, LONGEST)
        F = interpolant(t, r, phi, step, rn, pn, k1, l1, stages, p, C, D)
        watching = cone != CONE_OFF and np.isnan(end[i, CONE_TIME])
        cause, stop, re, pe, cone_t = meeting(F, t, r, phi, step, k1, l1, watching, rules, p, C, D)
        if watching:
            end[i, CONE_TIME] = cone_t
        if cause != DRIFTING:
            tn, rn, pn = stop, re, pe
        while j < times.size and sign * (times[j] - tn) <= 0.0:
            rs, ps = path(F, (times[j] - t) / step)
            if times[j] == tn:
                rs, ps = rn, pn
            write(track, i, j, rs, ps, p, C)
            j += 1
        t, r, phi = tn, rn, pn
        turn = 1.0 if phi > np.pi else (-1.0 if phi < -np.pi else 0.0)
        phi, turns = phi - TWO_PI * turn, turns + turn
        if t == limit and t != t_end and cause == DRIFTING:
            seg += 1 if sign > 0.0 else -1
            D = drivers(segments[seg], 0, 1)
        k1, l1 = slope_at(t, r, phi, p, C, D)
        if accepted + rejected > MOST_STEPS:
            cause = FAILED
    end[i, TIME], end[i, END_R], end[i, CAUSE] = t, r, cause
    end[i, END_MLT], end[i, END_ENERGY], end[i, END_PITCH] = observed(r, phi, p, C)
    end[i, TURNED] = turns + (phi - P[i, 1]) / TWO_PI
    end[i, GOOD_STEPS], end[i, BAD_STEPS] = accepted, rejected


@entry_point
def advance_one_by_one(P: Any, C: Any, edges: Any, segments: Any, rules: Any, times: Any, end: Any, track: Any) -> None:
    """As `advance`, particle by particle; every step is searched for boundaries, none is spared by an estimate."""
    for i in range(P.shape[0]):
        follow(P, C, edges, segments, rules, times, end, track, i)
