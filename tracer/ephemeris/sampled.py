"""Orbits given as states at instants, and what lies between."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fields.clock import Micros
from fields.units import RAD_PER_MLT_HOUR, Floats
from tracer.ephemeris.interpolation import interpolated
from tracer.ephemeris.source import Piece


@dataclass(frozen=True, eq=False)
class Segment:
    """States in one frame, between which one may interpolate.

    Attributes
    ----------
    frame : str
        One of `fields.frames.FRAMES`.
    times : ndarray of int64, shape (n,)
        Microseconds since 1970-01-01 UTC, rising.
    places_km : ndarray, shape (n, 3)
    velocities_km_s : ndarray, shape (n, 3), or None
        Where they take part in the interpolation.
    points : int
        States that a polynomial goes through.
    first, last : int
        The instants between which it may be used.
    """

    frame: str
    times: Micros
    places_km: Floats
    velocities_km_s: Floats | None
    points: int
    first: int
    last: int

    def covers(self, stamps: Micros) -> NDArray[np.bool_]:
        """Which instants may be taken from it."""
        return np.asarray((stamps >= self.first) & (stamps <= self.last))

    def at(self, stamps: Micros) -> Floats:
        """Places in km at covered instants, shape (m, 3)."""
        return interpolated(stamps, self.times, self.places_km, self.velocities_km_s, self.points)


@dataclass(frozen=True, eq=False)
class Ephemeris:
    """Segments in the order of their file; where two meet or overlap, the first one counts."""

    segments: tuple[Segment, ...]
    file: str = ""
    sha256: str = ""

    @property
    def cover(self) -> tuple[int, int]:
        """First and last covered instant; there may be gaps between segments."""
        return min(s.first for s in self.segments), max(s.last for s in self.segments)

    def covered(self, stamps: Micros) -> NDArray[np.bool_]:
        """See Source."""
        return np.asarray(np.any([segment.covers(stamps) for segment in self.segments], axis=0))

    def pieces(self, stamps: Micros) -> Iterator[Piece]:
        """See Source."""
        left = np.ones(stamps.shape, dtype=bool)
        for segment in self.segments:
            rows = np.flatnonzero(left & segment.covers(stamps))
            left[rows] = False
            if rows.size:
                yield Piece(rows, segment.frame, segment.at(stamps[rows]))


@dataclass(frozen=True, eq=False)
class EquatorialTable:
    """Points of the magnetic equator by time, joined by straight lines in r and in local time the shorter way round.

    Attributes
    ----------
    times : ndarray of int64, shape (n,)
    r_re, mlt_h : ndarray, shape (n,)
    file, sha256 : str
    """

    times: Micros
    r_re: Floats
    mlt_h: Floats
    file: str = ""
    sha256: str = ""

    @property
    def cover(self) -> tuple[int, int]:
        """First and last covered instant."""
        return int(self.times[0]), int(self.times[-1])

    def covered(self, stamps: Micros) -> NDArray[np.bool_]:
        """Which instants it covers."""
        return np.asarray((stamps >= self.times[0]) & (stamps <= self.times[-1]))

    def at(self, stamps: Micros) -> tuple[Floats, Floats]:
        """Distance in R_E and azimuth in radians at covered instants."""
        since = (self.times - self.times[0]).astype(float)
        wanted = (stamps - self.times[0]).astype(float)
        phi = np.unwrap((self.mlt_h - 12.0) * RAD_PER_MLT_HOUR)
        return np.interp(wanted, since, self.r_re), np.interp(wanted, since, phi)
