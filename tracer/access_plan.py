"""What is asked about access: the targets, their source, and the orbits. Frozen records in user units."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fields.clock import MICROS_PER_HOUR, Micros, micros
from fields.units import Floats

if TYPE_CHECKING:
    from tracer.ephemeris.sampled import EquatorialTable
    from tracer.ephemeris.source import Source
    from tracer.scenario import Species


@dataclass(frozen=True)
class Sector:
    """A piece of the outer boundary, eastward from one local time to the other; 0 to 24 is all of it.

    Attributes
    ----------
    r_re : float
        The outer boundary's distance.
    from_h, to_h : float
        Local times in [0, 24]; through midnight when `to_h` is below `from_h`.
    """

    r_re: float
    from_h: float = 0.0
    to_h: float = 24.0

    @property
    def width_h(self) -> float:
        """Hours of local time that it spans, above 0 and up to 24."""
        return (self.to_h - self.from_h) % 24.0 or 24.0

    def holds(self, mlt_h: ArrayLike) -> NDArray[np.bool_]:
        """Whether local times lie in it, both edges included."""
        east = np.mod(np.asarray(mlt_h, dtype=float) - self.from_h, 24.0)
        return np.asarray((east <= self.width_h) | (self.width_h == 24.0))


@dataclass(frozen=True, eq=False)
class AccessRequest:
    """The ``[access]`` table.

    Attributes
    ----------
    species : tuple of Species
    energy_keV, pitch_deg : ndarray
        Kinetic energies and equatorial pitch angles, in the order of the file.
    r_re, mlt_h : ndarray
        Places of the map, local times in [0, 24); both empty where only orbits are asked for.
    time_h : ndarray
        Run times of the map; empty where only orbits are asked for.
    back_hours : float
        How far back each target is traced at most.
    source : Sector
    """

    species: tuple[Species, ...]
    energy_keV: Floats
    pitch_deg: Floats
    r_re: Floats
    mlt_h: Floats
    time_h: Floats
    back_hours: float
    source: Sector

    @property
    def has_map(self) -> bool:
        """Whether places are asked for, besides orbits."""
        return self.r_re.size > 0


@dataclass(frozen=True, eq=False)
class OrbitRequest:
    """One ``[[orbit]]`` table.

    Attributes
    ----------
    name : str
    every_min : float
        Time between the places asked for.
    source : Source or EquatorialTable
        Where the spacecraft is.
    key : str
        How an error line names it: ``orbit[1].tle``.
    """

    name: str
    every_min: float
    source: Source | EquatorialTable
    key: str


def sample_times(every_min: float, start: datetime, end_h: float) -> tuple[Micros, Floats]:
    """The instants within a run at which an orbit is asked for, and their run times in hours.

    Both rise, in a backward run too. They are multiples of `every_min` from the start of the run.

    Parameters
    ----------
    every_min : float
    start : datetime
    end_h : float
        Signed hours at which the run ends.
    """
    count = int(np.floor(abs(end_h) * 60.0 / every_min * (1.0 + 1e-12)))
    steps = np.arange(count + 1) if end_h > 0 else np.arange(-count, 1)
    time_h = np.clip(steps * every_min / 60.0, min(end_h, 0.0), max(end_h, 0.0))
    return micros(start) + np.rint(time_h * MICROS_PER_HOUR).astype(np.int64), time_h
