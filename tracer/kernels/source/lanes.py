"""The vectorised part: every lane takes one step, straight line, selects only. No branch, no call into a library.

A lane's arithmetic never looks at its neighbours, so a particle's bits do not depend on which lane it rode in.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import TWO_PI, inlined, prefer_widest_vectors, rough_power

from .drift import motion_and_foot, observed
from .field import drivers
from .layout import (
    BM, BMN, BT, BTN, D0, F0, F1, F2, F3, F4, F5, F6, F7, F8, F9, F10, F11, F12, F13, F14, F15, FLAG, HN, K1, K6,
    K7, K8, K9, K10, K11, K12, KN, L1, L6, L7, L8, L9, L10, L11, L12, LANES, LIMIT, LN, MU, NEXT, OK, PHI, PN, RN,
    SP, SR, STEP, STOP, TN, TURNS, WATCH, H, K, M, Q, R, T,
)  # fmt: skip
from .step import along, interpolant, trial

SAFETY, SHRINK, GROW = 0.9, 0.2, 6.0
HUGE = 1e30
NEAR_CONE = 0.8  # of the foot field: leaves room for how that changes within a step
ENDING, CROSSING, ENTERING = 1.0, 2.0, 4.0  # bits of FLAG


@inlined
def particle(W: Any, lane: Any) -> Any:
    """What rides in `lane`."""
    return W[MU + lane], W[K + lane], W[Q + lane], W[M + lane]


@inlined
def stages_of(W: Any, lane: Any) -> Any:
    """The stages that `step_all` kept."""
    return (
        W[K6 + lane], W[K7 + lane], W[K8 + lane], W[K9 + lane],
        W[K10 + lane], W[K11 + lane], W[K12 + lane],
        W[L6 + lane], W[L7 + lane], W[L8 + lane], W[L9 + lane],
        W[L10 + lane], W[L11 + lane], W[L12 + lane],
    )  # fmt: skip


@inlined
def step_all(W: Any, C: Any, sign: Any, inverse_tolerance: Any, outer: Any, inner: Any, foot_re: Any) -> None:
    """Try a step in every lane; note what calls for scalar code."""
    prefer_widest_vectors()
    for lane in range(LANES):
        r, phi, t, h = W[R + lane], W[PHI + lane], W[T + lane], W[H + lane]
        k1, l1 = W[K1 + lane], W[L1 + lane]
        p, D = particle(W, lane), drivers(W, D0 + lane, LANES)
        limit = W[LIMIT + lane]
        left = sign * (limit - t)
        # two even steps rather than a long one and a sliver
        whole = h >= left
        clipped = h > 0.5 * left
        step = sign * (left if whole else (0.5 * left if clipped else h))
        tn = limit if whole else t + step
        rn, pn, error, stages = trial(t, r, phi, step, k1, l1, p, C, D)
        kn, ln, bm, bt, b_foot = motion_and_foot(tn, rn, pn, foot_re, p, C, D)
        q = error * inverse_tolerance
        ok = q <= 1.0
        q = q if q < HUGE else HUGE  # a NaN too
        factor = SAFETY * rough_power(q + 1e-30, -0.125)
        factor = factor if factor < GROW else GROW
        factor = factor if factor > SHRINK else SHRINK
        hn = abs(step) * factor
        # a step cut short by a corner says little about the next one
        hn = h if (ok and clipped and h > hn) else hn
        # half the step at the larger speed bounds what the path strays from its ends
        stray = 0.5 * abs(step) * max(abs(k1), abs(kn))
        crossing = (max(r, rn) + stray >= outer) or (min(r, rn) - stray <= inner)
        rise = abs(step) * max(abs(W[BT + lane]), abs(bt))
        near = max(W[BM + lane], bm) + rise >= NEAR_CONE * b_foot
        entering = near and W[WATCH + lane] > 0.0
        flag = (ENDING if whole else 0.0) + (CROSSING if crossing else 0.0) + (ENTERING if entering else 0.0)
        W[STEP + lane], W[TN + lane] = step, tn
        W[RN + lane], W[PN + lane], W[KN + lane], W[LN + lane] = rn, pn, kn, ln
        W[BMN + lane], W[BTN + lane] = bm, bt
        W[OK + lane], W[HN + lane] = (1.0 if ok else 0.0), hn
        W[FLAG + lane] = flag if ok else 0.0
        W[STOP + lane] = tn if ok else t - step
        k6, k7, k8, k9, k10, k11, k12, l6, l7, l8, l9, l10, l11, l12 = stages
        W[K6 + lane] = k6
        W[K7 + lane] = k7
        W[K8 + lane] = k8
        W[K9 + lane] = k9
        W[K10 + lane] = k10
        W[K11 + lane] = k11
        W[K12 + lane] = k12
        W[L6 + lane] = l6
        W[L7 + lane] = l7
        W[L8 + lane] = l8
        W[L9 + lane] = l9
        W[L10 + lane] = l10
        W[L11 + lane] = l11
        W[L12 + lane] = l12


@inlined
def interpolate_all(W: Any, C: Any) -> None:
    """The interpolant of every lane's step."""
    prefer_widest_vectors()
    for lane in range(LANES):
        f = interpolant(
            W[T + lane], W[R + lane], W[PHI + lane], W[STEP + lane], W[RN + lane],
            W[PN + lane], W[K1 + lane], W[L1 + lane], W[KN + lane], W[LN + lane],
            stages_of(W, lane), particle(W, lane), C, drivers(W, D0 + lane, LANES),
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
        W[K1 + lane] = W[KN + lane] if ok else W[K1 + lane]
        W[L1 + lane] = W[LN + lane] if ok else W[L1 + lane]
        W[BM + lane] = W[BMN + lane] if ok else W[BM + lane]
        W[BT + lane] = W[BTN + lane] if ok else W[BT + lane]
        W[H + lane] = W[HN + lane]


@inlined
def observe_row(r: Any, phi: Any, energy: Any, pitch: Any, p: Any, C: Any) -> None:
    """Turn one particle's saved (r, phi) into r, local time, energy and pitch angle, in place; NaN stays NaN."""
    prefer_widest_vectors()
    for j in range(r.size):
        phi[j], energy[j], pitch[j] = observed(r[j], phi[j], p, C)
