"""The stages of one step, each for all lanes before the next: written by ``scripts/write_stages.py`` from tableau.py.

Within a stage the lanes are independent, so that the processor works on several registers full of them at once; a step
that went through all stages of one register before the next would wait for itself.
"""

from __future__ import annotations

from typing import Any

from tracer.kernels.arith import inlined, prefer_widest_vectors

from . import tableau as tb
from .drift import slope
from .field import drivers
from .layout import (
    D0, K, K1, K2, K3, K4, K5, K6, K7, K8, K9, K10, K11, K12, K13, K14, K15, K16, L1, L2, L3, L4, L5, L6, L7, L8, L9,
    L10, L11, L12, L13, L14, L15, L16,
    LANES, M, MU, PHI, Q, R, STEP, T,
)  # fmt: skip


@inlined
def stage_2(W: Any, C: Any) -> None:
    """Slopes of stage 2."""
    prefer_widest_vectors()
    for lane in range(LANES):
        h = W[STEP + lane]
        p = (W[MU + lane], W[K + lane], W[Q + lane], W[M + lane])
        r = W[R + lane] + h * (tb.A2_1 * W[K1 + lane])
        phi = W[PHI + lane] + h * (tb.A2_1 * W[L1 + lane])
        W[K2 + lane], W[L2 + lane] = slope(W[T + lane] + tb.C2 * h, r, phi, p, C, drivers(W, D0 + lane, LANES))


@inlined
def stage_3(W: Any, C: Any) -> None:
    """Slopes of stage 3."""
    prefer_widest_vectors()
    for lane in range(LANES):
        h = W[STEP + lane]
        p = (W[MU + lane], W[K + lane], W[Q + lane], W[M + lane])
        r = W[R + lane] + h * (tb.A3_1 * W[K1 + lane] + tb.A3_2 * W[K2 + lane])
        phi = W[PHI + lane] + h * (tb.A3_1 * W[L1 + lane] + tb.A3_2 * W[L2 + lane])
        W[K3 + lane], W[L3 + lane] = slope(W[T + lane] + tb.C3 * h, r, phi, p, C, drivers(W, D0 + lane, LANES))


@inlined
def stage_4(W: Any, C: Any) -> None:
    """Slopes of stage 4."""
    prefer_widest_vectors()
    for lane in range(LANES):
        h = W[STEP + lane]
        p = (W[MU + lane], W[K + lane], W[Q + lane], W[M + lane])
        r = W[R + lane] + h * (tb.A4_1 * W[K1 + lane] + tb.A4_3 * W[K3 + lane])
        phi = W[PHI + lane] + h * (tb.A4_1 * W[L1 + lane] + tb.A4_3 * W[L3 + lane])
        W[K4 + lane], W[L4 + lane] = slope(W[T + lane] + tb.C4 * h, r, phi, p, C, drivers(W, D0 + lane, LANES))


@inlined
def stage_5(W: Any, C: Any) -> None:
    """Slopes of stage 5."""
    prefer_widest_vectors()
    for lane in range(LANES):
        h = W[STEP + lane]
        p = (W[MU + lane], W[K + lane], W[Q + lane], W[M + lane])
        r = W[R + lane] + h * (tb.A5_1 * W[K1 + lane] + tb.A5_3 * W[K3 + lane] + tb.A5_4 * W[K4 + lane])
        phi = W[PHI + lane] + h * (tb.A5_1 * W[L1 + lane] + tb.A5_3 * W[L3 + lane] + tb.A5_4 * W[L4 + lane])
        W[K5 + lane], W[L5 + lane] = slope(W[T + lane] + tb.C5 * h, r, phi, p, C, drivers(W, D0 + lane, LANES))


@inlined
def stage_6(W: Any, C: Any) -> None:
    """Slopes of stage 6."""
    prefer_widest_vectors()
    for lane in range(LANES):
        h = W[STEP + lane]
        p = (W[MU + lane], W[K + lane], W[Q + lane], W[M + lane])
        r = W[R + lane] + h * (tb.A6_1 * W[K1 + lane] + tb.A6_4 * W[K4 + lane] + tb.A6_5 * W[K5 + lane])
        phi = W[PHI + lane] + h * (tb.A6_1 * W[L1 + lane] + tb.A6_4 * W[L4 + lane] + tb.A6_5 * W[L5 + lane])
        W[K6 + lane], W[L6 + lane] = slope(W[T + lane] + tb.C6 * h, r, phi, p, C, drivers(W, D0 + lane, LANES))


@inlined
def stage_7(W: Any, C: Any) -> None:
    """Slopes of stage 7."""
    prefer_widest_vectors()
    for lane in range(LANES):
        h = W[STEP + lane]
        p = (W[MU + lane], W[K + lane], W[Q + lane], W[M + lane])
        r = W[R + lane] + h * (tb.A7_1 * W[K1 + lane] + tb.A7_4 * W[K4 + lane] + tb.A7_5 * W[K5 + lane] + tb.A7_6 *
            W[K6 + lane])
        phi = W[PHI + lane] + h * (tb.A7_1 * W[L1 + lane] + tb.A7_4 * W[L4 + lane] + tb.A7_5 * W[L5 + lane] +
            tb.A7_6 * W[L6 + lane])
        W[K7 + lane], W[L7 + lane] = slope(W[T + lane] + tb.C7 * h, r, phi, p, C, drivers(W, D0 + lane, LANES))


