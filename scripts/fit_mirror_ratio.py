"""Print the two polynomials of fields/magnetic/mirror_ratio.py and their errors between the nodes.

In a dipole B_m/B_eq depends on kappa = Y(y)/y alone. With z = (1 + kappa)^(-1/3), which runs from 1 (90 degrees) to
0 (field aligned), (B_m/B_eq - 1) / (kappa (1 + kappa)) and its slope by kappa over 1 + kappa are smooth on all of
[0, 1]: integrals to a mirror point near the Earth's centre expand in cos^2 of its latitude, which goes as y^(2/3),
hence the cube root. The slope is sqrt(B_m/B_eq) / T(y), fitted by itself: the derivative of a fit loses two digits.
"""

from __future__ import annotations

import numpy as np
from numpy.polynomial import chebyshev, polynomial

from fields.magnetic.dipole_integrals import bounce_integrals
from fields.magnetic.dipole_lines import DipoleLines
from fields.units import Floats

DEGREE = 22
NODES = 600


def exact(x: Floats) -> tuple[Floats, Floats]:
    """The two functions to fit, at x = 2 z - 1."""
    kappa = (0.5 * (1.0 + x)) ** -3.0 - 1.0
    cot2 = DipoleLines(1.0).cot2_at(kappa, 1.0, 0.0)
    T, _ = bounce_integrals(cot2)
    return cot2 / (kappa * (1.0 + kappa)), np.sqrt(1.0 + cot2) / (T * (1.0 + kappa))


def fit(x: Floats, values: Floats) -> tuple[Floats, float]:
    """Coefficients of the powers of x, and the largest relative error where the fit did not look."""
    series = chebyshev.chebfit(x[::2], values[::2], DEGREE, w=1.0 / values[::2])
    power = chebyshev.cheb2poly(series)
    error = polynomial.polyval(x[1::2], power) / values[1::2] - 1.0
    return power, float(np.max(np.abs(error)))


def main() -> None:
    x = np.cos(np.pi * (np.arange(NODES) + 0.5) / NODES)
    x = x[(x > -0.996) & (x < 1.0 - 1e-9)]  # beyond, the quadrature's own digits run out
    for name, values in zip(("RATIO", "SLOPE"), exact(x)):
        power, error = fit(x, values)
        print(f"{name} = (  # largest relative error {error:.1e}")
        for coefficient in power:
            print(f"    {float(coefficient)!r},")
        print(")")


if __name__ == "__main__":
    main()
