"""Particles from release to end: the entry point of a compiled field.

Eight ride in lockstep lanes (`lanes`); a lane whose particle has ended takes the next. What stands here is scalar
and rare: releasing, corners of drivers, boundaries, ends.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import TWO_PI, compiled, entry_point
from tracer.status import Cause

from .crossing import CONE, INNER, NEVER, OUTER, first_crossing, initial_step, polished
from .drift import depth_in_cone, motion_at, observed
from .field import drivers
from .lanes import (
    CROSSING, ENTERING, MOST_STEPS, SHORTEST, accept_all, begin_all, interpolate_all, interpolate_one, judge_all,
    observe_row, particle, point_all,
)  # fmt: skip
from .layout import (
    R, PHI, T, H, TURNS, MU, K, Q, M, BM, BT, LIVE, ACCEPTED, REJECTED, LIMIT, NEXT, WATCH, STEP, TN, RN, PN, FLAG,
    K1, L1, F0, F15, STOP, SR, SP, D0, SIZE, LANES,
)  # fmt: skip
from .stages import (
    stage_2, stage_3, stage_4, stage_5, stage_6, stage_7, stage_8, stage_9, stage_10, stage_11, stage_12, stage_14,
    stage_15, stage_16,
)  # fmt: skip

DRIFTING, FAILED = int(Cause.DRIFTING), int(Cause.FAILED)
CONE_OFF, CONE_STOP = 0, 2
EVER = 1e300  # a time that no run reaches
# columns of `end`
TIME, END_R, END_MLT, END_ENERGY, END_PITCH, CAUSE, TURNED, CONE_TIME, GOOD_STEPS, BAD_STEPS = range(10)
# rows of the bookkeeping `S`: particle, driver segment, next saved time, cause
OWNER, SEGMENT, FOLLOWING, FATE = range(4)


@compiled
def segment_at(edges: Any, t: Any, sign: Any) -> Any:
    """Index of the driver segment that is entered at `t`."""
    i = np.searchsorted(edges, t, side="right") - 1 if sign > 0 else np.searchsorted(edges, t) - 1
    return min(max(i, 0), edges.size - 2)


@compiled
def enter_segment(
    W: Any, S: Any, lane: Any, seg: Any, C: Any, edges: Any, segments: Any, t_end: Any, sign: Any
) -> None:
    """Give `lane` the drivers of a segment, its end, and the slopes there."""
    S[SEGMENT, lane] = seg
    for i in range(segments.shape[1]):
        W[D0 + i * LANES + lane] = segments[seg, i]
    limit = edges[seg + 1] if sign > 0.0 else edges[seg]
    W[LIMIT + lane] = limit if sign * (t_end - limit) > 0.0 else t_end
    t, r, phi = W[T + lane], W[R + lane], W[PHI + lane]
    k1, l1, bm, bt = motion_at(t, r, phi, particle(W, lane), C, drivers(W, D0 + lane, LANES))
    W[K1 + lane], W[L1 + lane], W[BM + lane], W[BT + lane] = k1, l1, bm, bt


@compiled
def release(
    W: Any, S: Any, lane: Any, i: Any, P: Any, C: Any, edges: Any, segments: Any, rules: Any, times: Any, end: Any,
    track: Any,
) -> None:  # fmt: skip
    """Put particle `i` into `lane`; its fate is other than DRIFTING when it ends at once."""
    t_end, sign, outer, inner, foot_re, cone, tolerance = rules
    r, phi, t = P[i, 0], P[i, 1], P[i, 2]
    W[R + lane], W[PHI + lane], W[T + lane] = r, phi, t
    W[MU + lane], W[K + lane], W[Q + lane], W[M + lane] = P[i, 3], P[i, 4], P[i, 5], P[i, 6]
    W[TURNS + lane], W[ACCEPTED + lane], W[REJECTED + lane], W[WATCH + lane] = 0.0, 0.0, 0.0, 0.0
    S[OWNER, lane], S[FATE, lane] = i, DRIFTING
    enter_segment(W, S, lane, segment_at(edges, t, sign), C, edges, segments, t_end, sign)
    k1 = W[K1 + lane]
    W[H + lane] = initial_step(k1, W[L1 + lane], tolerance)
    j = first_saved(times, t, sign)
    if j < times.size and times[j] == t:
        track[i, 0, j], track[i, 1, j] = r, phi
        j += 1
    S[FOLLOWING, lane] = j
    W[NEXT + lane] = times[j] if j < times.size else sign * EVER
    if cone != CONE_OFF:
        if depth_in_cone(r, phi, particle(W, lane), foot_re, C) >= 0.0:
            end[i, CONE_TIME] = t
            S[FATE, lane] = CONE if cone == CONE_STOP else DRIFTING
        else:
            W[WATCH + lane] = 1.0
    if r > outer or (r == outer and sign * k1 > 0.0):
        S[FATE, lane] = OUTER
    if r < inner or (r == inner and sign * k1 < 0.0):
        S[FATE, lane] = INNER


@compiled
def first_saved(times: Any, t: Any, sign: Any) -> Any:
    """Index of the first saved time at or after `t` in the order of tracing."""
    if sign > 0.0:
        return np.searchsorted(times, t)
    return times.size - np.searchsorted(times[::-1], t, side="right")


@compiled
def meet(W: Any, lane: Any, C: Any, rules: Any, end: Any, i: Any) -> Any:
    """What the particle in `lane` met within its accepted step: DRIFTING, or the cause of its end, which is then
    the step's end."""
    _, _, outer, inner, foot_re, cone, _ = rules
    flag = int(W[FLAG + lane])
    F = W[F0 + lane : F15 + lane + 1 : LANES]
    p, D = particle(W, lane), drivers(W, D0 + lane, LANES)
    t, r, phi, h = W[T + lane], W[R + lane], W[PHI + lane], W[STEP + lane]
    k1, l1 = W[K1 + lane], W[L1 + lane]
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
        W[WATCH + lane] = 0.0
        if cone == CONE_STOP:
            return end_step(W, lane, CONE, t + at, re, pe)
    if x >= NEVER:
        return DRIFTING
    at, _, pe = polished(which, x, t, r, phi, h, k1, l1, outer, inner, foot_re, p, C, D)
    return end_step(W, lane, which, t + at, outer if which == OUTER else inner, pe)


