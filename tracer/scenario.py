"""The run as frozen records, validated and complete: what the rest of the tool works from."""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import datetime
from functools import cached_property
from typing import TYPE_CHECKING, Literal

import numpy as np

from fields import constants
from fields.field import Field
from fields.units import Floats

if TYPE_CHECKING:
    from tracer.access_plan import AccessRequest, OrbitRequest

Spacing = Literal["linear", "area", "log", "isotropic"]


@dataclass(frozen=True)
class Species:
    """A kind of particle: its name, mass, and signed charge in elementary charges."""

    name: str
    mass_kg: float
    charge_e: int


def _ion(name: str, mass_u: float, charge: int) -> Species:
    mass = mass_u * constants.ATOMIC_MASS_KG - charge * constants.ELECTRON_MASS_KG
    return Species(name, mass, charge)


# Atomic masses: IUPAC 2021 standard values of the neutral atoms (from memory), less the electrons taken away.
SPECIES: dict[str, Species] = {
    "e-": Species("e-", constants.ELECTRON_MASS_KG, -1),
    "H+": Species("H+", constants.PROTON_MASS_KG, 1),
    "He+": _ion("He+", 4.002602, 1),
    "He++": Species("He++", constants.ALPHA_MASS_KG, 2),
    "O+": _ion("O+", 15.999, 1),
}


@dataclass(frozen=True)
class Quantity:
    """A number, a range or a list, in user units.

    Attributes
    ----------
    kind : str
        ``number`` (one value), ``range`` (two values: from, to) or ``list`` (grids only).
    values : tuple of float
    spacing : str
        How a range is filled. ``linear``; ``area``: uniform in r^2; ``log``: uniform in ln; ``isotropic``: uniform
        in the cosine of the pitch angle (density ~ sin a).
    n : int
        Number of grid points of a range; 0 in a draw.
    """

    kind: Literal["number", "range", "list"]
    values: tuple[float, ...]
    spacing: Spacing = "linear"
    n: int = 0

    @property
    def size(self) -> int:
        """How many grid points it gives."""
        return {"number": 1, "range": self.n, "list": len(self.values)}[self.kind]

    @property
    def low(self) -> float:
        """Smallest value; of a local-time range through midnight, where it begins."""
        return self.values[0] if self.kind == "range" else min(self.values)

    @property
    def high(self) -> float:
        """Largest value; of a local-time range through midnight, where it ends."""
        return self.values[1] if self.kind == "range" else max(self.values)


@dataclass(frozen=True)
class Population:
    """A set of particles: how many, and over which quantities they are drawn. User units.

    `count` holds the true number of particles for a grid too.
    """

    name: str
    species: Species
    count: int
    draw: Literal["sobol", "random", "grid"]
    seed: int
    r_re: Quantity
    mlt_h: Quantity
    energy_keV: Quantity
    pitch_deg: Quantity
    release_h: Quantity

    def quantities(self) -> tuple[Quantity, ...]:
        """r, mlt, energy, pitch, release: the order of grids and of the columns of a draw."""
        return (self.r_re, self.mlt_h, self.energy_keV, self.pitch_deg, self.release_h)


@dataclass(frozen=True)
class Domain:
    """Where particles live, R_E and km."""

    outer_re: float = 10.0
    inner_re: float = 1.02
    foot_altitude_km: float = 100.0

    @property
    def foot_re(self) -> float:
        """Radius of the foot sphere, R_E."""
        return 1.0 + self.foot_altitude_km / constants.EARTH_RADIUS_KM


@dataclass(frozen=True)
class Output:
    """What is saved and how well."""

    every_min: float = 5.0
    tolerance_re: float = 1e-6
    tracks: Literal["double", "single"] = "double"


@dataclass(frozen=True)
class Origin:
    """Where a scenario came from: the run file's name as given, its full text, the hashes of its inputs, and what
    the reader of the file noticed that is no fault."""

    file: str = ""
    text: str = ""
    input_sha256: dict[str, str] = field(default_factory=dict)
    remarks: tuple[str, ...] = ()


@dataclass(frozen=True, eq=False)
class Scenario:
    """One run, ready to be computed."""

    title: str
    start: datetime
    hours: float
    backward: bool
    domain: Domain
    field: Field
    populations: tuple[Population, ...]
    loss_cone: Literal["off", "flag", "stop"]
    output: Output
    origin: Origin
    access: AccessRequest | None = None
    orbits: tuple[OrbitRequest, ...] = ()

    @property
    def equatorial(self) -> bool:
        """Whether every particle mirrors at the equator."""
        return all(p.pitch_deg.low == p.pitch_deg.high == 90.0 for p in self.populations)

    @property
    def direction(self) -> float:
        """+1 forward, -1 backward in time."""
        return -1.0 if self.backward else 1.0

    @property
    def end_h(self) -> float:
        """Run time at which tracing ends: signed hours since start."""
        return self.direction * self.hours

    @property
    def count(self) -> int:
        """Number of particles of all populations."""
        return sum(p.count for p in self.populations)

    @cached_property
    def save_times_h(self) -> Floats:
        """Run times at which tracks are saved; strictly monotonic from 0 to `end_h`; empty when only ends are
        saved."""
        step = self.output.every_min / 60.0
        if step == 0:
            return np.empty(0)
        whole = np.arange(int(np.floor(self.hours / step * (1 + 1e-12))) + 1) * step
        if self.hours - whole[-1] > 1e-9 * self.hours:
            whole = np.append(whole, self.hours)
        whole[-1] = self.hours
        return np.asarray(self.direction * whole) + 0.0

    @cached_property
    def species(self) -> tuple[Species, ...]:
        """The distinct species in order of first use."""
        return tuple(dict.fromkeys(p.species for p in self.populations))
