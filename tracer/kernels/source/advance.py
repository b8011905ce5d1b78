"""Particles from release to end: the entry point of a compiled field.

They ride in lockstep lanes (`lanes`); a lane whose particle has ended takes the next. What stands here is scalar and
rare: releasing, corners of drivers, boundaries, ends.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import TWO_PI, compiled, entry_point, over_lanes, stand_apart
from tracer.status import Cause

from .crossing import CONE, INNER, NEVER, OUTER, first_crossing, initial_step, shift_to, straight_crossing
from .drift import depth_in_cone, observed, slope_at
from .field import drivers
from .lanes import (
    ENTERING, LANDING, MOST_STEPS, NEARING, PASSING, SAVING, SHORTEST, accept, begin, finish, interpolate, judge,
    observe, particle, point, remember, slopes, watch,
)  # fmt: skip
from .layout import (
    R, PHI, T, H, TURNS, MU, K, Q, M, LIVE, ACCEPTED, REJECTED, UNTIL, LIMIT, NEXT, WATCH, STEP, TN, RN, PN, OK, HN,
    STOP, CALL, LAND, K1, K12, F0, F15, SR, SP, D0, SIZE, LANES,
)  # fmt: skip
from .stages import (
    stage_2, stage_3, stage_4, stage_5, stage_6, stage_7, stage_8, stage_9, stage_10, stage_11, stage_12, stage_14,
    stage_15, stage_16,
)  # fmt: skip

DRIFTING, FAILED = int(Cause.DRIFTING), int(Cause.FAILED)
CONE_OFF, CONE_STOP = 0, 2
EVER = 1e300  # a time that no run reaches
SIDE_BY_SIDE = 4  # registers of lanes that the processor works on at once; short bodies need no more than one or two
# columns of `end`
TIME, END_R, END_MLT, END_ENERGY, END_PITCH, CAUSE, TURNED, CONE_TIME, GOOD_STEPS, BAD_STEPS = range(10)
# rows of the bookkeeping `S`: particle, driver segment, first and next saved time, cause, limit aimed at, shots so far
OWNER, SEGMENT, BEGUN, FOLLOWING, FATE, AIM, SHOTS = range(7)
MOST_SHOTS = 6
ASTRAY = 1e-5  # R_E, or a part of the foot field: no touch is as far from its limit


@compiled
def segment_at(edges: Any, t: Any, sign: Any) -> Any:
    """Index of the driver segment that is entered at `t`."""
    low, high = 0, edges.size - 1  # by halves: numpy's own search takes a second to compile
    while high - low > 1:
        middle = (low + high) // 2
        if edges[middle] < t or (edges[middle] == t and sign > 0.0):
            low = middle
        else:
            high = middle
    return low


@compiled
def enter_segment(W: Any, S: Any, lane: Any, seg: Any, edges: Any, segments: Any, sign: Any) -> None:
    """Give `lane` the drivers of a segment, and its end."""
    S[SEGMENT, lane] = seg
    for i in range(segments.shape[1]):
        W[D0 + i * LANES + lane] = segments[seg, i]
    limit, until = edges[seg + 1] if sign > 0.0 else edges[seg], W[UNTIL + lane]
    W[LIMIT + lane] = limit if sign * (until - limit) > 0.0 else until


@compiled
def release(
    W: Any, S: Any, lane: Any, i: Any, P: Any, C: Any, edges: Any, segments: Any, rules: Any, times: Any, end: Any,
    saved: Any,
) -> None:  # fmt: skip
    """Put particle `i` into `lane`; its fate is other than DRIFTING when it ends at once."""
    stand_apart()
    sign, outer, inner, foot_re, cone, tolerance = rules
    r, phi, t = P[i, 0], P[i, 1], P[i, 2]
    W[R + lane], W[PHI + lane], W[T + lane] = r, phi, t
    W[MU + lane], W[K + lane], W[Q + lane], W[M + lane] = P[i, 3], P[i, 4], P[i, 5], P[i, 6]
    W[TURNS + lane], W[ACCEPTED + lane], W[REJECTED + lane], W[WATCH + lane], W[LAND + lane] = 0.0, 0.0, 0.0, 0.0, 0.0
    W[LIVE + lane], W[UNTIL + lane] = 1.0, P[i, 7]
    S[OWNER, lane], S[FATE, lane] = i, DRIFTING
    enter_segment(W, S, lane, segment_at(edges, t, sign), edges, segments, sign)
    k1, l1 = slope_at(t, r, phi, particle(W, lane), C, drivers(W, D0 + lane, LANES))
    W[H + lane] = initial_step(k1, l1, tolerance)
    j = first_saved(times, t, sign)
    S[BEGUN, lane] = j
    if j < times.size and times[j] == t:
        saved[lane, 0, j], saved[lane, 1, j] = r, phi
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
    low, high = 0, times.size
    while low < high:
        middle = (low + high) // 2
        if sign * (times[middle] - t) < 0.0:
            low = middle + 1
        else:
            high = middle
    return low


@compiled
def sight(W: Any, lane: Any, C: Any, rules: Any) -> Any:
    """What the particle in `lane` meets first within its accepted step, and at which fraction of it: `NEVER` if
    nothing."""
    stand_apart()
    _, outer, inner, foot_re, _, _ = rules
    call = int(W[CALL + lane])
    F = W[F0 + lane : F15 + lane + 1 : LANES]
    p = particle(W, lane)
    x, which = NEVER, DRIFTING
    if call & int(PASSING):
        which = OUTER if W[RN + lane] >= outer else INNER
        limit = outer if which == OUTER else inner
        x = straight_crossing(W[R + lane], W[RN + lane], W[STEP + lane], W[K1 + lane], W[K12 + lane], limit)
    if call & int(NEARING):
        x, which = first_crossing(OUTER, F, outer, inner, foot_re, p, C), OUTER
        other = first_crossing(INNER, F, outer, inner, foot_re, p, C)
        if other < x:
            x, which = other, INNER
    if call & int(ENTERING):
        other = first_crossing(CONE, F, outer, inner, foot_re, p, C)
        if other < NEVER and other <= x:
            x, which = other, CONE
    return x, which


@compiled
def retake(W: Any, lane: Any, length: Any) -> None:
    """Take the step back; the next one is to have this length, or with 0 the one it had."""
    W[LAND + lane], W[HN + lane], W[OK + lane] = length, W[H + lane], 0.0
    W[STOP + lane] = W[T + lane] - W[STEP + lane]
    W[REJECTED + lane] = W[REJECTED + lane] - 1.0  # it was not


@compiled
def land(W: Any, S: Any, lane: Any, C: Any, rules: Any, end: Any) -> None:
    """The step ended next to the limit it was aimed at: end there, or aim once more.

    A last shift of less than 1e-6 of the step is taken to first order. At a touch the rate vanishes, and the place
    found on the interpolant stands. What is still away from the limit then has failed: it is not put there.
    """
    stand_apart()
    _, outer, inner, foot_re, cone, _ = rules
    which, step = S[AIM, lane], W[STEP + lane]
    t, r, phi = W[TN + lane], W[RN + lane], W[PN + lane]
    p, D = particle(W, lane), drivers(W, D0 + lane, LANES)
    shift, by_r, by_phi, away = shift_to(which, t, r, phi, step, outer, inner, foot_re, p, C, D)
    S[SHOTS, lane] += 1
    if 1e-6 * abs(step) <= abs(shift) < 0.5 * abs(step) and S[SHOTS, lane] < MOST_SHOTS:
        retake(W, lane, step + shift)
        return
    if abs(shift) < 1e-6 * abs(step):
        t, r, phi = t + shift, r + by_r * shift, phi + by_phi * shift
    if not (abs(shift) < 1e-6 * abs(step) or away < ASTRAY):
        which = FAILED
    if which == CONE:
        end[S[OWNER, lane], CONE_TIME] = t
        W[WATCH + lane] = 0.0
        if cone != CONE_STOP:
            retake(W, lane, 0.0)
            return
    r = outer if which == OUTER else (inner if which == INNER else r)
    W[STOP + lane], W[TN + lane], W[RN + lane], W[PN + lane] = t, t, r, phi
    S[FATE, lane] = which


@compiled
def observe_all(
    r: Any, phi: Any, distance: Any, mlt: Any, energy: Any, pitch: Any, p: Any, C: Any
) -> None:  # fmt: skip
    """Put one particle's saved places into its track, as what a file holds."""
    stand_apart()
    over_lanes(observe, r.size, 2, (r, phi, distance, mlt, energy, pitch, p, C))


