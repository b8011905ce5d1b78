"""LineAverages of a dipole, in closed form or by exact quadrature of T and Y."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from fields import arguments
from fields.errors import InputError
from fields.magnetic.dipole_integrals import Indices, average_along, bounce_integrals
from fields.magnetic.mirror_ratio import cot2_and_slope
from fields.units import Floats

NEWTON_STEPS = 4  # quadratic from a start with relative error 1e-12; the first reaches the last digit


def spread(*arrays: ArrayLike) -> tuple[tuple[int, ...], list[Floats]]:
    """The common shape, and the arrays broadcast to it and flattened."""
    wide = np.broadcast_arrays(*(np.asarray(a, dtype=float) for a in arrays))
    return wide[0].shape, [w.ravel() for w in wide]


def integrals(cot2: ArrayLike) -> tuple[Floats, Floats]:
    """T and Y with the shape of `cot2`."""
    shape, (flat,) = spread(cot2)
    T, Y = bounce_integrals(flat)
    return T.reshape(shape), Y.reshape(shape)


@dataclass(frozen=True)
class DipoleLines:
    """See `fields.contract.LineAverages`. `b0` in nT."""

    b0: float

    def second_invariant(self, cot2: ArrayLike, r: ArrayLike, phi: ArrayLike) -> Floats:
        """``k = sqrt(B0 / r) Y(y) / y``."""
        c = arguments.pitch(cot2)
        kappa = integrals(c)[1] * np.sqrt(1.0 + c)
        return np.asarray(kappa * np.sqrt(self.b0 / arguments.distance(r)) + 0.0 * arguments.angle(phi))

    def cot2_at(self, k: ArrayLike, r: ArrayLike, phi: ArrayLike) -> Floats:
        """Newton's method on the exact quadrature, from the fitted start."""
        shape, (flat_k, flat_r, _) = spread(arguments.invariant(k), arguments.distance(r), arguments.angle(phi))
        kappa = flat_k * np.sqrt(flat_r / self.b0)
        cot2 = np.asarray(cot2_and_slope(kappa)[0])
        for _ in range(NEWTON_STEPS):
            T, Y = bounce_integrals(cot2)
            # d ln(kappa) / d cot2 at fixed r: d(Y/y)/dy = -2 T / y^2 and dy/dcot2 = -y^3 / 2, so d(Y/y)/dcot2 = T y
            root = np.sqrt(1.0 + cot2)
            step = (Y * root - kappa) / (T / root)
            cot2 = np.where(kappa > 0, np.maximum(cot2 - step, 0.5 * cot2), 0.0)
            if np.all(np.abs(step) <= 4e-16 * cot2):
                break
        return cot2.reshape(shape)

    def bounce_path(self, cot2: ArrayLike, r: ArrayLike, phi: ArrayLike) -> Floats:
        """``4 r T(y)``."""
        T = integrals(arguments.pitch(cot2))[0]
        return np.asarray(4.0 * arguments.distance(r) * T + 0.0 * arguments.angle(phi))

    def mirror_slopes(self, cot2: ArrayLike, r: ArrayLike, phi: ArrayLike) -> tuple[Floats, Floats]:
        """``d ln B_m / d ln r = -(6 T - Y) / (2 T)`` at fixed k (Schulz & Lanzerotti 1974); none in phi."""
        T, Y = integrals(arguments.pitch(cot2))
        slope = -(6.0 * T - Y) / (2.0 * T) / arguments.distance(r) + 0.0 * arguments.angle(phi)
        return np.asarray(slope), np.zeros_like(slope)

    def foot_field(self, r: ArrayLike, phi: ArrayLike, foot_re: float) -> Floats:
        """B at the foot: ``B0 / f^3 sqrt(4 - 3 f / r)``."""
        radius = self._above(r, foot_re)
        return np.asarray(self.b0 / foot_re**3 * np.sqrt(4.0 - 3.0 * foot_re / radius) + 0.0 * arguments.angle(phi))

    def tube_volume(self, r: ArrayLike, phi: ArrayLike, foot_re: float) -> Floats:
        """``(r^4 / B0) * 2 (x - x^3 + 3 x^5 / 5 - x^7 / 7)`` with x^2 = 1 - f / r."""
        radius = self._above(r, foot_re)
        x = np.sqrt(1.0 - foot_re / radius)
        volume = 2.0 * radius**4 / self.b0 * (x - x**3 + 0.6 * x**5 - x**7 / 7.0)
        return np.asarray(volume + 0.0 * arguments.angle(phi))

    @staticmethod
    def _above(r: ArrayLike, foot_re: float) -> Floats:
        radius = arguments.distance(r)
        if np.any(radius < foot_re):
            problem = "no field line from there to the foot sphere"
            raise InputError(problem, f"r of at least {foot_re:g} R_E", key="r_re", value=float(radius.min()))
        return radius

    def equatorial_point(self, x: ArrayLike, y: ArrayLike, z: ArrayLike) -> tuple[Floats, Floats]:
        """``r = R^3 / rho^2`` along a dipole line."""
        px, py, pz = (np.asarray(a, dtype=float) for a in (x, y, z))
        rho2 = px**2 + py**2
        if not np.all((rho2 > 0) & np.isfinite(rho2 + pz)):
            raise InputError("not a place on a field line that crosses the equator", "a finite point off the axis")
        return np.asarray((rho2 + pz**2) ** 1.5 / rho2), np.asarray(np.arctan2(py, px) + 0.0 * pz)

    def bounce_average(
        self, density: Callable[[Floats, Floats, Floats], Floats], cot2: ArrayLike, r: ArrayLike, phi: ArrayLike
    ) -> Floats:
        """Average over both hemispheres, so `density` need not be symmetric."""
        shape, (flat, radius, azimuth) = spread(arguments.pitch(cot2), arguments.distance(r), arguments.angle(phi))

        def both(part: Indices, c2: Floats) -> Floats:
            distance = radius[part][:, None] * c2
            rho, z = distance * np.sqrt(c2), distance * np.sqrt(1.0 - c2)
            x, y = rho * np.cos(azimuth[part])[:, None], rho * np.sin(azimuth[part])[:, None]
            return 0.5 * (density(x, y, z) + density(x, y, -z))

        return average_along(flat, both).reshape(shape)
