"""What a field model must offer.

A model is one small file: a frozen dataclass whose parameters are described by its `Card`, and a `pointwise`
function that gives the field at a point. Everything that lists, checks, documents, stores or compiles a model reads
the card and the `Term`.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, ClassVar, Literal, Protocol

import numpy as np

from fields.drivers import Driver
from fields.errors import InputError
from fields.units import Floats

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

Varying = float | Driver


@dataclass(frozen=True)
class Parameter:
    """One parameter of a model, in user units.

    Attributes
    ----------
    name : str
        As in a run file, its unit included.
    unit, meaning : str
        For listings, files and labels.
    low, high : float
        Bounds, both allowed unless `low_open`.
    varies : bool
        Whether a series may be given.
    default : float or None
        None where the model works it out itself, or where the parameter must be given.
    required : bool
        Whether it must be given.
    """

    name: str
    unit: str
    meaning: str
    low: float = -math.inf
    high: float = math.inf
    low_open: bool = False
    varies: bool = False
    default: float | None = None
    required: bool = False

    def check(self, value: Any) -> None:
        """Raise InputError unless `value` (a number, or a Driver where allowed) is in bounds."""
        if isinstance(value, Driver):
            if not self.varies:
                raise InputError("cannot vary in time", "a number", key=self.name, value=value.name)
            ends = value.corner_values()
            self._check_number(float(ends.min()), value.name)
            self._check_number(float(ends.max()), value.name)
            return
        if isinstance(value, bool) or not isinstance(value, (int, float, np.integer, np.floating)):
            wanted = "a number or a series" if self.varies else "a number"
            raise InputError("wrong type", wanted, key=self.name, value=value)
        self._check_number(float(value), value)

    def _check_number(self, number: float, given: Any) -> None:
        if not math.isfinite(number):
            raise InputError("not a finite number", self.range_text(), key=self.name, value=given)
        if number < self.low or number > self.high or (self.low_open and number == self.low):
            what = "out of range" if isinstance(given, (int, float)) else f"holds {number:g}, out of range"
            raise InputError(what, self.range_text(), key=self.name, value=given)

    def range_text(self) -> str:
        """The allowed range in words."""
        unit = f" {self.unit}" if self.unit else ""
        if math.isinf(self.low) and math.isinf(self.high):
            return f"any finite number{unit}"
        if math.isinf(self.high):
            return f"a number {'above' if self.low_open else 'of at least'} {self.low:g}{unit}"
        low = f"above {self.low:g} and up" if self.low_open else f"from {self.low:g}"
        return f"a number {low} to {self.high:g}{unit}"


@dataclass(frozen=True)
class Card:
    """A model's entry in the catalogue: how it is called, what it needs, where it comes from."""

    name: str
    kind: Literal["magnetic", "electric"]
    title: str
    formula: str
    parameters: tuple[Parameter, ...]
    reference: str


@dataclass(frozen=True)
class Term:
    """A point function with the arguments it takes, in internal units.

    Attributes
    ----------
    function : callable
        Module-level and `pointwise`. Electric: ``(r, sin_phi, cos_phi, *arguments) -> (potential, d/dr, d/dphi)`` in
        kV, kV/R_E, kV/rad.
    arguments : tuple of float or Driver
    """

    function: Callable[..., Any]
    arguments: tuple[Varying, ...] = ()

    def at(self, time_h: float) -> tuple[float, ...]:
        """The arguments as numbers at one time."""
        return tuple(float(a.at(time_h)) if isinstance(a, Driver) else float(a) for a in self.arguments)


@dataclass(frozen=True)
class MagneticTerms:
    """The point functions by which a drift kernel knows a magnetic field; all share one argument list.

    Attributes
    ----------
    equator : callable
        ``(r, sin_phi, cos_phi, *arguments) -> B`` at the equator, nT.
    mirror : callable
        ``(k, r, sin_phi, cos_phi, *arguments) -> (B_m, dB_m/dr, dB_m/dphi, cot2)``: the mirror field in nT at fixed
        second invariant k (R_E nT^(1/2)), its slopes, and cot^2 of the equatorial pitch angle.
    foot : callable
        ``(r, sin_phi, cos_phi, foot_re, *arguments) -> B`` where the line meets the sphere of radius foot_re, nT.
    arguments : tuple of float
    drift_factor : callable, optional
        ``(r, sin_phi, cos_phi, *arguments) -> 1 / (r B)`` at the equator, where the model knows it without a division.
    """

    equator: Callable[..., Any]
    mirror: Callable[..., Any]
    foot: Callable[..., Any]
    arguments: tuple[float, ...] = ()
    drift_factor: Callable[..., Any] | None = None


