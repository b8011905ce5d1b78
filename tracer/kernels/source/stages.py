"""Where the stages of a step are evaluated: written by ``scripts/write_stages.py`` from tableau.py.

Each keeps the slopes of the stage before and makes way for its own. Those are computed by the same machine code for all
stages (`advance.slopes_all`): twelve copies of it would not fit into the processor's store of decoded instructions.
"""

from __future__ import annotations

from typing import Any

from tracer.kernels.arith import inlined

from . import tableau as tb
from .layout import (
    K1, K2, K3, K4, K5, K6, K7, K8, K9, K10, K11, K12, K13, K14, K15, L1, L2, L3, L4, L5, L6, L7, L8, L9, L10,
    L11, L12, L13, L14, L15,
    KS, LS, PHI, PS, R, RS, STEP, T, TS,
)  # fmt: skip


@inlined
def stage_2(lane: Any, W: Any) -> None:
    """Time and place of stage 2."""
    h = W[STEP + lane]
    k, w = W[KS + lane], W[LS + lane]
    W[K1 + lane], W[L1 + lane] = k, w
    W[TS + lane] = W[T + lane] + tb.C2 * h
    W[RS + lane] = W[R + lane] + h * (tb.A2_1 * k)
    W[PS + lane] = W[PHI + lane] + h * (tb.A2_1 * w)


@inlined
def stage_3(lane: Any, W: Any) -> None:
    """Time and place of stage 3."""
    h = W[STEP + lane]
    k, w = W[KS + lane], W[LS + lane]
    W[K2 + lane], W[L2 + lane] = k, w
    W[TS + lane] = W[T + lane] + tb.C3 * h
    W[RS + lane] = W[R + lane] + h * (tb.A3_1 * W[K1 + lane] + tb.A3_2 * k)
    W[PS + lane] = W[PHI + lane] + h * (tb.A3_1 * W[L1 + lane] + tb.A3_2 * w)


@inlined
def stage_4(lane: Any, W: Any) -> None:
    """Time and place of stage 4."""
    h = W[STEP + lane]
    k, w = W[KS + lane], W[LS + lane]
    W[K3 + lane], W[L3 + lane] = k, w
    W[TS + lane] = W[T + lane] + tb.C4 * h
    W[RS + lane] = W[R + lane] + h * (tb.A4_1 * W[K1 + lane] + tb.A4_3 * k)
    W[PS + lane] = W[PHI + lane] + h * (tb.A4_1 * W[L1 + lane] + tb.A4_3 * w)


@inlined
def stage_5(lane: Any, W: Any) -> None:
    """Time and place of stage 5."""
    h = W[STEP + lane]
    k, w = W[KS + lane], W[LS + lane]
    W[K4 + lane], W[L4 + lane] = k, w
    W[TS + lane] = W[T + lane] + tb.C5 * h
    W[RS + lane] = W[R + lane] + h * (tb.A5_1 * W[K1 + lane] + tb.A5_3 * W[K3 + lane] + tb.A5_4 * k)
    W[PS + lane] = W[PHI + lane] + h * (tb.A5_1 * W[L1 + lane] + tb.A5_3 * W[L3 + lane] + tb.A5_4 * w)


@inlined
def stage_6(lane: Any, W: Any) -> None:
    """Time and place of stage 6."""
    h = W[STEP + lane]
    k, w = W[KS + lane], W[LS + lane]
    W[K5 + lane], W[L5 + lane] = k, w
    W[TS + lane] = W[T + lane] + tb.C6 * h
    W[RS + lane] = W[R + lane] + h * (tb.A6_1 * W[K1 + lane] + tb.A6_4 * W[K4 + lane] + tb.A6_5 * k)
    W[PS + lane] = W[PHI + lane] + h * (tb.A6_1 * W[L1 + lane] + tb.A6_4 * W[L4 + lane] + tb.A6_5 * w)


@inlined
def stage_7(lane: Any, W: Any) -> None:
    """Time and place of stage 7."""
    h = W[STEP + lane]
    k, w = W[KS + lane], W[LS + lane]
    W[K6 + lane], W[L6 + lane] = k, w
    W[TS + lane] = W[T + lane] + tb.C7 * h
    W[RS + lane] = W[R + lane] + h * ((tb.A7_1 * W[K1 + lane] + tb.A7_4 * W[K4 + lane]) + (tb.A7_5 * W[K5 + lane] +
        tb.A7_6 * k))
    W[PS + lane] = W[PHI + lane] + h * ((tb.A7_1 * W[L1 + lane] + tb.A7_4 * W[L4 + lane]) + (tb.A7_5 * W[L5 + lane]
        + tb.A7_6 * w))


