"""How the mirror field of a dipole depends on the second invariant: two polynomials, all pitch angles.

At fixed second invariant, kappa = Y(y)/y = k sqrt(r) / (R_E sqrt(B0)) says everything. With z = (1 + kappa)^(-1/3)
the ratio (B_m/B_eq - 1) / (kappa (1 + kappa)) and its slope by kappa over 1 + kappa are smooth from 90 degrees
(z = 1) to field-aligned (z = 0). The coefficients, in x = 2 z - 1, come from ``scripts/fit_mirror_ratio.py``, which
fits the exact quadratures.
"""

from __future__ import annotations

from typing import Any

from fields.arith import inverse_cube_root, pointwise

RATIO = (
    0.3224187785570183,
    0.46617217063064775,
    0.39447335253476246,
    0.14713015111684027,
    0.021661339093355863,
    -0.0037137841668375177,
    0.0023258173198923548,
    -6.678139854718473e-05,
    -1.2916091122442552e-05,
    9.859881388942717e-05,
    -1.444080699536522e-05,
    -4.709470835005111e-06,
    9.28058340381119e-06,
    -1.04900633626784e-06,
    -3.542046009579209e-06,
    2.9220765282580477e-06,
    2.5022904587389714e-07,
    -1.72464000228789e-06,
    5.708682706273104e-07,
    4.851819956235889e-07,
    -2.807704415850627e-07,
    -5.947784130138597e-08,
    4.5104977575158475e-08,
)
SLOPE = (
    0.4685683266937997,
    0.4453609605567408,
    0.30022897297793616,
    0.08892001502459015,
    0.031479789316076146,
    0.007554511122631622,
    0.0052397667945941135,
    0.0017997775925257023,
    0.0007864918904049797,
    0.0002960004755419954,
    0.00017358452489003357,
    4.472480752691632e-05,
    -2.829990291036695e-06,
    2.838868411155289e-05,
    4.971302961505856e-07,
    -1.2935728805610883e-05,
    8.8896462801029e-06,
    4.478196955035385e-06,
    -5.825422343942181e-06,
    -7.159069101761933e-07,
    1.888452142419307e-06,
    -2.623757882612208e-09,
    -2.799793297977774e-07,
)
TOP = len(RATIO) // 4 * 4


@pointwise
def polynomial(x: Any, c: Any) -> Any:
    """``sum of c[i] x^i`` for 23 coefficients, as four polynomials of x^4: a quarter of the length of Horner's
    chain."""
    x2 = x * x
    x4 = x2 * x2
    p0, p1, p2, p3 = c[TOP], c[TOP + 1], c[TOP + 2], c[TOP - 1]
    for i in range(TOP - 4, 0, -4):
        p0, p1, p2, p3 = p0 * x4 + c[i], p1 * x4 + c[i + 1], p2 * x4 + c[i + 2], p3 * x4 + c[i - 1]
    p0, p1, p2 = p0 * x4 + c[0], p1 * x4 + c[1], p2 * x4 + c[2]
    return (p0 + p1 * x) + x2 * (p2 + p3 * x)


@pointwise
def cot2_and_slope(kappa: Any) -> Any:
    """B_m/B_eq - 1 = cot^2 of the equatorial pitch angle, and its derivative by `kappa`.

    Relative error below 1e-13 of both, held by a test against mpmath.
    """
    one = 1.0 + kappa
    x = 2.0 * inverse_cube_root(one) - 1.0
    return kappa * (one * polynomial(x, RATIO)), one * polynomial(x, SLOPE)
