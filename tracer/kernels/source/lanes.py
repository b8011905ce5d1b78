"""The vectorised part: every lane takes one step, straight line, selects only. No branch, no call into a library.

A lane's arithmetic never looks at its neighbours, so a particle's bits do not depend on which lane it rode in.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import TWO_PI, compiled, inlined, prefer_widest_vectors, rough_power

from .drift import motion_and_foot, observed
from .field import drivers
from .layout import (
    R, PHI, T, H, TURNS, MU, K, Q, M, BM, BT, LIVE, ACCEPTED, REJECTED, LIMIT, NEXT, WATCH, STEP, TN, RN, PN, BMN,
    BTN, OK, HN, FLAG, K1, K6, K7, K8, K9, K10, K11, K12, K13, K14, K15, K16, L1, L6, L7, L8, L9, L10, L11, L12,
    L13, L14, L15, L16, F0, F1, F2, F3, F4, F5, F6, F7, F8, F9, F10, F11, F12, F13, F14, F15, STOP, SR, SP, D0,
    LANES,
)  # fmt: skip
from .step import along, coefficients, interpolant, solution

# So small a safety factor rejects few steps; measured, it costs a quarter less than 0.9 at equal error.
SAFETY, SHRINK, GROW = 0.65, 0.2, 4.0
HUGE = 1e30
LONGEST, SHORTEST = 1e3, 1e-13  # steps, hours
MOST_STEPS = 2e7
STRAIGHT = 0.1  # of that bound, where the speed keeps its sign
NEAR_CONE = 0.8  # of the foot field: leaves room for how that changes within a step
CROSSING, ENTERING = 1.0, 2.0  # bits of FLAG


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
    return W[K14 + lane], W[K15 + lane], W[K16 + lane], W[L14 + lane], W[L15 + lane], W[L16 + lane]


@inlined
def begin_all(W: Any, sign: Any) -> None:
    """The length of every lane's step; up to a corner rather two even steps than a long one and a sliver."""
    prefer_widest_vectors()
    for lane in range(LANES):
        t, h, limit = W[T + lane], W[H + lane], W[LIMIT + lane]
        left = sign * (limit - t)
        step = sign * (left if h >= left else (0.5 * left if h > 0.5 * left else h))
        W[STEP + lane] = step
        W[TN + lane] = limit if h >= left else t + step


@inlined
def judge_all(W: Any, C: Any, sign: Any, inverse_tolerance: Any, outer: Any, inner: Any, foot_re: Any) -> Any:
    """The end of every lane's step, whether it is good, the next one's length, and what it may have met.

    Returns how many lanes call for scalar code.
    """
    prefer_widest_vectors()
    calls = 0
    for lane in range(LANES):
        r, phi, t, h, step, tn = W[R + lane], W[PHI + lane], W[T + lane], W[H + lane], W[STEP + lane], W[TN + lane]
        p, D = particle(W, lane), drivers(W, D0 + lane, LANES)
        k1 = W[K1 + lane]
        rn, pn, error = solution(r, phi, step, k1, W[L1 + lane], stages_of(W, lane))
        kn, ln, bm, bt, b_foot = motion_and_foot(tn, rn, pn, foot_re, p, C, D)
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
        stray = 0.5 * abs(step) * max(abs(k1), abs(kn)) * (1.0 if k1 * kn <= 0.0 else STRAIGHT)
        crossing = (max(r, rn) + stray >= outer) or (min(r, rn) - stray <= inner)
        was, rate = W[BM + lane], W[BT + lane]
        rise = abs(step) * max(abs(rate), abs(bt)) * (1.0 if rate * bt <= 0.0 else STRAIGHT)
        entering = max(was, bm) + rise >= NEAR_CONE * b_foot and W[WATCH + lane] > 0.0
        flag = (CROSSING if crossing else 0.0) + (ENTERING if entering else 0.0)
        flag = flag if ok else 0.0
        stop = tn if ok else t - step
        W[RN + lane], W[PN + lane], W[K13 + lane], W[L13 + lane] = rn, pn, kn, ln
        W[BMN + lane], W[BTN + lane] = bm, bt
        W[OK + lane], W[HN + lane] = (1.0 if ok else 0.0), hn
        W[FLAG + lane], W[STOP + lane] = flag, stop
        saving = sign * (stop - W[NEXT + lane]) >= 0.0
        ending = ok and tn == W[LIMIT + lane]
        failing = hn < SHORTEST or W[ACCEPTED + lane] + W[REJECTED + lane] > MOST_STEPS
        calls += 1 if live and (saving or ending or failing or flag > 0.0) else 0
    return calls


