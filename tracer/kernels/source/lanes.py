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
    BM,
    BMN,
    BT,
    BTN,
    D0,
    F0,
    F8,
    FLAG,
    HN,
    K1,
    K6,
    KN,
    L1,
    L6,
    LANES,
    LIMIT,
    LN,
    MU,
    NEXT,
    OK,
    PHI,
    PN,
    RN,
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
from .step import along, interpolant, trial

SAFETY, SHRINK, GROW = 0.9, 0.2, 6.0
HUGE = 1e30
NEAR_CONE = 0.8  # of the foot field: leaves room for how that changes within a step
ENDING, CROSSING, ENTERING = 1.0, 2.0, 4.0  # bits of FLAG


@inlined
def particle(W: Any, lane: Any) -> Any:
    """What rides in `lane`."""
    return W[MU * LANES + lane], W[K * LANES + lane], W[Q * LANES + lane], W[M * LANES + lane]


@inlined
def stages_of(W: Any, lane: Any) -> Any:
    """The stages that `step_all` kept."""
    return (
        W[K6 * LANES + lane], W[(K6 + 1) * LANES + lane], W[(K6 + 2) * LANES + lane], W[(K6 + 3) * LANES + lane],
        W[(K6 + 4) * LANES + lane], W[(K6 + 5) * LANES + lane], W[(K6 + 6) * LANES + lane],
        W[L6 * LANES + lane], W[(L6 + 1) * LANES + lane], W[(L6 + 2) * LANES + lane], W[(L6 + 3) * LANES + lane],
        W[(L6 + 4) * LANES + lane], W[(L6 + 5) * LANES + lane], W[(L6 + 6) * LANES + lane],
    )  # fmt: skip


@inlined
def step_all(W: Any, C: Any, sign: Any, inverse_tolerance: Any, outer: Any, inner: Any, foot_re: Any) -> None:
    """Try a step in every lane; note what calls for scalar code."""
    prefer_widest_vectors()
    for lane in range(LANES):
        r, phi, t, h = W[R * LANES + lane], W[PHI * LANES + lane], W[T * LANES + lane], W[H * LANES + lane]
        k1, l1 = W[K1 * LANES + lane], W[L1 * LANES + lane]
        p, D = particle(W, lane), drivers(W, D0 * LANES + lane, LANES)
        limit = W[LIMIT * LANES + lane]
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
        rise = abs(step) * max(abs(W[BT * LANES + lane]), abs(bt))
        near = max(W[BM * LANES + lane], bm) + rise >= NEAR_CONE * b_foot
        entering = near and W[WATCH * LANES + lane] > 0.0
        flag = (ENDING if whole else 0.0) + (CROSSING if crossing else 0.0) + (ENTERING if entering else 0.0)
        W[STEP * LANES + lane], W[TN * LANES + lane] = step, tn
        W[RN * LANES + lane], W[PN * LANES + lane], W[KN * LANES + lane], W[LN * LANES + lane] = rn, pn, kn, ln
        W[BMN * LANES + lane], W[BTN * LANES + lane] = bm, bt
        W[OK * LANES + lane], W[HN * LANES + lane] = (1.0 if ok else 0.0), hn
        W[FLAG * LANES + lane] = flag if ok else 0.0
        W[STOP * LANES + lane] = tn if ok else t - step
        k6, k7, k8, k9, k10, k11, k12, l6, l7, l8, l9, l10, l11, l12 = stages
        W[K6 * LANES + lane] = k6
        W[(K6 + 1) * LANES + lane] = k7
        W[(K6 + 2) * LANES + lane] = k8
        W[(K6 + 3) * LANES + lane] = k9
        W[(K6 + 4) * LANES + lane] = k10
        W[(K6 + 5) * LANES + lane] = k11
        W[(K6 + 6) * LANES + lane] = k12
        W[L6 * LANES + lane] = l6
        W[(L6 + 1) * LANES + lane] = l7
        W[(L6 + 2) * LANES + lane] = l8
        W[(L6 + 3) * LANES + lane] = l9
        W[(L6 + 4) * LANES + lane] = l10
        W[(L6 + 5) * LANES + lane] = l11
        W[(L6 + 6) * LANES + lane] = l12


