"""Particles from release to end: the entry point of a compiled field.

Eight ride in lockstep lanes (`lanes`); a lane whose particle has ended takes the next. What stands here is scalar and rare: releasing,
corners of drivers, boundaries, ends.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import compiled, entry_point
from tracer.status import Cause

from .crossing import CONE, INNER, NEVER, OUTER, first_crossing, initial_step, polished
from .drift import depth_in_cone, motion_at, observed
from .field import drivers
from .lanes import (
    CROSSING,
    ENDING,
    ENTERING,
    accept_all,
    interpolate_all,
    observe_row,
    particle,
    point_all,
    step_all,
)  # fmt: skip
from .layout import (
    BM,
    BT,
    D0,
    F0,
    FLAG,
    K1,
    L1,
    LANES,
    LIMIT,
    MU,
    NEXT,
    OK,
    PHI,
    PN,
    RN,
    SIZE,
    SP,
    SR,
    STEP,
    STOP,
    TN,
    TURNS,
    WATCH,
    H,
    K,
    M,
    Q,
    R,
    T,
)  # fmt: skip

DRIFTING, FAILED = int(Cause.DRIFTING), int(Cause.FAILED)
CONE_OFF, CONE_STOP = 0, 2
MOST_STEPS = 20_000_000
LEAST_STEP = 1e-13  # hours
EVER = 1e300  # a time that no run reaches
TWO_PI = 2.0 * np.pi
TIME, END_R, END_MLT, END_ENERGY, END_PITCH, CAUSE, TURNED, CONE_TIME, ACCEPTED, REJECTED = range(10)


@compiled
def segment_at(edges: Any, t: Any, sign: Any) -> Any:
    """Index of the driver segment that is entered at `t`."""
    i = np.searchsorted(edges, t, side="right") - 1 if sign > 0 else np.searchsorted(edges, t) - 1
    return min(max(i, 0), edges.size - 2)


@compiled
def enter_segment(W: Any, l: Any, seg: Any, C: Any, edges: Any, segments: Any, t_end: Any, sign: Any) -> None:
    """Give lane `l` the drivers of a segment, its end, and the slopes there."""
    for i in range(segments.shape[1]):
        W[(D0 + i) * LANES + l] = segments[seg, i]
    limit = edges[seg + 1] if sign > 0.0 else edges[seg]
    W[LIMIT * LANES + l] = limit if sign * (t_end - limit) > 0.0 else t_end
    t, r, phi = W[T * LANES + l], W[R * LANES + l], W[PHI * LANES + l]
    k1, l1, bm, bt = motion_at(t, r, phi, particle(W, l), C, drivers(W, D0 * LANES + l, LANES))
    W[K1 * LANES + l], W[L1 * LANES + l], W[BM * LANES + l], W[BT * LANES + l] = k1, l1, bm, bt


@compiled
def release(W: Any, l: Any, P: Any, C: Any, edges: Any, segments: Any, rules: Any, times: Any, end: Any, track: Any, i: Any) -> Any:
    """Put particle `i` into lane `l`; returns why it ended at once, or DRIFTING, and its driver segment and next saved time."""
    t_end, sign, outer, inner, foot_re, cone, tolerance = rules
    r, phi, t = P[i, 0], P[i, 1], P[i, 2]
    W[R * LANES + l], W[PHI * LANES + l], W[T * LANES + l], W[TURNS * LANES + l] = r, phi, t, 0.0
    W[MU * LANES + l], W[K * LANES + l], W[Q * LANES + l], W[M * LANES + l] = P[i, 3], P[i, 4], P[i, 5], P[i, 6]
    seg = segment_at(edges, t, sign)
    enter_segment(W, l, seg, C, edges, segments, t_end, sign)
    k1 = W[K1 * LANES + l]
    W[H * LANES + l] = initial_step(k1, W[L1 * LANES + l], tolerance)
    end[i, ACCEPTED], end[i, REJECTED] = 0.0, 0.0
    j = np.searchsorted(sign * times, sign * t)
    if j < times.size and times[j] == t:
        track[0, i, j], track[1, i, j] = r, phi
        j += 1
    W[NEXT * LANES + l] = times[j] if j < times.size else sign * EVER
    cause = DRIFTING
    W[WATCH * LANES + l] = 0.0
    if cone != CONE_OFF:
        if depth_in_cone(r, phi, particle(W, l), foot_re, C) >= 0.0:
            end[i, CONE_TIME] = t
            cause = CONE if cone == CONE_STOP else cause
        else:
            W[WATCH * LANES + l] = 1.0
    if r > outer or (r == outer and sign * k1 > 0.0):
        cause = OUTER
    if r < inner or (r == inner and sign * k1 < 0.0):
        cause = INNER
    return cause, seg, j


@compiled
def meet(W: Any, l: Any, C: Any, rules: Any, end: Any, i: Any) -> Any:
    """What the particle in lane `l` met within its accepted step: DRIFTING, or the cause of its end, which is then the step's end."""
    _, _, outer, inner, foot_re, cone, _ = rules
    flag = int(W[FLAG * LANES + l])
    F = W[F0 * LANES + l : (F0 + 16) * LANES + l : LANES]
    p, D = particle(W, l), drivers(W, D0 * LANES + l, LANES)
    t, r, phi, h = W[T * LANES + l], W[R * LANES + l], W[PHI * LANES + l], W[STEP * LANES + l]
    k1, l1 = W[K1 * LANES + l], W[L1 * LANES + l]
    x, which, cone_x = NEVER, DRIFTING, NEVER
    if flag & int(CROSSING):
        x, which = first_crossing(OUTER, F, outer, inner, foot_re, p, C), OUTER
        other = first_crossing(INNER, F, outer, inner, foot_re, p, C)
        if other < x:
            x, which = other, INNER
    if flag & int(ENTERING):
        cone_x = first_crossing(CONE, F, outer, inner, foot_re, p, C)
    if cone_x < NEVER and cone_x <= x:
        at, re, pe = polished(CONE, cone_x, t, r, phi, h, k1, l1, outer, inner, foot_re, p, C, D)
        end[i, CONE_TIME] = t + at
        W[WATCH * LANES + l] = 0.0
        if cone == CONE_STOP:
            return end_step(W, l, CONE, t + at, re, pe)
    if x >= NEVER:
        return DRIFTING
    at, _, pe = polished(which, x, t, r, phi, h, k1, l1, outer, inner, foot_re, p, C, D)
    return end_step(W, l, which, t + at, outer if which == OUTER else inner, pe)


