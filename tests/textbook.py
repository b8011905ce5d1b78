"""The bounce integrals of a dipole as textbooks write them, by mpmath quadrature."""

from __future__ import annotations

import mpmath


def t_and_y(cot2: float) -> tuple[float, float, float]:
    """(T, Y, Y / cos^2) by mpmath.

    T = integral of cos(l) sqrt(4 - 3 cos^2 l) / sqrt(1 - B/B_m) dl, Y = twice that with the root above the line, l the
    latitude from 0 to the mirror point, B/B_m = y^2 sqrt(4 - 3 cos^2 l) / cos^6 l (Schulz & Lanzerotti 1974, ch. I).
    """
    with mpmath.workdps(60):
        y2 = 1 / (1 + mpmath.mpf(cot2))

        def ratio(latitude: mpmath.mpf) -> mpmath.mpf:
            c2 = mpmath.cos(latitude) ** 2
            return y2 * mpmath.sqrt(4 - 3 * c2) / c2**3

        low, high = mpmath.mpf(0), mpmath.pi / 2
        for _ in range(210):
            middle = (low + high) / 2
            low, high = (middle, high) if ratio(middle) < 1 else (low, middle)

        def arc(latitude: mpmath.mpf) -> mpmath.mpf:
            return mpmath.cos(latitude) * mpmath.sqrt(4 - 3 * mpmath.cos(latitude) ** 2)

        def integral(power: float) -> mpmath.mpf:
            # latitude = mirror latitude - q^2 makes the integrand smooth
            def smooth(q: mpmath.mpf) -> mpmath.mpf:
                return 2 * q * arc(low - q * q) * (1 - ratio(low - q * q)) ** power

            ends = mpmath.linspace(0, mpmath.sqrt(low), 5)
            value, error = mpmath.quad(smooth, ends, method="gauss-legendre", maxdegree=5, error=True)
            assert error < 1e-14 * value
            return value

        t, y = integral(-0.5), 2 * integral(0.5)
        return float(t), float(y), float(y / (1 - y2))