@compiled
def conclude(W: Any, S: Any, lane: Any, P: Any, C: Any, end: Any, saved: Any, track: Any) -> None:
    """Write the end of the particle in `lane` and let the lane rest: whatever it computes then is never accepted."""
    stand_apart()
    i, r, phi = S[OWNER, lane], W[R + lane], W[PHI + lane]
    end[i, TIME], end[i, END_R], end[i, CAUSE] = W[T + lane], r, S[FATE, lane]
    end[i, END_MLT], end[i, END_ENERGY], end[i, END_PITCH] = observed(r, phi, particle(W, lane), C)
    end[i, TURNED] = W[TURNS + lane] + (phi - P[i, 1]) / TWO_PI
    end[i, GOOD_STEPS], end[i, BAD_STEPS] = W[ACCEPTED + lane], W[REJECTED + lane]
    S[OWNER, lane], W[LIVE + lane] = -1, 0.0
    first, stop = S[BEGUN, lane], S[FOLLOWING, lane]
    if stop > first:
        observe_all(
            saved[lane, 0, first:stop], saved[lane, 1, first:stop], track[i, 0, first:stop], track[i, 1, first:stop],
            track[i, 2, first:stop], track[i, 3, first:stop], particle(W, lane), C,
        )  # fmt: skip