@inlined
def interpolate_all(W: Any, C: Any) -> None:
    """The interpolant of every lane's step."""
    prefer_widest_vectors()
    for lane in range(LANES):
        f = interpolant(
            W[T * LANES + lane], W[R * LANES + lane], W[PHI * LANES + lane], W[STEP * LANES + lane], W[RN * LANES + lane],
            W[PN * LANES + lane], W[K1 * LANES + lane], W[L1 * LANES + lane], W[KN * LANES + lane], W[LN * LANES + lane],
            stages_of(W, lane), particle(W, lane), C, drivers(W, D0 * LANES + lane, LANES),
        )  # fmt: skip
        W[F0 * LANES + lane] = f[0]
        W[(F0 + 1) * LANES + lane] = f[1]
        W[(F0 + 2) * LANES + lane] = f[2]
        W[(F0 + 3) * LANES + lane] = f[3]
        W[(F0 + 4) * LANES + lane] = f[4]
        W[(F0 + 5) * LANES + lane] = f[5]
        W[(F0 + 6) * LANES + lane] = f[6]
        W[(F0 + 7) * LANES + lane] = f[7]
        W[(F0 + 8) * LANES + lane] = f[8]
        W[(F0 + 9) * LANES + lane] = f[9]
        W[(F0 + 10) * LANES + lane] = f[10]
        W[(F0 + 11) * LANES + lane] = f[11]
        W[(F0 + 12) * LANES + lane] = f[12]
        W[(F0 + 13) * LANES + lane] = f[13]
        W[(F0 + 14) * LANES + lane] = f[14]
        W[(F0 + 15) * LANES + lane] = f[15]


@inlined
def point_all(W: Any) -> None:
    """Every lane's point at its next time to save; where that is the step's end, the end itself."""
    prefer_widest_vectors()
    for lane in range(LANES):
        x = (W[NEXT * LANES + lane] - W[T * LANES + lane]) / W[STEP * LANES + lane]
        ending = W[NEXT * LANES + lane] == W[TN * LANES + lane]
        r = along(
            W[F0 * LANES + lane], W[(F0 + 1) * LANES + lane], W[(F0 + 2) * LANES + lane], W[(F0 + 3) * LANES + lane],
            W[(F0 + 4) * LANES + lane], W[(F0 + 5) * LANES + lane], W[(F0 + 6) * LANES + lane], W[(F0 + 7) * LANES + lane], x,
        )  # fmt: skip
        phi = along(
            W[F8 * LANES + lane], W[(F8 + 1) * LANES + lane], W[(F8 + 2) * LANES + lane], W[(F8 + 3) * LANES + lane],
            W[(F8 + 4) * LANES + lane], W[(F8 + 5) * LANES + lane], W[(F8 + 6) * LANES + lane], W[(F8 + 7) * LANES + lane], x,
        )  # fmt: skip
        W[SR * LANES + lane] = W[RN * LANES + lane] if ending else r
        W[SP * LANES + lane] = W[PN * LANES + lane] if ending else phi


@inlined
def accept_all(W: Any) -> None:
    """Move every lane whose step was accepted; keep the angle within half a turn."""
    prefer_widest_vectors()
    for lane in range(LANES):
        ok = W[OK * LANES + lane] > 0.0
        phi = W[PN * LANES + lane] if ok else W[PHI * LANES + lane]
        turn = 1.0 if phi > np.pi else (-1.0 if phi < -np.pi else 0.0)
        W[PHI * LANES + lane] = phi - TWO_PI * turn
        W[TURNS * LANES + lane] = W[TURNS * LANES + lane] + turn
        W[R * LANES + lane] = W[RN * LANES + lane] if ok else W[R * LANES + lane]
        W[T * LANES + lane] = W[TN * LANES + lane] if ok else W[T * LANES + lane]
        W[K1 * LANES + lane] = W[KN * LANES + lane] if ok else W[K1 * LANES + lane]
        W[L1 * LANES + lane] = W[LN * LANES + lane] if ok else W[L1 * LANES + lane]
        W[BM * LANES + lane] = W[BMN * LANES + lane] if ok else W[BM * LANES + lane]
        W[BT * LANES + lane] = W[BTN * LANES + lane] if ok else W[BT * LANES + lane]
        W[H * LANES + lane] = W[HN * LANES + lane]


@inlined
def observe_row(r: Any, phi: Any, energy: Any, pitch: Any, p: Any, C: Any) -> None:
    """Turn one particle's saved (r, phi) into r, local time, energy and pitch angle, in place; NaN stays NaN."""
    prefer_widest_vectors()
    for j in range(r.size):
        phi[j], energy[j], pitch[j] = observed(r[j], phi[j], p, C)
