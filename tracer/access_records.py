"""What is found out about access: the columns of a target, and the result with its axes. User units."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from fields.units import Floats
from tracer.access_plan import Sector
from tracer.records import Column

AXES = ("species", "time", "energy", "pitch", "r", "mlt")
ORBIT_AXES = ("species", "orbit_time", "energy", "pitch")
BOUNDARY_AXES = ("species", "time", "energy", "pitch", "mlt")
PLACE_AXES = ("species", "energy", "pitch", "r", "mlt")
EXPOSURE_AXES = ("spacecraft", "species", "energy", "pitch")
FEW_PLACES = 64  # of a map, up to which times of opening and windows are told place by place

# What is kept of each target; `transit_h` follows.
TARGET = (
    Column("access", "region", "1", "where the particles came from", "u1"),
    Column("access", "entry_time_h", "h", "run time at which they came in through the outer boundary"),
    Column("access", "entry_mlt_h", "h", "magnetic local time at which they came in"),
    Column("access", "entry_energy_keV", "keV", "kinetic energy with which they came in"),
)
TRANSIT = Column("access", "transit_h", "h", "time from coming in to the target")
ACCESS = (*TARGET, TRANSIT)

BOUNDARY = (
    Column("boundary", "innermost_re", "R_E", "innermost place of the map on a local time that is open to the source"),
    Column("boundary", "next_inward_re", "R_E", "the place of the map next to it on the inner side, which is not open"),
)
OPENING = (
    Column("boundary", "first_open_h", "h", "first time of the map at which a place is open to the source"),
    Column("boundary", "last_open_h", "h", "last time of the map at which a place is open to the source"),
    Column("boundary", "spells", "1", "unbroken runs of times of the map at which a place is open", "i4"),
)
EXPOSURE = (
    Column("exposure", "share_open", "1", "part of the time in reach with access; NaN if never in reach"),
    Column("exposure", "share_unknown", "1", "part of the time in reach for which the record does not say"),
    Column("exposure", "share_in_reach", "1", "part of all time in the domain and within reach of the pitch angle"),
    Column("exposure", "passes", "1", "unbroken stretches of time with access", "i4"),
    Column("exposure", "first_open_h", "h", "first run time with access; NaN if none"),
    Column("exposure", "last_open_h", "h", "last run time with access; NaN if none"),
    Column("exposure", "longest_closed_h", "h", "longest stretch of time without access; NaN if never in reach"),
    Column("exposure", "worst_pass_h", "h", "length of the longest pass with access; NaN if none"),
    Column("exposure", "worst_pass_begin_h", "h", "run time at which the longest pass with access begins"),
)
PLACE = (
    Column("orbit", "r_re", "R_E", "equatorial distance to which the field line of the spacecraft leads"),
    Column("orbit", "mlt_h", "h", "magnetic local time to which the field line of the spacecraft leads"),
    Column("orbit", "b_ratio", "1", "field at the spacecraft over field where its field line crosses the equator"),
)


@dataclass(frozen=True, eq=False)
class OrbitAccess:
    """What reaches a spacecraft.

    Attributes
    ----------
    name : str
    every_min : float
    time_h, r_re, mlt_h, b_ratio : ndarray, shape (orbit_time,)
        See `tracer.orbit.Orbit`.
    access : mapping of str to ndarray, shape (species, orbit_time, energy, pitch)
        Columns as in `ACCESS`.
    """

    name: str
    every_min: float
    time_h: Floats
    r_re: Floats
    mlt_h: Floats
    b_ratio: Floats
    access: Mapping[str, np.ndarray]


@dataclass(frozen=True, eq=False)
class AccessResult:
    """What reaches where and when, in memory or read from a file on demand; see `tracer.analysis.access`.

    Attributes
    ----------
    species_names : tuple of str
    energy_keV, pitch_deg : ndarray
        At the target; the pitch angle is equatorial.
    time_h, r_re, mlt_h : ndarray
        Of the map; empty without one.
    source : Sector
    access : mapping of str to ndarray, shape (species, time, energy, pitch, r, mlt)
        Columns as in `ACCESS`; empty without a map.
    boundary : mapping of str to ndarray
        `BOUNDARY` on (species, time, energy, pitch, mlt); where there are up to `FEW_PLACES` places `OPENING` also,
        on (species, energy, pitch, r, mlt). Empty without a map.
    orbits : tuple of OrbitAccess
    exposure : mapping of str to ndarray, shape (spacecraft, species, energy, pitch)
        Columns as in `EXPOSURE`; empty without orbits.
    attrs : dict
        Provenance, as in a trajectory file.
    work : dict of float
        What the run took, when this process made it: targets, steps, seconds. Never stored.
    """

    species_names: tuple[str, ...]
    energy_keV: Floats
    pitch_deg: Floats
    time_h: Floats
    r_re: Floats
    mlt_h: Floats
    source: Sector
    access: Mapping[str, np.ndarray]
    boundary: Mapping[str, np.ndarray]
    orbits: tuple[OrbitAccess, ...]
    exposure: Mapping[str, np.ndarray]
    attrs: dict[str, Any]
    work: dict[str, float] = field(default_factory=dict)

    @property
    def has_map(self) -> bool:
        """Whether places were asked for, besides orbits."""
        return self.r_re.size > 0

    @property
    def few_places(self) -> bool:
        """Whether the map has so few places that they are told one by one."""
        return 0 < self.r_re.size * self.mlt_h.size <= FEW_PLACES

    def part(self, name: str, index: Any) -> np.ndarray:
        """A part of a column of the map; from a file no more is read."""
        read = getattr(self.access, "part", None)
        return np.asarray(read(name, index) if read else self.access[name][index])