@compiled
def refill(
    W: Any,
    S: Any,
    taken: Any,
    P: Any,
    C: Any,
    edges: Any,
    segments: Any,
    rules: Any,
    times: Any,
    end: Any,
    saved: Any,
    track: Any,
) -> Any:
    """Give every idle lane the next particle that does not end at its release; returns how many were taken in all."""
    stand_apart()
    for lane in range(LANES):
        while S[OWNER, lane] < 0 and taken < P.shape[0]:
            release(W, S, lane, taken, P, C, edges, segments, rules, times, end, saved)
            taken += 1
            if S[FATE, lane] != DRIFTING or W[T + lane] == W[UNTIL + lane]:
                conclude(W, S, lane, P, C, end, saved, track)
    return taken


@compiled
def callers(W: Any, who: Any) -> Any:
    """List the lanes that call for scalar code in `who`; returns how many they are, and all their calls together."""
    n, calls = 0, 0
    for lane in range(LANES):
        call = int(W[CALL + lane])
        who[n] = lane
        n += 1 if call > 0 else 0
        calls |= call
    return n, calls


@compiled
def meet_all(W: Any, S: Any, who: Any, C: Any, rules: Any, end: Any) -> None:
    """Before the step is taken: did it end where a limit is, or does it lead over one?"""
    stand_apart()
    for lane in who:
        call = int(W[CALL + lane])
        if call & int(LANDING):
            land(W, S, lane, C, rules, end)
        elif call & int(PASSING + NEARING + ENTERING):
            x, which = sight(W, lane, C, rules)
            if x < NEVER:
                S[AIM, lane], S[SHOTS, lane] = which, 0
                retake(W, lane, x * W[STEP + lane])


@compiled
def save_next(W: Any, S: Any, who: Any, sign: Any, times: Any, saved: Any) -> Any:
    """Save the points at the lanes' next times that their steps have passed; returns whether a step passed more."""
    stand_apart()
    more = False
    for lane in who:
        if sign * (W[STOP + lane] - W[NEXT + lane]) >= 0.0:
            j = S[FOLLOWING, lane]
            saved[lane, 0, j], saved[lane, 1, j] = W[SR + lane], W[SP + lane]
            S[FOLLOWING, lane] = j + 1
            W[NEXT + lane] = times[j + 1] if j + 1 < times.size else sign * EVER
            more = more or sign * (W[STOP + lane] - W[NEXT + lane]) >= 0.0
    return more


@compiled
def settle_all(
    W: Any, S: Any, who: Any, P: Any, C: Any, edges: Any, segments: Any, sign: Any, end: Any, saved: Any, track: Any,
) -> Any:  # fmt: skip
    """After the step: end what has ended, and take the others over the corners; returns whether a lane became
    idle."""
    stand_apart()
    idle = False
    for lane in who:
        t = W[T + lane]
        if S[FATE, lane] == DRIFTING and (
            W[H + lane] < SHORTEST or W[ACCEPTED + lane] + W[REJECTED + lane] > MOST_STEPS
        ):
            S[FATE, lane] = FAILED
        if S[FATE, lane] != DRIFTING or t == W[UNTIL + lane]:
            conclude(W, S, lane, P, C, end, saved, track)
            idle = True
        elif t == W[LIMIT + lane]:
            enter_segment(W, S, lane, S[SEGMENT, lane] + (1 if sign > 0.0 else -1), edges, segments, sign)
    return idle


@compiled
def slopes_all(W: Any, C: Any) -> None:
    """The slopes of the present stage in all lanes: one piece of machine code, for it is long and called often."""
    stand_apart()
    over_lanes(slopes, LANES, SIDE_BY_SIDE, (W, C))