@inlined
def stage_8(W: Any, C: Any) -> None:
    """Slopes of stage 8."""
    prefer_widest_vectors()
    for lane in range(LANES):
        h = W[STEP + lane]
        p = (W[MU + lane], W[K + lane], W[Q + lane], W[M + lane])
        r = W[R + lane] + h * (tb.A8_1 * W[K1 + lane] + tb.A8_4 * W[K4 + lane] + tb.A8_5 * W[K5 + lane] + tb.A8_6 *
            W[K6 + lane] + tb.A8_7 * W[K7 + lane])
        phi = W[PHI + lane] + h * (tb.A8_1 * W[L1 + lane] + tb.A8_4 * W[L4 + lane] + tb.A8_5 * W[L5 + lane] +
            tb.A8_6 * W[L6 + lane] + tb.A8_7 * W[L7 + lane])
        W[K8 + lane], W[L8 + lane] = slope(W[T + lane] + tb.C8 * h, r, phi, p, C, drivers(W, D0 + lane, LANES))


@inlined
def stage_9(W: Any, C: Any) -> None:
    """Slopes of stage 9."""
    prefer_widest_vectors()
    for lane in range(LANES):
        h = W[STEP + lane]
        p = (W[MU + lane], W[K + lane], W[Q + lane], W[M + lane])
        r = W[R + lane] + h * (tb.A9_1 * W[K1 + lane] + tb.A9_4 * W[K4 + lane] + tb.A9_5 * W[K5 + lane] + tb.A9_6 *
            W[K6 + lane] + tb.A9_7 * W[K7 + lane] + tb.A9_8 * W[K8 + lane])
        phi = W[PHI + lane] + h * (tb.A9_1 * W[L1 + lane] + tb.A9_4 * W[L4 + lane] + tb.A9_5 * W[L5 + lane] +
            tb.A9_6 * W[L6 + lane] + tb.A9_7 * W[L7 + lane] + tb.A9_8 * W[L8 + lane])
        W[K9 + lane], W[L9 + lane] = slope(W[T + lane] + tb.C9 * h, r, phi, p, C, drivers(W, D0 + lane, LANES))


@inlined
def stage_10(W: Any, C: Any) -> None:
    """Slopes of stage 10."""
    prefer_widest_vectors()
    for lane in range(LANES):
        h = W[STEP + lane]
        p = (W[MU + lane], W[K + lane], W[Q + lane], W[M + lane])
        r = W[R + lane] + h * (tb.A10_1 * W[K1 + lane] + tb.A10_4 * W[K4 + lane] + tb.A10_5 * W[K5 + lane] +
            tb.A10_6 * W[K6 + lane] + tb.A10_7 * W[K7 + lane] + tb.A10_8 * W[K8 + lane] + tb.A10_9 * W[K9 + lane])
        phi = W[PHI + lane] + h * (tb.A10_1 * W[L1 + lane] + tb.A10_4 * W[L4 + lane] + tb.A10_5 * W[L5 + lane] +
            tb.A10_6 * W[L6 + lane] + tb.A10_7 * W[L7 + lane] + tb.A10_8 * W[L8 + lane] + tb.A10_9 * W[L9 + lane])
        W[K10 + lane], W[L10 + lane] = slope(W[T + lane] + tb.C10 * h, r, phi, p, C, drivers(W, D0 + lane, LANES))


@inlined
def stage_11(W: Any, C: Any) -> None:
    """Slopes of stage 11."""
    prefer_widest_vectors()
    for lane in range(LANES):
        h = W[STEP + lane]
        p = (W[MU + lane], W[K + lane], W[Q + lane], W[M + lane])
        r = W[R + lane] + h * (tb.A11_1 * W[K1 + lane] + tb.A11_4 * W[K4 + lane] + tb.A11_5 * W[K5 + lane] +
            tb.A11_6 * W[K6 + lane] + tb.A11_7 * W[K7 + lane] + tb.A11_8 * W[K8 + lane] + tb.A11_9 * W[K9 + lane] +
            tb.A11_10 * W[K10 + lane])
        phi = W[PHI + lane] + h * (tb.A11_1 * W[L1 + lane] + tb.A11_4 * W[L4 + lane] + tb.A11_5 * W[L5 + lane] +
            tb.A11_6 * W[L6 + lane] + tb.A11_7 * W[L7 + lane] + tb.A11_8 * W[L8 + lane] + tb.A11_9 * W[L9 + lane] +
            tb.A11_10 * W[L10 + lane])
        W[K11 + lane], W[L11 + lane] = slope(W[T + lane] + tb.C11 * h, r, phi, p, C, drivers(W, D0 + lane, LANES))