@compiled
def end_step(W: Any, lane: Any, cause: Any, t: Any, r: Any, phi: Any) -> Any:
    """Let the step of `lane` end early; returns `cause`."""
    # saved times come from the interpolant up to here; none of them is this end itself
    W[STOP + lane] = t
    W[TN + lane], W[RN + lane], W[PN + lane] = t, r, phi
    return cause


@compiled
def conclude(W: Any, S: Any, lane: Any, P: Any, C: Any, end: Any) -> None:
    """Write the end of the particle in `lane` and let the lane rest: whatever it computes then is never accepted."""
    i, r, phi = S[OWNER, lane], W[R + lane], W[PHI + lane]
    end[i, TIME], end[i, END_R], end[i, CAUSE] = W[T + lane], r, S[FATE, lane]
    end[i, END_MLT], end[i, END_ENERGY], end[i, END_PITCH] = observed(r, phi, particle(W, lane), C)
    end[i, TURNED] = W[TURNS + lane] + (phi - P[i, 1]) / TWO_PI
    end[i, GOOD_STEPS], end[i, BAD_STEPS] = W[ACCEPTED + lane], W[REJECTED + lane]
    S[OWNER, lane], W[LIVE + lane] = -1, 0.0


@compiled
def refill(
    W: Any, S: Any, taken: Any, P: Any, C: Any, edges: Any, segments: Any, rules: Any, times: Any, end: Any, track: Any
) -> Any:
    """Give every idle lane the next particle that does not end at its release; returns how many were taken in all."""
    for lane in range(LANES):
        while S[OWNER, lane] < 0 and taken < P.shape[0]:
            release(W, S, lane, taken, P, C, edges, segments, rules, times, end, track)
            taken += 1
            W[LIVE + lane] = 1.0
            if S[FATE, lane] != DRIFTING or W[T + lane] == rules[0]:
                conclude(W, S, lane, P, C, end)
    return taken


@compiled
def due(W: Any, S: Any, sign: Any) -> Any:
    """Whether any lane's step passes a time to save."""
    for lane in range(LANES):  # noqa: SIM110 - numba has no any()
        if S[OWNER, lane] >= 0 and sign * (W[STOP + lane] - W[NEXT + lane]) >= 0.0:
            return True
    return False


