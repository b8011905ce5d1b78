"""Orbits of spacecraft through a run: where they are in SM, to which point of the equator their field line leads, and
which pitch angles reach them there."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fields import constants, frames
from fields.clock import Micros, utc_text
from fields.errors import InputError
from fields.field import Field
from fields.units import Floats, cot2_of_pitch, mlt_from_phi, pitch_of_cot2
from tracer.access_plan import OrbitRequest, sample_times
from tracer.ephemeris.sampled import EquatorialTable
from tracer.ephemeris.source import Source
from tracer.scenario import Scenario

Mask = NDArray[np.bool_]


@dataclass(frozen=True, eq=False)
class Orbit:
    """A spacecraft at the times of a run that its source covers; n of them, rising.

    Attributes
    ----------
    name : str
    every_min : float
        Time between neighbours where the source has no gap.
    time_h : ndarray, shape (n,)
        Run times.
    place_re : ndarray, shape (n, 3), or None
        Places in SM, R_E; None where the source gives points of the equator only.
    r_re, mlt_h : ndarray, shape (n,)
        Where the field line through the place crosses the equator. inf, with the local time of the place itself, where
        it does not come back.
    b_ratio : ndarray, shape (n,)
        B at the place over B where its line crosses the equator, at least 1: the mirror field of the particles that
        reach the place must be as strong. 1 on the equator, inf where the line does not cross it.
    inside : ndarray of bool, shape (n,)
        Whether the point of the equator lies in the domain.
    """

    name: str
    every_min: float
    time_h: Floats
    place_re: Floats | None
    r_re: Floats
    mlt_h: Floats
    b_ratio: Floats
    inside: Mask

    def out_of_reach(self, pitch_deg: ArrayLike) -> Mask:
        """For each equatorial pitch angle and time, whether such particles mirror before they come to the place.

        Parameters
        ----------
        pitch_deg : array_like, shape (m,)

        Returns
        -------
        ndarray of bool, shape (m, n)
        """
        return ~reaches(np.asarray(pitch_deg, dtype=float)[:, None], self.b_ratio)


def orbits(scenario: Scenario) -> tuple[Orbit, ...]:
    """All orbits of a run, in the order of the file; see `orbit_of`."""
    return tuple(orbit_of(request, scenario) for request in scenario.orbits)


def orbit_of(request: OrbitRequest, scenario: Scenario) -> Orbit:
    """One orbit of a run.

    Parameters
    ----------
    request : OrbitRequest
        From ``scenario.orbits``.
    scenario : Scenario

    Returns
    -------
    Orbit

    Raises
    ------
    InputError
        When the orbit cannot be computed, leads into the Earth, or a package that it takes is not installed.
    """
    stamps, time_h = sample_times(request.every_min, scenario.start, scenario.end_h)
    covered = request.source.covered(stamps)
    stamps, time_h = stamps[covered], time_h[covered]
    try:
        if isinstance(request.source, EquatorialTable):
            place, (r, phi) = None, request.source.at(stamps)
            b_ratio = np.ones(r.shape)
        else:
            place = _places(request.source, stamps)
            r, phi, b_ratio = mapped(scenario.field, place)
    except InputError as error:
        raise error.placed(file=scenario.origin.file, key=request.key) from None
    inside = (r >= scenario.domain.inner_re) & (r <= scenario.domain.outer_re)
    return Orbit(request.name, request.every_min, time_h, place, r, mlt_from_phi(phi), b_ratio, inside)


def mapped(field: Field, place_re: Floats) -> tuple[Floats, Floats, Floats]:
    """Along the field lines from SM places to the equator.

    Parameters
    ----------
    field : Field
    place_re : ndarray, shape (n, 3)

    Returns
    -------
    r, phi, b_ratio : ndarray, shape (n,)
        Distance in R_E and azimuth in radians of the crossing, and B at the place over B there. inf, the azimuth of the
        place and inf where the line does not cross.
    """
    x, y, z = place_re.T
    try:
        r, phi = field.lines.equatorial_point(x, y, z)
    except InputError:  # at least one of them does not
        r, phi = np.array(list(_one_by_one(field, place_re))).reshape(-1, 2).T
    crossing = np.isfinite(r)
    b_ratio = np.full(r.shape, np.inf)
    local = np.sqrt(sum(np.square(b) for b in field.magnetic.field_nT(x[crossing], y[crossing], z[crossing])))
    b_ratio[crossing] = np.maximum(local / field.equatorial_field(r[crossing], phi[crossing]), 1.0)
    return r, phi, b_ratio


def reaches(pitch_deg: ArrayLike, b_ratio: ArrayLike) -> Mask:
    """Whether particles of an equatorial pitch angle come to where B is `b_ratio` times that of the equator:
    ``sin^2 a_eq <= 1 / b_ratio``."""
    return np.asarray(1.0 + cot2_of_pitch(pitch_deg) >= np.asarray(b_ratio, dtype=float))


def local_to_equatorial_pitch(pitch_deg: ArrayLike, b_ratio: ArrayLike) -> Floats:
    """Equatorial pitch angles of particles with local ones, degrees: ``sin^2 a_eq = sin^2 a / b_ratio``, which mu
    conserves; written as ``cot^2 a_eq = b_ratio cot^2 a + (b_ratio - 1)``, so that no digits cancel near 90 degrees.

    Parameters
    ----------
    pitch_deg : array_like
        Local pitch angles, above 0 and up to 90.
    b_ratio : array_like
        Local B over that at the equator, at least 1; they broadcast.
    """
    ratio = np.asarray(b_ratio, dtype=float)
    finite = np.isfinite(ratio)
    within = np.where(finite, ratio, 1.0)
    cot2 = within * cot2_of_pitch(pitch_deg) + (within - 1.0)
    return pitch_of_cot2(np.where(finite, cot2, np.inf))


def equatorial_to_local_pitch(pitch_deg: ArrayLike, b_ratio: ArrayLike) -> tuple[Floats, Mask]:
    """Local pitch angles of particles with equatorial ones, degrees, and which come there at all; 90 for the others."""
    ratio = np.asarray(b_ratio, dtype=float)
    excess = cot2_of_pitch(pitch_deg) - (ratio - 1.0)
    there = reaches(pitch_deg, ratio)
    return pitch_of_cot2(np.where(there, np.maximum(excess, 0.0), 0.0) / ratio), there


def _places(source: Source, stamps: Micros) -> Floats:
    """SM places in R_E at covered instants, shape (n, 3)."""
    found = np.empty((stamps.size, 3))
    for piece in source.pieces(stamps):
        found[piece.rows] = frames.to_sm(piece.places_km, stamps[piece.rows], piece.frame) / constants.EARTH_RADIUS_KM
    distance = np.linalg.norm(found, axis=1)
    if np.any(distance < 1.0):
        at = int(np.argmax(distance < 1.0))
        problem = f"{distance[at]:.4g} R_E from the Earth's centre at {utc_text(stamps[at])}: inside the Earth"
        raise InputError(problem, "an orbit outside the Earth")
    return found


def _one_by_one(field: Field, place_re: Floats) -> Iterator[tuple[float, float]]:
    for x, y, z in place_re:
        try:
            r, phi = field.lines.equatorial_point(x, y, z)
            yield float(r), float(phi)
        except InputError:
            yield np.inf, float(np.arctan2(y, x))