@inlined
def stage_8(lane: Any, W: Any) -> None:
    """Time and place of stage 8."""
    h = W[STEP + lane]
    k, w = W[KS + lane], W[LS + lane]
    W[K7 + lane], W[L7 + lane] = k, w
    W[TS + lane] = W[T + lane] + tb.C8 * h
    W[RS + lane] = W[R + lane] + h * ((tb.A8_1 * W[K1 + lane] + tb.A8_4 * W[K4 + lane] + tb.A8_5 * W[K5 + lane]) +
        (tb.A8_6 * W[K6 + lane] + tb.A8_7 * k))
    W[PS + lane] = W[PHI + lane] + h * ((tb.A8_1 * W[L1 + lane] + tb.A8_4 * W[L4 + lane] + tb.A8_5 * W[L5 + lane]) +
        (tb.A8_6 * W[L6 + lane] + tb.A8_7 * w))


@inlined
def stage_9(lane: Any, W: Any) -> None:
    """Time and place of stage 9."""
    h = W[STEP + lane]
    k, w = W[KS + lane], W[LS + lane]
    W[K8 + lane], W[L8 + lane] = k, w
    W[TS + lane] = W[T + lane] + tb.C9 * h
    W[RS + lane] = W[R + lane] + h * ((tb.A9_1 * W[K1 + lane] + tb.A9_4 * W[K4 + lane] + tb.A9_5 * W[K5 + lane]) +
        (tb.A9_6 * W[K6 + lane] + tb.A9_7 * W[K7 + lane] + tb.A9_8 * k))
    W[PS + lane] = W[PHI + lane] + h * ((tb.A9_1 * W[L1 + lane] + tb.A9_4 * W[L4 + lane] + tb.A9_5 * W[L5 + lane]) +
        (tb.A9_6 * W[L6 + lane] + tb.A9_7 * W[L7 + lane] + tb.A9_8 * w))


@inlined
def stage_10(lane: Any, W: Any) -> None:
    """Time and place of stage 10."""
    h = W[STEP + lane]
    k, w = W[KS + lane], W[LS + lane]
    W[K9 + lane], W[L9 + lane] = k, w
    W[TS + lane] = W[T + lane] + tb.C10 * h
    W[RS + lane] = W[R + lane] + h * ((tb.A10_1 * W[K1 + lane] + tb.A10_4 * W[K4 + lane] + tb.A10_5 * W[K5 + lane] +
        tb.A10_6 * W[K6 + lane]) + (tb.A10_7 * W[K7 + lane] + tb.A10_8 * W[K8 + lane] + tb.A10_9 * k))
    W[PS + lane] = W[PHI + lane] + h * ((tb.A10_1 * W[L1 + lane] + tb.A10_4 * W[L4 + lane] + tb.A10_5 * W[L5 + lane]
        + tb.A10_6 * W[L6 + lane]) + (tb.A10_7 * W[L7 + lane] + tb.A10_8 * W[L8 + lane] + tb.A10_9 * w))


@inlined
def stage_11(lane: Any, W: Any) -> None:
    """Time and place of stage 11."""
    h = W[STEP + lane]
    k, w = W[KS + lane], W[LS + lane]
    W[K10 + lane], W[L10 + lane] = k, w
    W[TS + lane] = W[T + lane] + tb.C11 * h
    W[RS + lane] = W[R + lane] + h * ((tb.A11_1 * W[K1 + lane] + tb.A11_4 * W[K4 + lane] + tb.A11_5 * W[K5 + lane] +
        tb.A11_6 * W[K6 + lane]) + (tb.A11_7 * W[K7 + lane] + tb.A11_8 * W[K8 + lane] + tb.A11_9 * W[K9 + lane] +
        tb.A11_10 * k))
    W[PS + lane] = W[PHI + lane] + h * ((tb.A11_1 * W[L1 + lane] + tb.A11_4 * W[L4 + lane] + tb.A11_5 * W[L5 + lane]
        + tb.A11_6 * W[L6 + lane]) + (tb.A11_7 * W[L7 + lane] + tb.A11_8 * W[L8 + lane] + tb.A11_9 * W[L9 + lane] +
        tb.A11_10 * w))


