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
def particle(W: Any, l: Any) -> Any:
    """What rides in lane `l`."""
    return W[MU * LANES + l], W[K * LANES + l], W[Q * LANES + l], W[M * LANES + l]


@inlined
def stages_of(W: Any, l: Any) -> Any:
    """The stages that `step_all` kept."""
    return (
        W[K6 * LANES + l], W[(K6 + 1) * LANES + l], W[(K6 + 2) * LANES + l], W[(K6 + 3) * LANES + l],
        W[(K6 + 4) * LANES + l], W[(K6 + 5) * LANES + l], W[(K6 + 6) * LANES + l],
        W[L6 * LANES + l], W[(L6 + 1) * LANES + l], W[(L6 + 2) * LANES + l], W[(L6 + 3) * LANES + l],
        W[(L6 + 4) * LANES + l], W[(L6 + 5) * LANES + l], W[(L6 + 6) * LANES + l],
    )  # fmt: skip


@inlined
def step_all(W: Any, C: Any, sign: Any, inverse_tolerance: Any, outer: Any, inner: Any, foot_re: Any) -> None:
    """Try a step in every lane; note what calls for scalar code."""
    prefer_widest_vectors()
    for l in range(LANES):
        r, phi, t, h = W[R * LANES + l], W[PHI * LANES + l], W[T * LANES + l], W[H * LANES + l]
        k1, l1 = W[K1 * LANES + l], W[L1 * LANES + l]
        p, D = particle(W, l), drivers(W, D0 * LANES + l, LANES)
        limit = W[LIMIT * LANES + l]
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
        rise = abs(step) * max(abs(W[BT * LANES + l]), abs(bt))
        near = max(W[BM * LANES + l], bm) + rise >= NEAR_CONE * b_foot
        entering = near and W[WATCH * LANES + l] > 0.0
        flag = (ENDING if whole else 0.0) + (CROSSING if crossing else 0.0) + (ENTERING if entering else 0.0)
        W[STEP * LANES + l], W[TN * LANES + l] = step, tn
        W[RN * LANES + l], W[PN * LANES + l], W[KN * LANES + l], W[LN * LANES + l] = rn, pn, kn, ln
        W[BMN * LANES + l], W[BTN * LANES + l] = bm, bt
        W[OK * LANES + l], W[HN * LANES + l] = (1.0 if ok else 0.0), hn
        W[FLAG * LANES + l] = flag if ok else 0.0
        W[STOP * LANES + l] = tn if ok else t - step
        k6, k7, k8, k9, k10, k11, k12, l6, l7, l8, l9, l10, l11, l12 = stages
        W[K6 * LANES + l] = k6
        W[(K6 + 1) * LANES + l] = k7
        W[(K6 + 2) * LANES + l] = k8
        W[(K6 + 3) * LANES + l] = k9
        W[(K6 + 4) * LANES + l] = k10
        W[(K6 + 5) * LANES + l] = k11
        W[(K6 + 6) * LANES + l] = k12
        W[L6 * LANES + l] = l6
        W[(L6 + 1) * LANES + l] = l7
        W[(L6 + 2) * LANES + l] = l8
        W[(L6 + 3) * LANES + l] = l9
        W[(L6 + 4) * LANES + l] = l10
        W[(L6 + 5) * LANES + l] = l11
        W[(L6 + 6) * LANES + l] = l12


