"""Field models of a user's own: without any symmetry, and invented. Each is written out again in x and y."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from fields.arith import pointwise, reciprocal
from fields.contract import Card, ElectricModel, LineAverages, MagneticModel, MagneticTerms, Parameter, Term


@pointwise
def lopsided(r: Any, sin: Any, cos: Any, a: Any, b: Any, c: Any, sin0: Any, cos0: Any) -> Any:
    """Potential and slopes of three harmonics of local time."""
    s1, c1 = sin * cos0 - cos * sin0, cos * cos0 + sin * sin0
    s2, c2 = 2.0 * sin * cos, cos * cos - sin * sin
    s3, c3 = s2 * cos + c2 * sin, c2 * cos - s2 * sin
    even, odd = b * r * r, c * r * r
    return (
        -a * r * s1 + even * c2 + odd * s3,
        -a * s1 + 2.0 * r * (b * c2 + c * s3),
        -a * r * c1 - 2.0 * even * s2 + 3.0 * odd * c3,
    )


@dataclass(frozen=True, eq=False)
class Lopsided(ElectricModel):
    """``Phi = -a r sin(phi - phi0) + b r^2 cos(2 phi) + c r^2 sin(3 phi)``, kV."""

    a_kV: float
    b_kV: float = 0.0
    c_kV: float = 0.0
    phi0_rad: float = 0.0

    card: ClassVar[Card] = Card(
        name="lopsided",
        kind="electric",
        title="three harmonics of local time",
        formula="Phi = -a r sin(phi - phi0) + b r^2 cos(2 phi) + c r^2 sin(3 phi)",
        parameters=tuple(Parameter(name, "", "") for name in ("a_kV", "b_kV", "c_kV", "phi0_rad")),
        reference="invented",
    )

    def term(self, magnetic: MagneticModel) -> Term:
        turned = (float(np.sin(self.phi0_rad)), float(np.cos(self.phi0_rad)))
        return Term(lopsided, (self.a_kV, self.b_kV, self.c_kV, *turned))

    def at(self, x: Any, y: Any) -> Any:
        """The potential at (x, y), real or complex."""
        r = np.sqrt(x * x + y * y)
        uniform = self.a_kV * (x * np.sin(self.phi0_rad) - y * np.cos(self.phi0_rad))
        return uniform + self.b_kV * (x * x - y * y) + self.c_kV * (3.0 * x * x * y - y**3) / r


@pointwise
def squeezed(r: Any, sin: Any, cos: Any, b0: Any, b1: Any, b2: Any) -> Any:
    """B at the equator."""
    inverse = reciprocal(r)
    return b0 * (inverse * inverse * inverse) + b1 + b2 * r * cos


@pointwise
def squeezed_mirror(k: Any, r: Any, sin: Any, cos: Any, b0: Any, b1: Any, b2: Any) -> Any:
    """B_m, its slopes and cot^2 for k = 0."""
    inverse = reciprocal(r)
    slope = -3.0 * b0 * (inverse * inverse) * (inverse * inverse) + b2 * cos
    return squeezed(r, sin, cos, b0, b1, b2), slope, -b2 * r * sin, 0.0 * r


@pointwise
def squeezed_foot(r: Any, sin: Any, cos: Any, foot_re: Any, b0: Any, b1: Any, b2: Any) -> Any:
    """Not asked for."""
    return 2.0 * b0 + 0.0 * r


@dataclass(frozen=True)
class AtTheEquator:
    """Line averages of particles that never leave it."""

    model: Squeezed

    def second_invariant(self, cot2: Any, r: Any, phi: Any) -> Any:
        assert np.all(np.asarray(cot2) == 0.0)
        return 0.0 * (np.asarray(cot2) + r + phi)

    def cot2_at(self, k: Any, r: Any, phi: Any) -> Any:
        return self.second_invariant(k, r, phi)

    def mirror_slopes(self, cot2: Any, r: Any, phi: Any) -> Any:
        assert np.all(np.asarray(cot2) == 0.0)
        b, by_r, by_phi, _ = squeezed_mirror(0.0, r, np.sin(phi), np.cos(phi), *self.model.terms().arguments)
        return by_r / b, by_phi / b


@dataclass(frozen=True, eq=False)
class Squeezed(MagneticModel):
    """A dipole in the two simplest fields of a magnetopause (Mead 1964); for particles at the equator only."""

    b0_nT: float = 30000.0
    b1_nT: float = 25.0
    b2_nT_per_re: float = 2.1

    card: ClassVar[Card] = Card(
        name="squeezed",
        kind="magnetic",
        title="dipole, squeezed from noon",
        formula="B_eq = b0 / r^3 + b1 + b2 r cos(phi)",
        parameters=tuple(Parameter(name, "nT", "") for name in ("b0_nT", "b1_nT", "b2_nT_per_re")),
        reference="Mead (1964), J. Geophys. Res. 69, 1181 (from memory)",
    )

    def reference_b0_nT(self) -> float:
        return self.b0_nT

    def lines(self) -> LineAverages:
        return AtTheEquator(self)  # type: ignore[return-value]

    def terms(self) -> MagneticTerms:
        return MagneticTerms(squeezed, squeezed_mirror, squeezed_foot, (self.b0_nT, self.b1_nT, self.b2_nT_per_re))

    def at(self, x: Any, y: Any) -> Any:
        """B at (x, y), real or complex."""
        return self.b0_nT / np.sqrt(x * x + y * y) ** 3 + self.b1_nT + self.b2_nT_per_re * x
