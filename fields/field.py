"""One magnetic model, a sum of electric terms and their drivers: one field."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from fields.contract import ElectricModel, LineAverages, MagneticModel, MagneticTerms, Term
from fields.drivers import Driver
from fields.errors import InputError
from fields.units import Floats, phi_from_mlt


@dataclass(frozen=True, eq=False)
class Field:
    """A static magnetic field and a sum of potential electric fields.

    Attributes
    ----------
    magnetic : MagneticModel
    electric : tuple of ElectricModel
    """

    magnetic: MagneticModel
    electric: tuple[ElectricModel, ...] = ()

    @cached_property
    def lines(self) -> LineAverages:
        """Averages along the field lines."""
        return self.magnetic.lines()

    @cached_property
    def magnetic_terms(self) -> MagneticTerms:
        """The magnetic point functions."""
        return self.magnetic.terms()

    @cached_property
    def electric_terms(self) -> tuple[Term, ...]:
        """The electric point functions, in the order of the run file."""
        return tuple(model.term(self.magnetic) for model in self.electric)

    @cached_property
    def drivers(self) -> tuple[Driver, ...]:
        """The distinct drivers, in order of first use."""
        found: list[Driver] = []
        for term in self.electric_terms:
            for argument in term.arguments:
                if isinstance(argument, Driver) and all(argument is not known for known in found):
                    found.append(argument)
        return tuple(found)

    def warnings(self) -> list[str]:
        """What a careful user should know about the chosen parameters."""
        return [line for model in self.electric for line in model.warnings()]

    def described(self) -> dict[str, Any]:
        """Models and parameters as plain values."""
        return {"magnetic": self.magnetic.described(), "electric": [m.described() for m in self.electric]}

    def potential_kV(self, r_re: ArrayLike, mlt_h: ArrayLike, time_h: ArrayLike = 0.0) -> Floats:
        """Electric potential at equatorial points, kV.

        Parameters
        ----------
        r_re, mlt_h, time_h : array_like
            R_E, hours of local time, hours since start; they broadcast.
        """
        return self.potential_and_slopes(r_re, phi_from_mlt(mlt_h), time_h)[0]

    def b_eq_nT(self, r_re: ArrayLike, mlt_h: ArrayLike = 0.0) -> Floats:
        """Magnetic field strength at equatorial points, nT."""
        return self.equatorial_field(r_re, phi_from_mlt(mlt_h))

    def curvature_radius(self, r: ArrayLike, phi: ArrayLike) -> Floats:
        """Radius of curvature of the field line where it crosses the equator, R_E; central differences, error about
        1e-7.

        There B points along z and (b.grad) b is the change of B's equatorial part along z, over B.
        """
        radius, azimuth = np.broadcast_arrays(np.asarray(r, dtype=float), np.asarray(phi, dtype=float))
        step = 1e-4 * radius
        x, y = radius * np.cos(azimuth), radius * np.sin(azimuth)
        above, below = (self.magnetic.field_nT(x, y, side * step) for side in (1.0, -1.0))
        bend = [(up - down) / (2.0 * step) for up, down in zip(above[:2], below[:2], strict=True)]
        return np.asarray(self.equatorial_field(radius, azimuth) / np.hypot(*bend))

    def equatorial_field(self, r: ArrayLike, phi: ArrayLike) -> Floats:
        """B at the equator in nT; internal units."""
        radius, azimuth = np.broadcast_arrays(np.asarray(r, dtype=float), np.asarray(phi, dtype=float))
        terms = self.magnetic_terms
        return np.asarray(terms.equator(radius, np.sin(azimuth), np.cos(azimuth), *terms.arguments))

    def potential_and_slopes(
        self, r: ArrayLike, phi: ArrayLike, time_h: ArrayLike, backward: bool = False
    ) -> tuple[Floats, Floats, Floats]:
        """Potential, d/dr and d/dphi in kV, kV/R_E, kV/rad; internal units, arguments broadcast."""
        radius, azimuth, time = np.broadcast_arrays(
            np.asarray(r, dtype=float), np.asarray(phi, dtype=float), np.asarray(time_h, dtype=float)
        )
        if np.any(radius <= 0) or not np.all(np.isfinite(radius)):
            raise InputError("not a positive distance", "r above 0 R_E", key="r_re")
        sin, cos = np.sin(azimuth), np.cos(azimuth)
        total = [np.zeros(radius.shape) for _ in range(3)]
        for term in self.electric_terms:
            values = [a.at(time, backward) if isinstance(a, Driver) else a for a in term.arguments]
            for part, share in zip(total, term.function(radius, sin, cos, *values)):
                part += share
        return total[0], total[1], total[2]


def compose(magnetic: MagneticModel, electric: Sequence[ElectricModel] = ()) -> Field:
    """Join one magnetic model and any number of electric ones.

    Raises
    ------
    InputError
        When an argument is not a model of its kind.
    """
    if not isinstance(magnetic, MagneticModel):
        raise InputError("not a magnetic model", "for example fields.Dipole()", key="magnetic", value=magnetic)
    for model in electric:
        if not isinstance(model, ElectricModel):
            raise InputError("not an electric model", "for example fields.Corotation()", key="electric", value=model)
    return Field(magnetic, tuple(electric))