@compiled
def end_step(W: Any, l: Any, cause: Any, t: Any, r: Any, phi: Any) -> Any:
    """Let the step of lane `l` end early; returns `cause`."""
    # saved times come from the interpolant up to here; none of them is this end itself
    W[STOP * LANES + l] = t
    W[TN * LANES + l], W[RN * LANES + l], W[PN * LANES + l] = t, r, phi
    return cause


@compiled
def conclude(W: Any, l: Any, P: Any, C: Any, cause: Any, end: Any, i: Any) -> None:
    """Write the end of particle `i` in lane `l`."""
    r, phi = W[R * LANES + l], W[PHI * LANES + l]
    end[i, TIME], end[i, END_R], end[i, CAUSE] = W[T * LANES + l], r, cause
    end[i, END_MLT], end[i, END_ENERGY], end[i, END_PITCH] = observed(r, phi, particle(W, l), C)
    end[i, TURNED] = W[TURNS * LANES + l] + (phi - P[i, 1]) / TWO_PI


@compiled
def save_all(W: Any, owner: Any, following: Any, sign: Any, times: Any, track: Any) -> None:
    """Save every time that the lanes' steps passed."""
    waiting = True
    while waiting:
        point_all(W)
        waiting = False
        for l in range(LANES):
            if owner[l] >= 0 and sign * (W[STOP * LANES + l] - W[NEXT * LANES + l]) >= 0.0:
                i, j = owner[l], following[l]
                track[0, i, j], track[1, i, j] = W[SR * LANES + l], W[SP * LANES + l]
                following[l] = j + 1
                W[NEXT * LANES + l] = times[j + 1] if j + 1 < times.size else sign * EVER
                waiting = True


