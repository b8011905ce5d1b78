"""One step of the method, the error it made, and the interpolant over it. Straight-line arithmetic only."""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import compiled, inlined

from . import tableau as tb
from .drift import slope

TINY = 1e-300  # keeps 0/0 away where the field is uniform along the step

# fmt: off


@inlined
def solution(r: Any, phi: Any, h: Any, k1: Any, l1: Any, stages: Any) -> Any:
    """The new point, and DOP853's estimate of the local error, as a distance in R_E."""
    k6, k7, k8, k9, k10, k11, k12, l6, l7, l8, l9, l10, l11, l12 = stages
    rn = (
        r + h * (tb.B1 * k1 + tb.B6 * k6 + tb.B7 * k7 + tb.B8 * k8 + tb.B9 * k9 + tb.B10 * k10 + tb.B11 * k11 + tb.B12
        * k12)
    )
    pn = (
        phi + h * (tb.B1 * l1 + tb.B6 * l6 + tb.B7 * l7 + tb.B8 * l8 + tb.B9 * l9 + tb.B10 * l10 + tb.B11 * l11 +
        tb.B12 * l12)
    )
    e5r = (
        tb.E5_1 * k1 + tb.E5_6 * k6 + tb.E5_7 * k7 + tb.E5_8 * k8 + tb.E5_9 * k9 + tb.E5_10 * k10 + tb.E5_11 * k11 +
        tb.E5_12 * k12
    )
    e5p = (
        tb.E5_1 * l1 + tb.E5_6 * l6 + tb.E5_7 * l7 + tb.E5_8 * l8 + tb.E5_9 * l9 + tb.E5_10 * l10 + tb.E5_11 * l11 +
        tb.E5_12 * l12
    )
    e3r = (
        tb.E3_1 * k1 + tb.E3_6 * k6 + tb.E3_7 * k7 + tb.E3_8 * k8 + tb.E3_9 * k9 + tb.E3_10 * k10 + tb.E3_11 * k11 +
        tb.E3_12 * k12
    )
    e3p = (
        tb.E3_1 * l1 + tb.E3_6 * l6 + tb.E3_7 * l7 + tb.E3_8 * l8 + tb.E3_9 * l9 + tb.E3_10 * l10 + tb.E3_11 * l11 +
        tb.E3_12 * l12
    )
    # distances in R_E: r itself, and r times the angle
    five = e5r * e5r + r * r * e5p * e5p
    three = e3r * e3r + r * r * e3p * e3p
    error = abs(h) * five / np.sqrt(five + 0.01 * three + TINY)
    return rn, pn, error