class LineAverages(Protocol):
    """All that a field line contributes to the motion of the particles bound to it. Internal units; arrays broadcast.

    A particle on the line through the equatorial point (r, phi) is given by cot2 = cot^2 of its equatorial pitch
    angle = B_m/B_eq - 1, which keeps its digits at 90 degrees and near 0, or by its second invariant
    k = integral of sqrt(B_m - B) ds between the mirror points.
    """

    def second_invariant(self, cot2: ArrayLike, r: ArrayLike, phi: ArrayLike) -> Floats:
        """k in R_E nT^(1/2)."""
        ...

    def cot2_at(self, k: ArrayLike, r: ArrayLike, phi: ArrayLike) -> Floats:
        """cot^2 of the equatorial pitch angle of the particle with second invariant `k`."""
        ...

    def bounce_path(self, cot2: ArrayLike, r: ArrayLike, phi: ArrayLike) -> Floats:
        """Speed times full bounce period, in R_E: the closed integral of ds / sqrt(1 - B/B_m)."""
        ...

    def mirror_slopes(self, cot2: ArrayLike, r: ArrayLike, phi: ArrayLike) -> tuple[Floats, Floats]:
        """d ln B_m / dr (1/R_E) and d ln B_m / dphi (1/rad), both at fixed k."""
        ...

    def foot_field(self, r: ArrayLike, phi: ArrayLike, foot_re: float) -> Floats:
        """B in nT where the line meets the sphere of radius `foot_re`."""
        ...

    def tube_volume(self, r: ArrayLike, phi: ArrayLike, foot_re: float) -> Floats:
        """Integral of ds/B from foot to foot, in R_E/nT."""
        ...

    def equatorial_point(self, x: ArrayLike, y: ArrayLike, z: ArrayLike) -> tuple[Floats, Floats]:
        """(r, phi) where the line through the SM point (x, y, z) in R_E crosses the equator."""
        ...

    def bounce_average(
        self, density: Callable[[Floats, Floats, Floats], Floats], cot2: ArrayLike, r: ArrayLike, phi: ArrayLike
    ) -> Floats:
        """Average over a bounce of ``density(x, y, z)``, weighted with the time spent: ds / sqrt(1 - B/B_m)."""
        ...


class Model:
    """Base of all models: a frozen dataclass whose fields are the parameters of its card."""

    card: ClassVar[Card]

    def __post_init__(self) -> None:
        for parameter in self.card.parameters:
            value = getattr(self, parameter.name)
            if value is not None:
                parameter.check(value)
            elif parameter.required:
                raise InputError("missing", parameter.range_text(), key=parameter.name)

    def described(self) -> dict[str, Any]:
        """The model and its parameters as plain values, series by their name."""
        values = {p.name: getattr(self, p.name) for p in self.card.parameters}
        shown = {k: v.name if isinstance(v, Driver) else v for k, v in values.items() if v is not None}
        return {"model": self.card.name, **shown}


class MagneticModel(Model):
    """A static magnetic field, symmetric about its equator, with one minimum of B on each line."""

    def reference_b0_nT(self) -> float:
        """Equatorial surface field of the dipole part."""
        raise NotImplementedError

    def field_nT(self, x: Floats, y: Floats, z: Floats) -> tuple[Floats, Floats, Floats]:
        """(B_x, B_y, B_z) at SM points in R_E."""
        raise NotImplementedError

    def lines(self) -> LineAverages:
        """Averages along the field lines; traced unless the model knows them in closed form."""
        from fields.lines import TracedLines

        return TracedLines(self)

    def terms(self) -> MagneticTerms:
        """What the drift kernel compiles."""
        raise NotImplementedError

    def equatorial_terms(self) -> MagneticTerms:
        """The same where every particle mirrors at the equator, k = 0: less to compute, in some models."""
        return self.terms()


class ElectricModel(Model):
    """A potential electric field with equipotential field lines, given in the equatorial plane."""

    def term(self, magnetic: MagneticModel) -> Term:
        """The potential and its slopes as a point function."""
        raise NotImplementedError

    def warnings(self) -> list[str]:
        """What a careful user should know about these parameter values."""
        return []
