"""The vectorised part: what happens in one lane, straight line, selects only. No branch, no call into a library.

`tracer.kernels.arith.over_lanes` runs each of these over all lanes at once. A lane's arithmetic never looks at its
neighbours, so a particle's bits do not depend on which lane it rode in.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import TWO_PI, inlined, rough_power, sincos

from .drift import motion, observed
from .field import drivers, foot
from .layout import (
    R, PHI, T, H, TURNS, MU, K, Q, M, LIVE, ACCEPTED, REJECTED, LIMIT, NEXT, WATCH, STEP, TN, RN, PN, OK, HN, STOP,
    LAND, BM, BT, TS, RS, PS, KS, LS, BS, BTS, CALL, K1, K6, K7, K8, K9, K10, K11, K12, K13, K14, K15, L1, L6, L7, L8,
    L9, L10, L11, L12, L13, L14, L15, F0, F1, F2, F3, F4, F5, F6, F7, F8, F9, F10, F11, F12, F13, F14, F15, SR, SP,
    D0, LANES,
)  # fmt: skip
from .step import along, coefficients, solution

# So small a safety factor rejects few steps; measured, it costs a quarter less than 0.9 at equal error.
SAFETY, SHRINK, GROW = 0.65, 0.2, 4.0
HUGE = 1e30
LONGEST, SHORTEST = 1e3, 1e-13  # steps, hours
MOST_STEPS = 2e7
STRAIGHT = 0.1  # of that bound, where the speed keeps its sign
NEAR_CONE = 0.8  # of the foot field: leaves room for how that changes within a step
# Bits of CALL: straight over a boundary; perhaps over one; perhaps into the loss cone; past a time to save; at an end
# or a corner; on a limit that was aimed at.
PASSING, NEARING, ENTERING, SAVING, SETTLING, LANDING = 1.0, 2.0, 4.0, 8.0, 16.0, 32.0


@inlined
def particle(W: Any, lane: Any) -> Any:
    """What rides in `lane`."""
    return W[MU + lane], W[K + lane], W[Q + lane], W[M + lane]


@inlined
def stages_of(W: Any, lane: Any) -> Any:
    """The stages that the interpolant needs."""
    return (
        W[K6 + lane], W[K7 + lane], W[K8 + lane], W[K9 + lane],
        W[K10 + lane], W[K11 + lane], W[K12 + lane],
        W[L6 + lane], W[L7 + lane], W[L8 + lane], W[L9 + lane],
        W[L10 + lane], W[L11 + lane], W[L12 + lane],
    )  # fmt: skip


@inlined
def late_stages_of(W: Any, lane: Any) -> Any:
    """Stages 14 to 16 of `lane`."""
    return W[K14 + lane], W[K15 + lane], W[KS + lane], W[L14 + lane], W[L15 + lane], W[LS + lane]


@inlined
def slopes(lane: Any, W: Any, C: Any) -> None:
    """The slopes of the present stage, its mirror field and the rate of that."""
    p, D = particle(W, lane), drivers(W, D0 + lane, LANES)
    W[KS + lane], W[LS + lane], W[BS + lane], W[BTS + lane] = motion(W[TS + lane], W[RS + lane], W[PS + lane], p, C, D)


@inlined
def begin(lane: Any, W: Any, sign: Any) -> None:
    """The length of the step, up to a corner rather two even ones than a long one and a sliver; its first stage."""
    t, h, limit = W[T + lane], W[H + lane], W[LIMIT + lane]
    left, land = sign * (limit - t), W[LAND + lane]
    step = sign * (left if h >= left else (0.5 * left if h > 0.5 * left else h))
    step = step if land == 0.0 else land
    W[STEP + lane] = step
    W[TN + lane] = limit if (h >= left and land == 0.0) else t + step
    W[TS + lane], W[RS + lane], W[PS + lane] = t, W[R + lane], W[PHI + lane]


@inlined
def remember(lane: Any, W: Any) -> None:
    """Keep the mirror field of the first stage."""
    W[BM + lane], W[BT + lane] = W[BS + lane], W[BTS + lane]


@inlined
def judge(lane: Any, W: Any, rules: Any, inverse_tolerance: Any) -> None:
    """The end of the step, whether it is good, the next one's length, and what scalar code is called for."""
    sign, outer, inner, _, _, _ = rules
    r, phi, t, h, step, tn = W[R + lane], W[PHI + lane], W[T + lane], W[H + lane], W[STEP + lane], W[TN + lane]
    k1, k12 = W[K1 + lane], W[KS + lane]
    W[K12 + lane], W[L12 + lane] = k12, W[LS + lane]
    rn, pn, error = solution(r, phi, step, k1, W[L1 + lane], stages_of(W, lane))
    live = W[LIVE + lane] > 0.0
    q = error * inverse_tolerance
    ok = q <= 1.0 and live
    q = q if q < HUGE else HUGE  # a NaN too
    factor = SAFETY * rough_power(q + 1e-30, -0.125)
    factor = factor if factor < GROW else GROW
    factor = factor if factor > SHRINK else SHRINK
    hn = abs(step) * factor
    # a step cut short by a corner says little about the next one
    clipped = h > 0.5 * (sign * (W[LIMIT + lane] - t))
    hn = h if (ok and clipped and h > hn) else hn
    hn = hn if hn < LONGEST else LONGEST
    # Half the step at the larger speed bounds what the path strays from its ends; by far, where it does not turn.
    stray = 0.5 * abs(step) * max(abs(k1), abs(k12)) * (1.0 if k1 * k12 <= 0.0 else STRAIGHT)
    land = W[LAND + lane] if ok else 0.0  # should such a short step fail, it is not aimed any more
    landing = land != 0.0
    near = ok and ((max(r, rn) + stray >= outer) or (min(r, rn) - stray <= inner))
    passing = near and k1 * k12 > 0.0 and (r < outer <= rn or r > inner >= rn)
    nearing = near and not passing
    stop = tn if ok else t - step
    saving = live and sign * (stop - W[NEXT + lane]) >= 0.0
    ending = ok and tn == W[LIMIT + lane]
    failing = live and (hn < SHORTEST or W[ACCEPTED + lane] + W[REJECTED + lane] > MOST_STEPS)
    W[RN + lane], W[PN + lane] = rn, pn
    W[OK + lane], W[HN + lane], W[STOP + lane], W[LAND + lane] = (1.0 if ok else 0.0), hn, stop, land
    W[CALL + lane] = (
        (PASSING if passing else 0.0) + (NEARING if nearing else 0.0) + (SAVING if saving else 0.0)
        + (SETTLING if ending or failing else 0.0) + (LANDING if landing else 0.0)
    )  # fmt: skip