@inlined
def stage_12(W: Any, C: Any) -> None:
    """Slopes of stage 12."""
    prefer_widest_vectors()
    for lane in range(LANES):
        h = W[STEP + lane]
        p = (W[MU + lane], W[K + lane], W[Q + lane], W[M + lane])
        r = W[R + lane] + h * (tb.A12_1 * W[K1 + lane] + tb.A12_4 * W[K4 + lane] + tb.A12_5 * W[K5 + lane] +
            tb.A12_6 * W[K6 + lane] + tb.A12_7 * W[K7 + lane] + tb.A12_8 * W[K8 + lane] + tb.A12_9 * W[K9 + lane] +
            tb.A12_10 * W[K10 + lane] + tb.A12_11 * W[K11 + lane])
        phi = W[PHI + lane] + h * (tb.A12_1 * W[L1 + lane] + tb.A12_4 * W[L4 + lane] + tb.A12_5 * W[L5 + lane] +
            tb.A12_6 * W[L6 + lane] + tb.A12_7 * W[L7 + lane] + tb.A12_8 * W[L8 + lane] + tb.A12_9 * W[L9 + lane] +
            tb.A12_10 * W[L10 + lane] + tb.A12_11 * W[L11 + lane])
        W[K12 + lane], W[L12 + lane] = slope(W[T + lane] + tb.C12 * h, r, phi, p, C, drivers(W, D0 + lane, LANES))


@inlined
def stage_14(W: Any, C: Any) -> None:
    """Slopes of stage 14."""
    prefer_widest_vectors()
    for lane in range(LANES):
        h = W[STEP + lane]
        p = (W[MU + lane], W[K + lane], W[Q + lane], W[M + lane])
        r = W[R + lane] + h * (tb.A14_1 * W[K1 + lane] + tb.A14_7 * W[K7 + lane] + tb.A14_8 * W[K8 + lane] +
            tb.A14_9 * W[K9 + lane] + tb.A14_10 * W[K10 + lane] + tb.A14_11 * W[K11 + lane] + tb.A14_12 * W[K12 +
            lane] + tb.A14_13 * W[K13 + lane])
        phi = W[PHI + lane] + h * (tb.A14_1 * W[L1 + lane] + tb.A14_7 * W[L7 + lane] + tb.A14_8 * W[L8 + lane] +
            tb.A14_9 * W[L9 + lane] + tb.A14_10 * W[L10 + lane] + tb.A14_11 * W[L11 + lane] + tb.A14_12 * W[L12 +
            lane] + tb.A14_13 * W[L13 + lane])
        W[K14 + lane], W[L14 + lane] = slope(W[T + lane] + tb.C14 * h, r, phi, p, C, drivers(W, D0 + lane, LANES))


@inlined
def stage_15(W: Any, C: Any) -> None:
    """Slopes of stage 15."""
    prefer_widest_vectors()
    for lane in range(LANES):
        h = W[STEP + lane]
        p = (W[MU + lane], W[K + lane], W[Q + lane], W[M + lane])
        r = W[R + lane] + h * (tb.A15_1 * W[K1 + lane] + tb.A15_6 * W[K6 + lane] + tb.A15_7 * W[K7 + lane] +
            tb.A15_8 * W[K8 + lane] + tb.A15_11 * W[K11 + lane] + tb.A15_12 * W[K12 + lane] + tb.A15_13 * W[K13 +
            lane] + tb.A15_14 * W[K14 + lane])
        phi = W[PHI + lane] + h * (tb.A15_1 * W[L1 + lane] + tb.A15_6 * W[L6 + lane] + tb.A15_7 * W[L7 + lane] +
            tb.A15_8 * W[L8 + lane] + tb.A15_11 * W[L11 + lane] + tb.A15_12 * W[L12 + lane] + tb.A15_13 * W[L13 +
            lane] + tb.A15_14 * W[L14 + lane])
        W[K15 + lane], W[L15 + lane] = slope(W[T + lane] + tb.C15 * h, r, phi, p, C, drivers(W, D0 + lane, LANES))


@inlined
def stage_16(W: Any, C: Any) -> None:
    """Slopes of stage 16."""
    prefer_widest_vectors()
    for lane in range(LANES):
        h = W[STEP + lane]
        p = (W[MU + lane], W[K + lane], W[Q + lane], W[M + lane])
        r = W[R + lane] + h * (tb.A16_1 * W[K1 + lane] + tb.A16_6 * W[K6 + lane] + tb.A16_7 * W[K7 + lane] +
            tb.A16_8 * W[K8 + lane] + tb.A16_9 * W[K9 + lane] + tb.A16_13 * W[K13 + lane] + tb.A16_14 * W[K14 +
            lane] + tb.A16_15 * W[K15 + lane])
        phi = W[PHI + lane] + h * (tb.A16_1 * W[L1 + lane] + tb.A16_6 * W[L6 + lane] + tb.A16_7 * W[L7 + lane] +
            tb.A16_8 * W[L8 + lane] + tb.A16_9 * W[L9 + lane] + tb.A16_13 * W[L13 + lane] + tb.A16_14 * W[L14 +
            lane] + tb.A16_15 * W[L15 + lane])
        W[K16 + lane], W[L16 + lane] = slope(W[T + lane] + tb.C16 * h, r, phi, p, C, drivers(W, D0 + lane, LANES))
