"""P and Q of `bench_storm` by kappa, fitted to the exact quadratures over the range that a problem needs.

Two forms, each the fastest found for those who use it: a table of short polynomials for compiled scalar code (no root
and no division; 0.7 of the time of one long polynomial), one long polynomial for those who need a single formula.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from bench_storm import OPTIONS
from numba import njit
from numpy.polynomial import chebyshev

from fields.magnetic.dipole_integrals import bounce_integrals

DEGREE = 7  # of the table's polynomials
PIECES = 8  # of the table to one unit of kappa
NEWTON_STEPS = 60


def exact(kappa: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """P and Q: 1/y^2 and (6 T - Y) / (2 T y^2) with y the sine of the equatorial pitch angle at which Y/y = kappa."""
    cot2 = 0.6 * kappa * (1.0 + kappa)
    for _ in range(NEWTON_STEPS):
        T, Y = bounce_integrals(cot2)
        step = Y * (1.0 + cot2) / T - kappa * np.sqrt(1.0 + cot2) / T  # d kappa / d cot2 = T y
        cot2 = np.maximum(cot2 - step, 0.3 * cot2)
    T, Y = bounce_integrals(cot2)
    return 1.0 + cot2, (3.0 - 0.5 * Y / T) * (1.0 + cot2)


def nodes(degree: int) -> np.ndarray:
    return np.cos(np.pi * (np.arange(degree + 1) + 0.5) / (degree + 1))


def interpolant(values: np.ndarray) -> np.ndarray:
    """Coefficients, lowest first, of the polynomial through values at the Chebyshev nodes."""
    return chebyshev.cheb2poly(chebyshev.chebfit(nodes(len(values) - 1), values, len(values) - 1))


def table(top: float) -> np.ndarray:
    """Polynomials on pieces of equal width from 0 to a little over `top`, shape (n, 2, DEGREE + 1), in -1 to 1."""
    count = int(1.1 * top * PIECES) + 1
    kappa = (np.arange(count)[:, None] + 0.5 + 0.5 * nodes(DEGREE)) / PIECES
    found = [values.reshape(kappa.shape) for values in exact(kappa.ravel())]
    return np.array([[interpolant(values[i]) for values in found] for i in range(count)])


def lookup(top: float) -> Callable[[Any], Any]:
    """A compiled function that gives P and Q by kappa, from the table up to `top`; inlined into whoever calls it."""
    T = table(top)
    last = len(T) - 0.5
    assert DEGREE == 7

    @njit(forceinline=True, **OPTIONS)
    def mirror(kappa):  # type: ignore[no-untyped-def]
        s = PIECES * kappa
        i = int(s if s < last else last)
        n = 2.0 * (s - i) - 1.0
        n2 = n * n
        n4 = n2 * n2
        P = T[i, 0, 0] + n * T[i, 0, 1] + n2 * (T[i, 0, 2] + n * T[i, 0, 3])
        P = P + n4 * (T[i, 0, 4] + n * T[i, 0, 5] + n2 * (T[i, 0, 6] + n * T[i, 0, 7]))
        Q = T[i, 1, 0] + n * T[i, 1, 1] + n2 * (T[i, 1, 2] + n * T[i, 1, 3])
        Q = Q + n4 * (T[i, 1, 4] + n * T[i, 1, 5] + n2 * (T[i, 1, 6] + n * T[i, 1, 7]))
        return P, Q

    return mirror


def formula(top: float, degree: int) -> tuple[float, float, np.ndarray, np.ndarray]:
    """One polynomial: P and Q over (1 + kappa)^2 in n = scale (1 + kappa)^(-1/3) + shift.

    Returns
    -------
    scale, shift : float
    p, q : ndarray, shape (degree + 1,)
        Coefficients, lowest first.
    """
    low = (1.0 + top) ** (-1.0 / 3.0)
    scale, shift = 2.0 / (1.0 - low), -(1.0 + low) / (1.0 - low)
    kappa = np.maximum(((nodes(degree) - shift) / scale) ** -3.0 - 1.0, 0.0)
    p, q = (interpolant(values / (1.0 + kappa) ** 2) for values in exact(kappa))
    return scale, shift, p, q