@inlined
def stage_12(lane: Any, W: Any) -> None:
    """Time and place of stage 12."""
    h = W[STEP + lane]
    k, w = W[KS + lane], W[LS + lane]
    W[K11 + lane], W[L11 + lane] = k, w
    W[TS + lane] = W[T + lane] + tb.C12 * h
    W[RS + lane] = W[R + lane] + h * ((tb.A12_1 * W[K1 + lane] + tb.A12_4 * W[K4 + lane] + tb.A12_5 * W[K5 + lane] +
        tb.A12_6 * W[K6 + lane] + tb.A12_7 * W[K7 + lane]) + (tb.A12_8 * W[K8 + lane] + tb.A12_9 * W[K9 + lane] +
        tb.A12_10 * W[K10 + lane] + tb.A12_11 * k))
    W[PS + lane] = W[PHI + lane] + h * ((tb.A12_1 * W[L1 + lane] + tb.A12_4 * W[L4 + lane] + tb.A12_5 * W[L5 + lane]
        + tb.A12_6 * W[L6 + lane] + tb.A12_7 * W[L7 + lane]) + (tb.A12_8 * W[L8 + lane] + tb.A12_9 * W[L9 + lane] +
        tb.A12_10 * W[L10 + lane] + tb.A12_11 * w))


@inlined
def stage_14(lane: Any, W: Any) -> None:
    """Time and place of stage 14."""
    h = W[STEP + lane]
    k, w = W[KS + lane], W[LS + lane]
    W[K13 + lane], W[L13 + lane] = k, w
    W[TS + lane] = W[T + lane] + tb.C14 * h
    W[RS + lane] = W[R + lane] + h * ((tb.A14_1 * W[K1 + lane] + tb.A14_7 * W[K7 + lane] + tb.A14_8 * W[K8 + lane] +
        tb.A14_9 * W[K9 + lane]) + (tb.A14_10 * W[K10 + lane] + tb.A14_11 * W[K11 + lane] + tb.A14_12 * W[K12 +
        lane] + tb.A14_13 * k))
    W[PS + lane] = W[PHI + lane] + h * ((tb.A14_1 * W[L1 + lane] + tb.A14_7 * W[L7 + lane] + tb.A14_8 * W[L8 + lane]
        + tb.A14_9 * W[L9 + lane]) + (tb.A14_10 * W[L10 + lane] + tb.A14_11 * W[L11 + lane] + tb.A14_12 * W[L12 +
        lane] + tb.A14_13 * w))


@inlined
def stage_15(lane: Any, W: Any) -> None:
    """Time and place of stage 15."""
    h = W[STEP + lane]
    k, w = W[KS + lane], W[LS + lane]
    W[K14 + lane], W[L14 + lane] = k, w
    W[TS + lane] = W[T + lane] + tb.C15 * h
    W[RS + lane] = W[R + lane] + h * ((tb.A15_1 * W[K1 + lane] + tb.A15_6 * W[K6 + lane] + tb.A15_7 * W[K7 + lane] +
        tb.A15_8 * W[K8 + lane]) + (tb.A15_11 * W[K11 + lane] + tb.A15_12 * W[K12 + lane] + tb.A15_13 * W[K13 +
        lane] + tb.A15_14 * k))
    W[PS + lane] = W[PHI + lane] + h * ((tb.A15_1 * W[L1 + lane] + tb.A15_6 * W[L6 + lane] + tb.A15_7 * W[L7 + lane]
        + tb.A15_8 * W[L8 + lane]) + (tb.A15_11 * W[L11 + lane] + tb.A15_12 * W[L12 + lane] + tb.A15_13 * W[L13 +
        lane] + tb.A15_14 * w))


@inlined
def stage_16(lane: Any, W: Any) -> None:
    """Time and place of stage 16."""
    h = W[STEP + lane]
    k, w = W[KS + lane], W[LS + lane]
    W[K15 + lane], W[L15 + lane] = k, w
    W[TS + lane] = W[T + lane] + tb.C16 * h
    W[RS + lane] = W[R + lane] + h * ((tb.A16_1 * W[K1 + lane] + tb.A16_6 * W[K6 + lane] + tb.A16_7 * W[K7 + lane] +
        tb.A16_8 * W[K8 + lane]) + (tb.A16_9 * W[K9 + lane] + tb.A16_13 * W[K13 + lane] + tb.A16_14 * W[K14 + lane]
        + tb.A16_15 * k))
    W[PS + lane] = W[PHI + lane] + h * ((tb.A16_1 * W[L1 + lane] + tb.A16_6 * W[L6 + lane] + tb.A16_7 * W[L7 + lane]
        + tb.A16_8 * W[L8 + lane]) + (tb.A16_9 * W[L9 + lane] + tb.A16_13 * W[L13 + lane] + tb.A16_14 * W[L14 +
        lane] + tb.A16_15 * w))
