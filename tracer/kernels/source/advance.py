"""Particles from release to end: the entry point of a compiled field.

Eight ride in lockstep lanes (`lanes`); a lane whose particle has ended takes the next. What stands here is scalar
and rare: releasing, corners of drivers, boundaries, ends.
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
    CROSSING, ENDING, ENTERING, accept_all, interpolate_all, observe_row, particle, point_all, step_all,
)  # fmt: skip
from .layout import (
    BM, BT, D0, F0, F15, FLAG, K1, L1, LANES, LIMIT, MU, NEXT, OK, PHI, PN, RN, SIZE, SP, SR, STEP, STOP, TN, TURNS,
    WATCH, H, K, M, Q, R, T,
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
def enter_segment(W: Any, lane: Any, seg: Any, C: Any, edges: Any, segments: Any, t_end: Any, sign: Any) -> None:
    """Give `lane` the drivers of a segment, its end, and the slopes there."""
    for i in range(segments.shape[1]):
        W[D0 + i * LANES + lane] = segments[seg, i]
    limit = edges[seg + 1] if sign > 0.0 else edges[seg]
    W[LIMIT + lane] = limit if sign * (t_end - limit) > 0.0 else t_end
    t, r, phi = W[T + lane], W[R + lane], W[PHI + lane]
    k1, l1, bm, bt = motion_at(t, r, phi, particle(W, lane), C, drivers(W, D0 + lane, LANES))
    W[K1 + lane], W[L1 + lane], W[BM + lane], W[BT + lane] = k1, l1, bm, bt


@compiled
def release(
    W: Any, lane: Any, P: Any, C: Any, edges: Any, segments: Any, rules: Any, times: Any, end: Any, track: Any, i: Any
) -> Any:
    """Put particle `i` into `lane`; returns why it ended at once, or DRIFTING, and its driver segment and next
    saved time."""
    t_end, sign, outer, inner, foot_re, cone, tolerance = rules
    r, phi, t = P[i, 0], P[i, 1], P[i, 2]
    W[R + lane], W[PHI + lane], W[T + lane], W[TURNS + lane] = r, phi, t, 0.0
    W[MU + lane], W[K + lane], W[Q + lane], W[M + lane] = (
        P[i, 3],
        P[i, 4],
        P[i, 5],
        P[i, 6],
    )
    seg = segment_at(edges, t, sign)
    enter_segment(W, lane, seg, C, edges, segments, t_end, sign)
    k1 = W[K1 + lane]
    W[H + lane] = initial_step(k1, W[L1 + lane], tolerance)
    end[i, ACCEPTED], end[i, REJECTED] = 0.0, 0.0
    j = np.searchsorted(sign * times, sign * t)
    if j < times.size and times[j] == t:
        track[0, i, j], track[1, i, j] = r, phi
        j += 1
    W[NEXT + lane] = times[j] if j < times.size else sign * EVER
    cause = DRIFTING
    W[WATCH + lane] = 0.0
    if cone != CONE_OFF:
        if depth_in_cone(r, phi, particle(W, lane), foot_re, C) >= 0.0:
            end[i, CONE_TIME] = t
            cause = CONE if cone == CONE_STOP else cause
        else:
            W[WATCH + lane] = 1.0
    if r > outer or (r == outer and sign * k1 > 0.0):
        cause = OUTER
    if r < inner or (r == inner and sign * k1 < 0.0):
        cause = INNER
    return cause, seg, j


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
def conclude(W: Any, lane: Any, P: Any, C: Any, cause: Any, end: Any, i: Any) -> None:
    """Write the end of particle `i` in `lane`."""
    r, phi = W[R + lane], W[PHI + lane]
    end[i, TIME], end[i, END_R], end[i, CAUSE] = W[T + lane], r, cause
    end[i, END_MLT], end[i, END_ENERGY], end[i, END_PITCH] = observed(r, phi, particle(W, lane), C)
    end[i, TURNED] = W[TURNS + lane] + (phi - P[i, 1]) / TWO_PI


@compiled
def save_all(W: Any, owner: Any, following: Any, sign: Any, times: Any, track: Any) -> None:
    """Save every time that the lanes' steps passed."""
    waiting = True
    while waiting:
        point_all(W)
        waiting = False
        for lane in range(LANES):
            if owner[lane] >= 0 and sign * (W[STOP + lane] - W[NEXT + lane]) >= 0.0:
                i, j = owner[lane], following[lane]
                track[0, i, j], track[1, i, j] = W[SR + lane], W[SP + lane]
                following[lane] = j + 1
                W[NEXT + lane] = times[j + 1] if j + 1 < times.size else sign * EVER
                waiting = True


@compiled
def rest(W: Any, lane: Any) -> None:
    """Fill an idle lane with a particle that stands still at a safe place."""
    for row in range(0, SIZE, LANES):
        W[row + lane] = 0.0
    W[R + lane], W[H + lane], W[Q + lane] = 5.0, 1e-3, 1.0
    W[LIMIT + lane], W[NEXT + lane] = EVER, EVER


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
    for lane in range(LANES):
        rest(W, lane)
    refill = True
    while refill or busy > 0:
        if refill:
            for lane in range(LANES):
                while owner[lane] < 0 and taken < P.shape[0]:
                    i = taken
                    taken += 1
                    cause[lane], seg[lane], following[lane] = release(
                        W, lane, P, C, edges, segments, rules, times, end, track, i
                    )
                    if cause[lane] != DRIFTING or W[T + lane] == t_end:
                        conclude(W, lane, P, C, cause[lane], end, i)
                    else:
                        owner[lane] = i
                        busy += 1
                if owner[lane] < 0:
                    rest(W, lane)
            refill = False
            continue
        step_all(W, C, sign, 1.0 / tolerance, outer, inner, foot_re)
        saving, meeting = False, False
        for lane in range(LANES):
            if owner[lane] < 0:
                W[OK + lane] = 0.0
                continue
            saving = saving or sign * (W[STOP + lane] - W[NEXT + lane]) >= 0.0
            meeting = meeting or W[FLAG + lane] > ENDING
        if saving or meeting:
            interpolate_all(W, C)
            for lane in range(LANES):
                if owner[lane] >= 0 and W[FLAG + lane] > ENDING:
                    cause[lane] = meet(W, lane, C, rules, end, owner[lane])
            if saving:
                save_all(W, owner, following, sign, times, track)
        accept_all(W)
        for lane in range(LANES):
            i = owner[lane]
            if i < 0:
                continue
            good = W[OK + lane] > 0.0
            end[i, ACCEPTED if good else REJECTED] += 1.0
            if not good and (W[H + lane] < LEAST_STEP or end[i, ACCEPTED] + end[i, REJECTED] > MOST_STEPS):
                cause[lane] = FAILED
            if cause[lane] != DRIFTING or (good and W[T + lane] == t_end):
                conclude(W, lane, P, C, cause[lane], end, i)
                owner[lane] = -1
                busy -= 1
                refill = True
            elif good and W[T + lane] == W[LIMIT + lane]:
                seg[lane] += 1 if sign > 0.0 else -1
                enter_segment(W, lane, seg[lane], C, edges, segments, t_end, sign)
    if times.size > 0:
        for i in range(P.shape[0]):
            observe_row(track[0, i], track[1, i], track[2, i], track[3, i], (P[i, 3], P[i, 4], P[i, 5], P[i, 6]), C)
