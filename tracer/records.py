"""The columns of a result, in the order and the units in which every file, table and figure has them."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from fields.drivers import Driver

if TYPE_CHECKING:
    import xarray

CAUTION = (
    "Screening estimate from drift theory in model fields. It defers to agency standards and to qualified engineers; "
    "do not use it alone for hardware or crew decisions."
)


@dataclass(frozen=True)
class Column:
    """One dataset: where it stands, its type, its unit and what it is."""

    group: str
    name: str
    unit: str
    long_name: str
    dtype: str = "f8"


PARTICLE = (
    Column("particle", "population", "1", "population the particle belongs to", "i4"),
    Column("particle", "species", "1", "species of the particle", "i4"),
    Column("particle", "charge_e", "e", "signed charge", "i4"),
    Column("particle", "mass_kg", "kg", "rest mass"),
    Column("particle", "mu_MeV_per_G", "MeV/G", "first adiabatic invariant"),
    Column("particle", "K_re_sqrtG", "R_E G^0.5", "second adiabatic invariant"),
    Column("particle", "weight", "1", "real particles per marker; 1 without a source"),
    Column("particle", "seed", "1", "seed of the population's draw", "i8"),
    Column("particle", "release_h", "h", "run time of release"),
    Column("particle", "r_re", "R_E", "equatorial distance at release"),
    Column("particle", "mlt_h", "h", "magnetic local time at release"),
    Column("particle", "energy_keV", "keV", "kinetic energy at release"),
    Column("particle", "pitch_deg", "deg", "equatorial pitch angle at release"),
)

TRACK = (
    Column("track", "r_re", "R_E", "equatorial distance"),
    Column("track", "mlt_h", "h", "magnetic local time"),
    Column("track", "energy_keV", "keV", "kinetic energy"),
    Column("track", "pitch_deg", "deg", "equatorial pitch angle"),
)

END = (
    Column("end", "time_h", "h", "run time of the end"),
    Column("end", "r_re", "R_E", "equatorial distance at the end"),
    Column("end", "mlt_h", "h", "magnetic local time at the end"),
    Column("end", "energy_keV", "keV", "kinetic energy at the end"),
    Column("end", "pitch_deg", "deg", "equatorial pitch angle at the end"),
    Column("end", "cause", "1", "why the particle ended", "u1"),
    Column("end", "turns", "1", "turns around the Earth from release to end, eastward positive, as traced"),
    Column("end", "loss_cone_h", "h", "run time at which the particle first stood inside the loss cone; NaN if never"),
)

GROUPS: dict[str, tuple[Column, ...]] = {"particle": PARTICLE, "track": TRACK, "end": END}


@dataclass(frozen=True, eq=False)
class Chunk:
    """The result of some consecutive particles: arrays by column name, in file units.

    Attributes
    ----------
    first : int
        Index of the first particle in the run.
    particle, end : dict of ndarray, shape (n,)
    track : dict of ndarray, shape (n, n_time)
        Empty when only end states are kept.
    work : dict of float
        Counters: accepted and rejected steps, seconds spent.
    """

    first: int
    particle: dict[str, np.ndarray]
    track: dict[str, np.ndarray]
    end: dict[str, np.ndarray]
    work: dict[str, float] = field(default_factory=dict)


@dataclass(frozen=True, eq=False)
class Result:
    """Traced particles, in memory or read from a file on demand.

    Attributes
    ----------
    time_h : ndarray, shape (n_time,)
        Run times of the tracks; empty when only end states were kept.
    particle, track, end : mapping of str to ndarray
        Columns by name; units in `tracer.records`.
    attrs : dict
        Provenance: format, versions, run file, hashes, start, measured error, work.
    population_names, species_names : tuple of str
        What the numbers in ``particle["population"]`` and ``particle["species"]`` stand for.
    drivers : tuple of Driver
        What varied in time.
    work : dict of float
        What the run took, when this process made it: steps, seconds, particles per second. Never stored.
    """

    time_h: np.ndarray
    particle: Mapping[str, np.ndarray]
    track: Mapping[str, np.ndarray]
    end: Mapping[str, np.ndarray]
    attrs: dict[str, Any]
    population_names: tuple[str, ...]
    species_names: tuple[str, ...]
    drivers: tuple[Driver, ...] = ()
    work: dict[str, float] = field(default_factory=dict)

    @property
    def count(self) -> int:
        """Number of particles."""
        return int(self.end["cause"].size)

    def track_rows(self, name: str, rows: np.ndarray | slice) -> np.ndarray:
        """Tracks of some particles, shape (n_row, n_time); from a file no others are read."""
        read = getattr(self.track, "rows", None)
        return np.asarray(read(name, rows) if read else self.track[name][rows])

    def to_xarray(self) -> xarray.Dataset:
        """One Dataset: tracks on (particle_index, time); on particle_index the rest, as ``initial_*`` and
        ``end_*``."""
        from tracer.labelled import dataset

        return dataset(self)


def flag_word(name: str) -> str:
    """`name` as one word of a CF ``flag_meanings``: letters, digits and ``_ - . + @`` only."""
    return re.sub(r"[^0-9A-Za-z_.+@-]", "_", name) or "_"
