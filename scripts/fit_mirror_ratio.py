"""Print the polynomial of fields/magnetic/mirror_ratio.py and its error between the nodes.

In a dipole B_m/B_eq depends on kappa = Y(y)/y alone. With z = (1 + kappa)^(-1/3), which runs from 1 (90 degrees) to
0 (field aligned), g(z) = (B_m/B_eq - 1) / (kappa (1 + kappa)) is smooth on all of [0, 1]: integrals to a mirror
point near the Earth's centre expand in cos^2 of its latitude, which goes as y^(2/3), hence the cube root.
"""

from __future__ import annotations

import numpy as np
from numpy.polynomial import chebyshev, polynomial
from scipy.optimize import brentq

from fields.magnetic.dipole_integrals import integrals_to_mirror

DEGREE = 26


def kappa_and_ratio(log_c2: float, x2: float | None = None) -> tuple[float, float]:
    """kappa and B_m/B_eq - 1 for a mirror point at ln(cos^2 latitude)."""
    c2, x2 = np.exp(log_c2), -np.expm1(log_c2)
    _, Y = integrals_to_mirror(np.array([x2]), np.array([c2]))
    log_ratio = 0.5 * np.log1p(3.0 * x2) - 3.0 * log_c2
    return float(Y[0] * np.exp(0.5 * log_ratio)), float(np.expm1(log_ratio))


def g(z: float) -> float:
    """The function to fit, at z strictly between 0 and 1."""
    kappa = z**-3 - 1.0
    log_c2 = brentq(lambda v: np.log(kappa_and_ratio(v)[0] / kappa), -30.0, -1e-9, xtol=1e-16, rtol=1e-15)
    exact_kappa, ratio = kappa_and_ratio(log_c2)
    return ratio / (exact_kappa * (1.0 + exact_kappa))


def main() -> None:
    points = DEGREE + 8
    x = np.cos(np.pi * (np.arange(points) + 0.5) / points)
    values = np.array([g(0.5 * (1.0 + t)) for t in x])
    series = chebyshev.chebfit(x, values, DEGREE)
    power = chebyshev.cheb2poly(series)
    for coefficient in power:
        print(f"    {coefficient!r},")
    check = np.linspace(-0.99, 0.9999, 301)
    exact = np.array([g(0.5 * (1.0 + t)) for t in check])
    print("largest relative error", np.max(np.abs(polynomial.polyval(check, power) / exact - 1.0)))
    print("last Chebyshev coefficients", series[-4:])


if __name__ == "__main__":
    main()
