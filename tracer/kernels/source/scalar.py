"""One particle after another, in the plainest way: what the lanes are held against. Not used by a run."""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import TWO_PI, compiled, entry_point, rough_power

from .advance import (
    BAD_STEPS, CAUSE, CONE_OFF, CONE_STOP, CONE_TIME, DRIFTING, END_ENERGY, END_MLT, END_PITCH, END_R, FAILED,
    GOOD_STEPS, TIME, TURNED, segment_at,
)  # fmt: skip
from .crossing import CONE, INNER, NEVER, OUTER, first_crossing, initial_step, polished
from .drift import depth_in_cone, motion_at, observed
from .field import drivers
from .lanes import GROW, LONGEST, MOST_STEPS, SAFETY, SHORTEST, SHRINK
from .step import along, interpolant, trial


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
def meeting(
    F: Any, t: Any, r: Any, phi: Any, step: Any, k1: Any, l1: Any, watching: Any, rules: Any, p: Any, C: Any, D: Any
) -> Any:
    """What the step met first: cause or DRIFTING, its time, place, and when the cone was entered (NaN if not)."""
    _, _, outer, inner, foot_re, cone, _ = rules
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
    t_end, sign, outer, inner, foot_re, cone, tolerance = rules
    r, phi, t = P[i, 0], P[i, 1], P[i, 2]
    p = (P[i, 3], P[i, 4], P[i, 5], P[i, 6])
    turns, cause, accepted, rejected = 0.0, DRIFTING, 0, 0
    seg = segment_at(edges, t, sign)
    D = drivers(segments[seg], 0, 1)
    k1, l1, _, _ = motion_at(t, r, phi, p, C, D)
    j = np.searchsorted(sign * times, sign * t)
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
        kn, ln, _, _ = motion_at(tn, rn, pn, p, C, D)
        F = interpolant(t, r, phi, step, rn, pn, k1, l1, kn, ln, stages, p, C, D)
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
        t, r, phi, k1, l1 = tn, rn, pn, kn, ln
        turn = 1.0 if phi > np.pi else (-1.0 if phi < -np.pi else 0.0)
        phi, turns = phi - TWO_PI * turn, turns + turn
        if t == limit and t != t_end and cause == DRIFTING:
            seg += 1 if sign > 0.0 else -1
            D = drivers(segments[seg], 0, 1)
            k1, l1, _, _ = motion_at(t, r, phi, p, C, D)
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