@compiled
def meet_all(W: Any, S: Any, C: Any, rules: Any, interpolated: Any, end: Any) -> None:
    """Before the step is taken: what did each lane that may have met something meet within it?"""
    for lane in range(LANES):
        if S[OWNER, lane] >= 0 and W[FLAG + lane] > 0.0:
            if not interpolated:
                interpolate_one(W, lane, C)
            S[FATE, lane] = meet(W, lane, C, rules, end, S[OWNER, lane])


@compiled
def save_all(W: Any, S: Any, sign: Any, times: Any, track: Any) -> None:
    """Save every time that the lanes' steps passed."""
    while due(W, S, sign):
        point_all(W)
        for lane in range(LANES):
            if S[OWNER, lane] >= 0 and sign * (W[STOP + lane] - W[NEXT + lane]) >= 0.0:
                i, j = S[OWNER, lane], S[FOLLOWING, lane]
                track[i, 0, j], track[i, 1, j] = W[SR + lane], W[SP + lane]
                S[FOLLOWING, lane] = j + 1
                W[NEXT + lane] = times[j + 1] if j + 1 < times.size else sign * EVER


@compiled
def settle_all(W: Any, S: Any, P: Any, C: Any, edges: Any, segments: Any, rules: Any, end: Any) -> Any:
    """After the step: end what has ended, and take the others over the corners; returns whether a lane became
    idle."""
    t_end, sign = rules[0], rules[1]
    idle = False
    for lane in range(LANES):
        if S[OWNER, lane] < 0:
            continue
        t = W[T + lane]
        if S[FATE, lane] == DRIFTING and (
            W[H + lane] < SHORTEST or W[ACCEPTED + lane] + W[REJECTED + lane] > MOST_STEPS
        ):
            S[FATE, lane] = FAILED
        if S[FATE, lane] != DRIFTING or t == t_end:
            conclude(W, S, lane, P, C, end)
            idle = True
        elif t == W[LIMIT + lane]:
            seg = S[SEGMENT, lane] + (1 if sign > 0.0 else -1)
            enter_segment(W, S, lane, seg, C, edges, segments, t_end, sign)
    return idle


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
    track : (n, 4, n_time)
        Takes r, mlt, energy, pitch; filled with NaN before.
    """
    _, sign, outer, inner, foot_re, _, tolerance = rules
    W, S = np.zeros(SIZE), np.zeros((4, LANES), np.int64)
    W[R : R + LANES], W[Q : Q + LANES], W[H : H + LANES] = 5.0, 1.0, 1.0  # a place where a lane may rest
    W[LIMIT : LIMIT + LANES] = sign * EVER
    S[OWNER] = -1
    taken = refill(W, S, 0, P, C, edges, segments, rules, times, end, track)
    busy = np.max(S[OWNER]) >= 0
    while busy:
        # called one by one: numba optimises whatever is nested anew at every level
        begin_all(W, sign)
        stage_2(W, C)
        stage_3(W, C)
        stage_4(W, C)
        stage_5(W, C)
        stage_6(W, C)
        stage_7(W, C)
        stage_8(W, C)
        stage_9(W, C)
        stage_10(W, C)
        stage_11(W, C)
        stage_12(W, C)
        calls = judge_all(W, C, sign, 1.0 / tolerance, outer, inner, foot_re)
        if calls > 0:
            saving = due(W, S, sign)
            if saving:
                stage_14(W, C)
                stage_15(W, C)
                stage_16(W, C)
                interpolate_all(W, C)
            meet_all(W, S, C, rules, saving, end)
            if saving:
                save_all(W, S, sign, times, track)
        accept_all(W)
        if calls > 0 and settle_all(W, S, P, C, edges, segments, rules, end):
            taken = refill(W, S, taken, P, C, edges, segments, rules, times, end, track)
            busy = np.max(S[OWNER]) >= 0
    if times.size > 0:
        for i in range(P.shape[0]):
            observe_row(track[i, 0], track[i, 1], track[i, 2], track[i, 3], (P[i, 3], P[i, 4], P[i, 5], P[i, 6]), C)