@inlined
def watch(lane: Any, W: Any, C: Any, foot_re: Any) -> None:
    """Call for scalar code where the loss cone may have been entered within an accepted step."""
    # The mirror field at the end is that of stage 12, whose place is near enough for an estimate.
    rate, last = W[BT + lane], W[BTS + lane]
    rise = abs(W[STEP + lane]) * max(abs(rate), abs(last)) * (1.0 if rate * last <= 0.0 else STRAIGHT)
    s, c = sincos(W[PN + lane])
    near = max(W[BM + lane], W[BS + lane]) + rise >= NEAR_CONE * foot(W[RN + lane], s, c, foot_re, C)
    entering = near and W[WATCH + lane] > 0.0 and W[OK + lane] > 0.0
    W[CALL + lane] = W[CALL + lane] + (ENTERING if entering else 0.0)


@inlined
def finish(lane: Any, W: Any) -> None:
    """Time and place of stage 13: the end of the step."""
    W[TS + lane], W[RS + lane], W[PS + lane] = W[TN + lane], W[RN + lane], W[PN + lane]


@inlined
def interpolate(lane: Any, W: Any) -> None:
    """The interpolant of the step, once stages 13 to 16 are there."""
    f = coefficients(
        W[R + lane], W[PHI + lane], W[STEP + lane], W[RN + lane], W[PN + lane], W[K1 + lane], W[L1 + lane],
        W[K13 + lane], W[L13 + lane], stages_of(W, lane), late_stages_of(W, lane),
    )  # fmt: skip
    W[F0 + lane], W[F1 + lane], W[F2 + lane], W[F3 + lane] = f[0], f[1], f[2], f[3]
    W[F4 + lane], W[F5 + lane], W[F6 + lane], W[F7 + lane] = f[4], f[5], f[6], f[7]
    W[F8 + lane], W[F9 + lane], W[F10 + lane], W[F11 + lane] = f[8], f[9], f[10], f[11]
    W[F12 + lane], W[F13 + lane], W[F14 + lane], W[F15 + lane] = f[12], f[13], f[14], f[15]


@inlined
def point(lane: Any, W: Any) -> None:
    """The point at the next time to save; where that is the step's end, the end itself."""
    x = (W[NEXT + lane] - W[T + lane]) / W[STEP + lane]
    ending = W[NEXT + lane] == W[TN + lane]
    r = along(
        W[F0 + lane], W[F1 + lane], W[F2 + lane], W[F3 + lane],
        W[F4 + lane], W[F5 + lane], W[F6 + lane], W[F7 + lane], x,
    )  # fmt: skip
    phi = along(
        W[F8 + lane], W[F9 + lane], W[F10 + lane], W[F11 + lane],
        W[F12 + lane], W[F13 + lane], W[F14 + lane], W[F15 + lane], x,
    )  # fmt: skip
    W[SR + lane] = W[RN + lane] if ending else r
    W[SP + lane] = W[PN + lane] if ending else phi


@inlined
def accept(lane: Any, W: Any) -> None:
    """Move on, if the step was accepted; keep the angle within half a turn."""
    good, live = W[OK + lane], W[LIVE + lane]
    t, r, phi, tn, rn, pn = W[T + lane], W[R + lane], W[PHI + lane], W[TN + lane], W[RN + lane], W[PN + lane]
    ok = good > 0.0
    phi = pn if ok else phi
    turn = 1.0 if phi > np.pi else (-1.0 if phi < -np.pi else 0.0)
    W[T + lane], W[R + lane], W[PHI + lane] = (tn if ok else t), (rn if ok else r), phi - TWO_PI * turn
    W[TURNS + lane] = W[TURNS + lane] + turn
    W[H + lane] = W[HN + lane]
    W[ACCEPTED + lane] = W[ACCEPTED + lane] + good
    W[REJECTED + lane] = W[REJECTED + lane] + (live - good)


@inlined
def observe(
    j: Any, r: Any, phi: Any, distance: Any, mlt: Any, energy: Any, pitch: Any, p: Any, C: Any
) -> None:  # fmt: skip
    """Put the saved place of one particle's time `j` into its track: r, local time, energy and pitch angle."""
    distance[j] = r[j]
    mlt[j], energy[j], pitch[j] = observed(r[j], phi[j], p, C)