@inlined
def trial(t: Any, r: Any, phi: Any, h: Any, k1: Any, l1: Any, p: Any, C: Any, D: Any) -> Any:
    """Try a step of `h` hours.

    `k` are slopes of r, `l` those of phi; `p` the particle, `C` constants of the field, `D` its drivers in this
    segment.

    Returns
    -------
    rn, pn : the new point
    error : estimate of the local error, R_E
    stages : the slopes that the interpolant needs
    """
    k2, l2 = slope(t + tb.C2 * h, r + h * (tb.A2_1 * k1), phi + h * (tb.A2_1 * l1), p, C, D)
    k3, l3 = slope(
        t + tb.C3 * h, r + h * (tb.A3_1 * k1 + tb.A3_2 * k2),
        phi + h * (tb.A3_1 * l1 + tb.A3_2 * l2), p, C, D
    )
    k4, l4 = slope(
        t + tb.C4 * h, r + h * (tb.A4_1 * k1 + tb.A4_3 * k3),
        phi + h * (tb.A4_1 * l1 + tb.A4_3 * l3), p, C, D
    )
    k5, l5 = slope(
        t + tb.C5 * h, r + h * (tb.A5_1 * k1 + tb.A5_3 * k3 + tb.A5_4 * k4),
        phi + h * (tb.A5_1 * l1 + tb.A5_3 * l3 + tb.A5_4 * l4), p, C, D
    )
    k6, l6 = slope(
        t + tb.C6 * h, r + h * (tb.A6_1 * k1 + tb.A6_4 * k4 + tb.A6_5 * k5),
        phi + h * (tb.A6_1 * l1 + tb.A6_4 * l4 + tb.A6_5 * l5), p, C, D
    )
    k7, l7 = slope(
        t + tb.C7 * h, r + h * (tb.A7_1 * k1 + tb.A7_4 * k4 + tb.A7_5 * k5 + tb.A7_6 * k6),
        phi + h * (tb.A7_1 * l1 + tb.A7_4 * l4 + tb.A7_5 * l5 + tb.A7_6 * l6), p, C, D
    )
    k8, l8 = slope(
        t + tb.C8 * h, r + h * (tb.A8_1 * k1 + tb.A8_4 * k4 + tb.A8_5 * k5 + tb.A8_6 * k6 + tb.A8_7 * k7),
        phi + h * (tb.A8_1 * l1 + tb.A8_4 * l4 + tb.A8_5 * l5 + tb.A8_6 * l6 + tb.A8_7 * l7), p, C, D
    )
    k9, l9 = slope(
        t + tb.C9 * h, r + h * (tb.A9_1 * k1 + tb.A9_4 * k4 + tb.A9_5 * k5 + tb.A9_6 * k6 + tb.A9_7 * k7 + tb.A9_8 *
        k8),
        phi + h * (tb.A9_1 * l1 + tb.A9_4 * l4 + tb.A9_5 * l5 + tb.A9_6 * l6 + tb.A9_7 * l7 + tb.A9_8 * l8), p, C, D
    )
    k10, l10 = slope(
        t + tb.C10 * h, r + h * (tb.A10_1 * k1 + tb.A10_4 * k4 + tb.A10_5 * k5 + tb.A10_6 * k6 + tb.A10_7 * k7 +
        tb.A10_8 * k8 + tb.A10_9 * k9),
        phi + h * (tb.A10_1 * l1 + tb.A10_4 * l4 + tb.A10_5 * l5 + tb.A10_6 * l6 + tb.A10_7 * l7 + tb.A10_8 * l8 +
        tb.A10_9 * l9), p, C, D
    )
    k11, l11 = slope(
        t + tb.C11 * h, r + h * (tb.A11_1 * k1 + tb.A11_4 * k4 + tb.A11_5 * k5 + tb.A11_6 * k6 + tb.A11_7 * k7 +
        tb.A11_8 * k8 + tb.A11_9 * k9 + tb.A11_10 * k10),
        phi + h * (tb.A11_1 * l1 + tb.A11_4 * l4 + tb.A11_5 * l5 + tb.A11_6 * l6 + tb.A11_7 * l7 + tb.A11_8 * l8 +
        tb.A11_9 * l9 + tb.A11_10 * l10), p, C, D
    )
    k12, l12 = slope(
        t + tb.C12 * h, r + h * (tb.A12_1 * k1 + tb.A12_4 * k4 + tb.A12_5 * k5 + tb.A12_6 * k6 + tb.A12_7 * k7 +
        tb.A12_8 * k8 + tb.A12_9 * k9 + tb.A12_10 * k10 + tb.A12_11 * k11),
        phi + h * (tb.A12_1 * l1 + tb.A12_4 * l4 + tb.A12_5 * l5 + tb.A12_6 * l6 + tb.A12_7 * l7 + tb.A12_8 * l8 +
        tb.A12_9 * l9 + tb.A12_10 * l10 + tb.A12_11 * l11), p, C, D
    )
    stages = (k6, k7, k8, k9, k10, k11, k12, l6, l7, l8, l9, l10, l11, l12)
    rn, pn, error = solution(r, phi, h, k1, l1, stages)
    return rn, pn, error, stages


@compiled
def trial_at(t: Any, r: Any, phi: Any, h: Any, k1: Any, l1: Any, p: Any, C: Any, D: Any) -> Any:
    """`trial`, for scalar code: the end point alone."""
    rn, pn, _, _ = trial(t, r, phi, h, k1, l1, p, C, D)
    return rn, pn


