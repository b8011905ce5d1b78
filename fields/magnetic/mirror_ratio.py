"""How the mirror field of a dipole depends on the second invariant: one polynomial, all pitch angles.

At fixed second invariant, kappa = Y(y)/y = k sqrt(r) / (R_E sqrt(B0)) says everything. With z = (1 + kappa)^(-1/3)
the function g(z) = (B_m/B_eq - 1) / (kappa (1 + kappa)) is smooth from 90 degrees (z = 1) to field-aligned (z = 0).
The coefficients, in x = 2 z - 1, come from ``scripts/fit_mirror_ratio.py``, which fits the exact quadrature.
"""

from __future__ import annotations

from typing import Any

from fields.arith import inverse_cube_root, pointwise

COEFFICIENTS = (
    0.32241877855701506,
    0.4661721706306593,
    0.3944733525355201,
    0.14713015111514055,
    0.02166133906099868,
    -0.003713784113093004,
    0.002325817881985386,
    -6.678212042401981e-05,
    -1.2921212485418873e-05,
    9.860407268901113e-05,
    -1.4413241362242574e-05,
    -4.732959826250169e-06,
    9.18740235688827e-06,
    -9.802411495101061e-07,
    -3.339175688523924e-06,
    2.785550831181648e-06,
    -3.167860623864407e-08,
    -1.5389416643441208e-06,
    8.048190786651451e-07,
    3.1437485016331673e-07,
    -3.689608307134893e-07,
    4.222034905411144e-08,
    2.7730848816613026e-08,
    -3.540062203354169e-08,
    2.8393840335449172e-08,
    5.471766788737386e-09,
    -7.536518411646715e-09,
)
DERIVATIVE = (*(i * c for i, c in enumerate(COEFFICIENTS) if i), 0.0)
TOP = len(COEFFICIENTS) // 4 * 4


@pointwise
def polynomial(x: Any, c: Any) -> Any:
    """``sum of c[i] x^i`` for 27 coefficients, as four polynomials of x^4: a quarter of the length of Horner's
    chain."""
    x2 = x * x
    x4 = x2 * x2
    p0, p1, p2 = c[TOP], c[TOP + 1], c[TOP + 2]
    p3 = c[TOP - 1]
    for i in range(TOP - 4, 0, -4):
        p0, p1, p2 = p0 * x4 + c[i], p1 * x4 + c[i + 1], p2 * x4 + c[i + 2]
        p3 = p3 * x4 + c[i - 1]
    p0, p1, p2 = p0 * x4 + c[0], p1 * x4 + c[1], p2 * x4 + c[2]
    return (p0 + p1 * x) + x2 * (p2 + p3 * x)


@pointwise
def cot2_and_slope(kappa: Any) -> Any:
    """B_m/B_eq - 1 = cot^2 of the equatorial pitch angle, and its derivative by `kappa`.

    Relative error below 1e-13, held by a test against mpmath.
    """
    z = inverse_cube_root(1.0 + kappa)
    x = 2.0 * z - 1.0
    g, d = polynomial(x, COEFFICIENTS), polynomial(x, DERIVATIVE)
    # d/dkappa of kappa (1 + kappa) g, with dz/dkappa = -z^4 / 3 and dx = 2 dz
    return kappa * (1.0 + kappa) * g, (1.0 + 2.0 * kappa) * g - kappa * z * d * (2.0 / 3.0)