@inlined
def interpolate_all(W: Any, C: Any) -> None:
    """The interpolant of every lane's step."""
    prefer_widest_vectors()
    for l in range(LANES):
        f = interpolant(
            W[T * LANES + l], W[R * LANES + l], W[PHI * LANES + l], W[STEP * LANES + l], W[RN * LANES + l],
            W[PN * LANES + l], W[K1 * LANES + l], W[L1 * LANES + l], W[KN * LANES + l], W[LN * LANES + l],
            stages_of(W, l), particle(W, l), C, drivers(W, D0 * LANES + l, LANES),
        )  # fmt: skip
        W[F0 * LANES + l] = f[0]
        W[(F0 + 1) * LANES + l] = f[1]
        W[(F0 + 2) * LANES + l] = f[2]
        W[(F0 + 3) * LANES + l] = f[3]
        W[(F0 + 4) * LANES + l] = f[4]
        W[(F0 + 5) * LANES + l] = f[5]
        W[(F0 + 6) * LANES + l] = f[6]
        W[(F0 + 7) * LANES + l] = f[7]
        W[(F0 + 8) * LANES + l] = f[8]
        W[(F0 + 9) * LANES + l] = f[9]
        W[(F0 + 10) * LANES + l] = f[10]
        W[(F0 + 11) * LANES + l] = f[11]
        W[(F0 + 12) * LANES + l] = f[12]
        W[(F0 + 13) * LANES + l] = f[13]
        W[(F0 + 14) * LANES + l] = f[14]
        W[(F0 + 15) * LANES + l] = f[15]


@inlined
def point_all(W: Any) -> None:
    """Every lane's point at its next time to save; where that is the step's end, the end itself."""
    prefer_widest_vectors()
    for l in range(LANES):
        x = (W[NEXT * LANES + l] - W[T * LANES + l]) / W[STEP * LANES + l]
        ending = W[NEXT * LANES + l] == W[TN * LANES + l]
        r = along(
            W[F0 * LANES + l], W[(F0 + 1) * LANES + l], W[(F0 + 2) * LANES + l], W[(F0 + 3) * LANES + l],
            W[(F0 + 4) * LANES + l], W[(F0 + 5) * LANES + l], W[(F0 + 6) * LANES + l], W[(F0 + 7) * LANES + l], x,
        )  # fmt: skip
        phi = along(
            W[F8 * LANES + l], W[(F8 + 1) * LANES + l], W[(F8 + 2) * LANES + l], W[(F8 + 3) * LANES + l],
            W[(F8 + 4) * LANES + l], W[(F8 + 5) * LANES + l], W[(F8 + 6) * LANES + l], W[(F8 + 7) * LANES + l], x,
        )  # fmt: skip
        W[SR * LANES + l] = W[RN * LANES + l] if ending else r
        W[SP * LANES + l] = W[PN * LANES + l] if ending else phi


@inlined
def accept_all(W: Any) -> None:
    """Move every lane whose step was accepted; keep the angle within half a turn."""
    prefer_widest_vectors()
    for l in range(LANES):
        ok = W[OK * LANES + l] > 0.0
        phi = W[PN * LANES + l] if ok else W[PHI * LANES + l]
        turn = 1.0 if phi > np.pi else (-1.0 if phi < -np.pi else 0.0)
        W[PHI * LANES + l] = phi - TWO_PI * turn
        W[TURNS * LANES + l] = W[TURNS * LANES + l] + turn
        W[R * LANES + l] = W[RN * LANES + l] if ok else W[R * LANES + l]
        W[T * LANES + l] = W[TN * LANES + l] if ok else W[T * LANES + l]
        W[K1 * LANES + l] = W[KN * LANES + l] if ok else W[K1 * LANES + l]
        W[L1 * LANES + l] = W[LN * LANES + l] if ok else W[L1 * LANES + l]
        W[BM * LANES + l] = W[BMN * LANES + l] if ok else W[BM * LANES + l]
        W[BT * LANES + l] = W[BTN * LANES + l] if ok else W[BT * LANES + l]
        W[H * LANES + l] = W[HN * LANES + l]


@inlined
def observe_row(r: Any, phi: Any, energy: Any, pitch: Any, p: Any, C: Any) -> None:
    """Turn one particle's saved (r, phi) into r, local time, energy and pitch angle, in place; NaN stays NaN."""
    prefer_widest_vectors()
    for j in range(r.size):
        phi[j], energy[j], pitch[j] = observed(r[j], phi[j], p, C)