@compiled
def occupied(S: Any) -> Any:
    """Whether a particle rides in any lane."""
    for lane in range(LANES):  # noqa: SIM110 - numba has no any()
        if S[OWNER, lane] >= 0:
            return True
    return False


@compiled
def aligned(size: Any) -> Any:
    """Zeros that begin where a vector register of the widest kind may be loaded at once."""
    room = np.zeros(size + 8)
    skipped = (-(room.ctypes.data // 8)) % 8
    return room[skipped : skipped + size]


@entry_point
def advance(P: Any, C: Any, edges: Any, segments: Any, rules: Any, times: Any, end: Any, track: Any) -> None:
    """Integrate particles.

    Parameters
    ----------
    P : (n, 8)
        r, phi, release, mu, k, 1/q, 2/(m c^2), end.
    C : tuple
        Constants of the field.
    edges, segments : (n_segment + 1,), (n_segment, 1 + 2 n_driver)
        Corners and drivers.
    rules : tuple
        Sign of time, outer, inner and foot radius, cone mode, tolerance.
    times : (n_time,)
        To save.
    end : (n, 10)
        Takes time, r, mlt, energy, pitch, cause, turns, first time in the cone, accepted and rejected steps.
    track : (n, 4, n_time)
        Takes r, mlt, energy, pitch; filled with NaN before.
    """
    sign, _, _, foot_re, cone, tolerance = rules
    W, S, who = aligned(SIZE), np.zeros((7, LANES), np.int64), np.zeros(LANES, np.int64)
    for lane in range(LANES):
        W[R + lane], W[Q + lane], W[H + lane], W[LIMIT + lane] = 5.0, 1.0, 1.0, sign * EVER  # where a lane may rest
        S[OWNER, lane] = -1
    saved = np.empty((LANES, 2, times.size))  # places of those under way: written here and there, so near the processor
    taken = refill(W, S, 0, P, C, edges, segments, rules, times, end, saved, track)
    while occupied(S):
        over_lanes(begin, LANES, 1, (W, sign))
        slopes_all(W, C)
        over_lanes(remember, LANES, 1, (W,))
        over_lanes(stage_2, LANES, 2, (W,))
        slopes_all(W, C)
        over_lanes(stage_3, LANES, 2, (W,))
        slopes_all(W, C)
        over_lanes(stage_4, LANES, 2, (W,))
        slopes_all(W, C)
        over_lanes(stage_5, LANES, 2, (W,))
        slopes_all(W, C)
        over_lanes(stage_6, LANES, 2, (W,))
        slopes_all(W, C)
        over_lanes(stage_7, LANES, 2, (W,))
        slopes_all(W, C)
        over_lanes(stage_8, LANES, 2, (W,))
        slopes_all(W, C)
        over_lanes(stage_9, LANES, 2, (W,))
        slopes_all(W, C)
        over_lanes(stage_10, LANES, 2, (W,))
        slopes_all(W, C)
        over_lanes(stage_11, LANES, 2, (W,))
        slopes_all(W, C)
        over_lanes(stage_12, LANES, 2, (W,))
        slopes_all(W, C)
        over_lanes(judge, LANES, 2, (W, rules, 1.0 / tolerance))
        if cone != CONE_OFF:
            over_lanes(watch, LANES, 2, (W, C, foot_re))
        n, calls = callers(W, who)
        if calls & int(NEARING + ENTERING + SAVING):
            over_lanes(finish, LANES, 1, (W,))
            slopes_all(W, C)
            over_lanes(stage_14, LANES, 2, (W,))
            slopes_all(W, C)
            over_lanes(stage_15, LANES, 2, (W,))
            slopes_all(W, C)
            over_lanes(stage_16, LANES, 2, (W,))
            slopes_all(W, C)
            over_lanes(interpolate, LANES, 2, (W,))
        if calls & int(PASSING + NEARING + ENTERING + LANDING):
            meet_all(W, S, who[:n], C, rules, end)
        more = (calls & int(SAVING)) > 0
        while more:
            over_lanes(point, LANES, 2, (W,))
            more = save_next(W, S, who[:n], sign, times, saved)
        over_lanes(accept, LANES, 1, (W,))
        if n > 0 and settle_all(W, S, who[:n], P, C, edges, segments, sign, end, saved, track):
            taken = refill(W, S, taken, P, C, edges, segments, rules, times, end, saved, track)