@inlined
def coefficients(
    r: Any, phi: Any, h: Any, rn: Any, pn: Any, k1: Any, l1: Any, k13: Any, l13: Any, stages: Any, late: Any
) -> Any:
    """The interpolant's coefficients over an accepted step, eight for r and eight for phi; `late` are stages 14 to
    16."""
    k6, k7, k8, k9, k10, k11, k12, l6, l7, l8, l9, l10, l11, l12 = stages
    k14, k15, k16, l14, l15, l16 = late
    f4r = (
        h * (tb.D4_1 * k1 + tb.D4_6 * k6 + tb.D4_7 * k7 + tb.D4_8 * k8 + tb.D4_9 * k9 + tb.D4_10 * k10 + tb.D4_11 *
        k11 + tb.D4_12 * k12 + tb.D4_13 * k13 + tb.D4_14 * k14 + tb.D4_15 * k15 + tb.D4_16 * k16)
    )
    f4p = (
        h * (tb.D4_1 * l1 + tb.D4_6 * l6 + tb.D4_7 * l7 + tb.D4_8 * l8 + tb.D4_9 * l9 + tb.D4_10 * l10 + tb.D4_11 *
        l11 + tb.D4_12 * l12 + tb.D4_13 * l13 + tb.D4_14 * l14 + tb.D4_15 * l15 + tb.D4_16 * l16)
    )
    f5r = (
        h * (tb.D5_1 * k1 + tb.D5_6 * k6 + tb.D5_7 * k7 + tb.D5_8 * k8 + tb.D5_9 * k9 + tb.D5_10 * k10 + tb.D5_11 *
        k11 + tb.D5_12 * k12 + tb.D5_13 * k13 + tb.D5_14 * k14 + tb.D5_15 * k15 + tb.D5_16 * k16)
    )
    f5p = (
        h * (tb.D5_1 * l1 + tb.D5_6 * l6 + tb.D5_7 * l7 + tb.D5_8 * l8 + tb.D5_9 * l9 + tb.D5_10 * l10 + tb.D5_11 *
        l11 + tb.D5_12 * l12 + tb.D5_13 * l13 + tb.D5_14 * l14 + tb.D5_15 * l15 + tb.D5_16 * l16)
    )
    f6r = (
        h * (tb.D6_1 * k1 + tb.D6_6 * k6 + tb.D6_7 * k7 + tb.D6_8 * k8 + tb.D6_9 * k9 + tb.D6_10 * k10 + tb.D6_11 *
        k11 + tb.D6_12 * k12 + tb.D6_13 * k13 + tb.D6_14 * k14 + tb.D6_15 * k15 + tb.D6_16 * k16)
    )
    f6p = (
        h * (tb.D6_1 * l1 + tb.D6_6 * l6 + tb.D6_7 * l7 + tb.D6_8 * l8 + tb.D6_9 * l9 + tb.D6_10 * l10 + tb.D6_11 *
        l11 + tb.D6_12 * l12 + tb.D6_13 * l13 + tb.D6_14 * l14 + tb.D6_15 * l15 + tb.D6_16 * l16)
    )
    f7r = (
        h * (tb.D7_1 * k1 + tb.D7_6 * k6 + tb.D7_7 * k7 + tb.D7_8 * k8 + tb.D7_9 * k9 + tb.D7_10 * k10 + tb.D7_11 *
        k11 + tb.D7_12 * k12 + tb.D7_13 * k13 + tb.D7_14 * k14 + tb.D7_15 * k15 + tb.D7_16 * k16)
    )
    f7p = (
        h * (tb.D7_1 * l1 + tb.D7_6 * l6 + tb.D7_7 * l7 + tb.D7_8 * l8 + tb.D7_9 * l9 + tb.D7_10 * l10 + tb.D7_11 *
        l11 + tb.D7_12 * l12 + tb.D7_13 * l13 + tb.D7_14 * l14 + tb.D7_15 * l15 + tb.D7_16 * l16)
    )
    dr, dp = rn - r, pn - phi
    return (
        r, dr, h * k1 - dr, 2.0 * dr - h * (k1 + k13), f4r, f5r, f6r, f7r,
        phi, dp, h * l1 - dp, 2.0 * dp - h * (l1 + l13), f4p, f5p, f6p, f7p,
    )


@inlined
def interpolant(
    t: Any, r: Any, phi: Any, h: Any, rn: Any, pn: Any, k1: Any, l1: Any, stages: Any, p: Any, C: Any, D: Any
) -> Any:
    """The coefficients, with the stages that only they need."""
    k6, k7, k8, k9, k10, k11, k12, l6, l7, l8, l9, l10, l11, l12 = stages
    k13, l13 = slope(t + h, rn, pn, p, C, D)
    k14, l14 = slope(
        t + tb.C14 * h, r + h * (tb.A14_1 * k1 + tb.A14_7 * k7 + tb.A14_8 * k8 + tb.A14_9 * k9 + tb.A14_10 * k10 +
        tb.A14_11 * k11 + tb.A14_12 * k12 + tb.A14_13 * k13),
        phi + h * (tb.A14_1 * l1 + tb.A14_7 * l7 + tb.A14_8 * l8 + tb.A14_9 * l9 + tb.A14_10 * l10 + tb.A14_11 * l11 +
        tb.A14_12 * l12 + tb.A14_13 * l13), p, C, D
    )
    k15, l15 = slope(
        t + tb.C15 * h, r + h * (tb.A15_1 * k1 + tb.A15_6 * k6 + tb.A15_7 * k7 + tb.A15_8 * k8 + tb.A15_11 * k11 +
        tb.A15_12 * k12 + tb.A15_13 * k13 + tb.A15_14 * k14),
        phi + h * (tb.A15_1 * l1 + tb.A15_6 * l6 + tb.A15_7 * l7 + tb.A15_8 * l8 + tb.A15_11 * l11 + tb.A15_12 * l12 +
        tb.A15_13 * l13 + tb.A15_14 * l14), p, C, D
    )
    k16, l16 = slope(
        t + tb.C16 * h, r + h * (tb.A16_1 * k1 + tb.A16_6 * k6 + tb.A16_7 * k7 + tb.A16_8 * k8 + tb.A16_9 * k9 +
        tb.A16_13 * k13 + tb.A16_14 * k14 + tb.A16_15 * k15),
        phi + h * (tb.A16_1 * l1 + tb.A16_6 * l6 + tb.A16_7 * l7 + tb.A16_8 * l8 + tb.A16_9 * l9 + tb.A16_13 * l13 +
        tb.A16_14 * l14 + tb.A16_15 * l15), p, C, D
    )
    late = (k14, k15, k16, l14, l15, l16)
    return coefficients(r, phi, h, rn, pn, k1, l1, k13, l13, stages, late)


@inlined
def along(f0: Any, f1: Any, f2: Any, f3: Any, f4: Any, f5: Any, f6: Any, f7: Any, x: Any) -> Any:
    """The interpolant at fraction `x` of the step."""
    y = 1.0 - x
    return f0 + x * (f1 + y * (f2 + x * (f3 + y * (f4 + x * (f5 + y * (f6 + x * f7))))))