@compiled
def rest(W: Any, l: Any) -> None:
    """Fill an idle lane with a particle that stands still at a safe place."""
    for row in range(SIZE // LANES):
        W[row * LANES + l] = 0.0
    W[R * LANES + l], W[H * LANES + l], W[Q * LANES + l] = 5.0, 1e-3, 1.0
    W[LIMIT * LANES + l], W[NEXT * LANES + l] = EVER, EVER


@entry_point
def advance(P: Any, C: Any, edges: Any, segments: Any, rules: Any, times: Any, end: Any, track: Any) -> None:
    """Integrate particles.

    Parameters
    ----------
    P : (n, 7)
        r, phi, release, mu, k, 1/q, 2/(m c^2).
    C : tuple
        Constants of the field.
    edges, segments : (n_segment + 1,), (n_segment, 1 + 2 n_driver)
        Corners and drivers.
    rules : tuple
        End of the run, +-1, outer, inner and foot radius, cone mode, tolerance.
    times : (n_time,)
        To save.
    end : (n, 10)
        Takes time, r, mlt, energy, pitch, cause, turns, first time in the cone, accepted and rejected steps.
    track : (4, n, n_time)
        Takes r, mlt, energy, pitch; filled with NaN before.
    """
    t_end, sign, outer, inner, foot_re, _, tolerance = rules
    W = np.zeros(SIZE)
    owner, seg, following = np.full(LANES, -1), np.zeros(LANES, np.int64), np.zeros(LANES, np.int64)
    cause = np.full(LANES, DRIFTING)
    taken, busy = 0, 0
    for l in range(LANES):
        rest(W, l)
    refill = True
    while refill or busy > 0:
        if refill:
            for l in range(LANES):
                while owner[l] < 0 and taken < P.shape[0]:
                    i = taken
                    taken += 1
                    cause[l], seg[l], following[l] = release(W, l, P, C, edges, segments, rules, times, end, track, i)
                    if cause[l] != DRIFTING or W[T * LANES + l] == t_end:
                        conclude(W, l, P, C, cause[l], end, i)
                    else:
                        owner[l] = i
                        busy += 1
                if owner[l] < 0:
                    rest(W, l)
            refill = False
            continue
        step_all(W, C, sign, 1.0 / tolerance, outer, inner, foot_re)
        saving, meeting = False, False
        for l in range(LANES):
            if owner[l] < 0:
                W[OK * LANES + l] = 0.0
                continue
            saving = saving or sign * (W[STOP * LANES + l] - W[NEXT * LANES + l]) >= 0.0
            meeting = meeting or W[FLAG * LANES + l] > ENDING
        if saving or meeting:
            interpolate_all(W, C)
            for l in range(LANES):
                if owner[l] >= 0 and W[FLAG * LANES + l] > ENDING:
                    cause[l] = meet(W, l, C, rules, end, owner[l])
            if saving:
                save_all(W, owner, following, sign, times, track)
        accept_all(W)
        for l in range(LANES):
            i = owner[l]
            if i < 0:
                continue
            good = W[OK * LANES + l] > 0.0
            end[i, ACCEPTED if good else REJECTED] += 1.0
            if not good and (W[H * LANES + l] < LEAST_STEP or end[i, ACCEPTED] + end[i, REJECTED] > MOST_STEPS):
                cause[l] = FAILED
            if cause[l] != DRIFTING or (good and W[T * LANES + l] == t_end):
                conclude(W, l, P, C, cause[l], end, i)
                owner[l] = -1
                busy -= 1
                refill = True
            elif good and W[T * LANES + l] == W[LIMIT * LANES + l]:
                seg[l] += 1 if sign > 0.0 else -1
                enter_segment(W, l, seg[l], C, edges, segments, t_end, sign)
    if times.size > 0:
        for i in range(P.shape[0]):
            observe_row(track[0, i], track[1, i], track[2, i], track[3, i], (P[i, 3], P[i, 4], P[i, 5], P[i, 6]), C)