@compiled
def interpolate_one(W: Any, lane: Any, C: Any) -> None:
    """The interpolant of one lane's step, by scalar code: worth it where few lanes need theirs."""
    f = interpolant(
        W[T + lane], W[R + lane], W[PHI + lane], W[STEP + lane], W[RN + lane], W[PN + lane], W[K1 + lane], W[L1 + lane],
        W[K13 + lane], W[L13 + lane], stages_of(W, lane), particle(W, lane), C, drivers(W, D0 + lane, LANES),
    )  # fmt: skip
    for i in range(16):
        W[F0 + i * LANES + lane] = f[i]


@inlined
def interpolate_all(W: Any, C: Any) -> None:
    """The interpolant of every lane's step, once stages 14 to 16 are there."""
    prefer_widest_vectors()
    for lane in range(LANES):
        f = coefficients(
            W[R + lane], W[PHI + lane], W[STEP + lane], W[RN + lane], W[PN + lane], W[K1 + lane], W[L1 + lane],
            W[K13 + lane], W[L13 + lane], stages_of(W, lane), late_stages_of(W, lane),
        )  # fmt: skip
        W[F0 + lane] = f[0]
        W[F1 + lane] = f[1]
        W[F2 + lane] = f[2]
        W[F3 + lane] = f[3]
        W[F4 + lane] = f[4]
        W[F5 + lane] = f[5]
        W[F6 + lane] = f[6]
        W[F7 + lane] = f[7]
        W[F8 + lane] = f[8]
        W[F9 + lane] = f[9]
        W[F10 + lane] = f[10]
        W[F11 + lane] = f[11]
        W[F12 + lane] = f[12]
        W[F13 + lane] = f[13]
        W[F14 + lane] = f[14]
        W[F15 + lane] = f[15]


@inlined
def point_all(W: Any) -> None:
    """Every lane's point at its next time to save; where that is the step's end, the end itself."""
    prefer_widest_vectors()
    for lane in range(LANES):
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
def accept_all(W: Any) -> None:
    """Move every lane whose step was accepted; keep the angle within half a turn."""
    prefer_widest_vectors()
    for lane in range(LANES):
        ok = W[OK + lane] > 0.0
        phi = W[PN + lane] if ok else W[PHI + lane]
        turn = 1.0 if phi > np.pi else (-1.0 if phi < -np.pi else 0.0)
        W[PHI + lane] = phi - TWO_PI * turn
        W[TURNS + lane] = W[TURNS + lane] + turn
        W[R + lane] = W[RN + lane] if ok else W[R + lane]
        W[T + lane] = W[TN + lane] if ok else W[T + lane]
        W[K1 + lane] = W[K13 + lane] if ok else W[K1 + lane]
        W[L1 + lane] = W[L13 + lane] if ok else W[L1 + lane]
        W[BM + lane] = W[BMN + lane] if ok else W[BM + lane]
        W[BT + lane] = W[BTN + lane] if ok else W[BT + lane]
        W[H + lane] = W[HN + lane]
        W[ACCEPTED + lane] = W[ACCEPTED + lane] + W[OK + lane]
        W[REJECTED + lane] = W[REJECTED + lane] + (W[LIVE + lane] - W[OK + lane])


@inlined
def observe_row(r: Any, phi: Any, energy: Any, pitch: Any, p: Any, C: Any) -> None:
    """Turn one particle's saved (r, phi) into r, local time, energy and pitch angle, in place; NaN stays NaN."""
    prefer_widest_vectors()
    for j in range(r.size):
        phi[j], energy[j], pitch[j] = observed(r[j], phi[j], p, C)
