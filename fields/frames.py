"""Coordinate frames of places near the Earth, at instants: GEO, ITRF, GCRS and TEME to solar-magnetic (SM) and back.

GEO and ITRF are one frame here: fixed to the Earth, z to the pole, x to longitude 0. SM has z along the dipole axis to
the north and the Sun in the half plane of x > 0; y points to dusk. The axis is that of the IGRF-14 at the instant
(`fields.magnetic.igrf`), so dates are limited to 1900 to 2030. The Sun is the apparent Sun, light time and aberration
included, from the analytical ephemeris that astropy carries (ERFA's epv00, 4 km of the Earth's distance vector).
Rotations are IAU 2006/2000A with astropy; TEME by the sidereal time of 1982 (Vallado et al. 2006, AIAA 2006-6753).

Nothing is ever downloaded. Earth orientation (UT1 - UTC, polar motion) comes from the table that astropy brings,
observed or predicted, from 1973 to about a year after that version of astropy's data; outside it UT1 = UTC and the
mean pole stand in. |UT1 - UTC| is kept below 0.9 s by definition, which is 0.0038 degree of the Earth's rotation. What
that does to SM, measured against the table every tenth day from its start to its end: at most 0.0034 degree for places
given in GEO, 0.0007 degree for GCRS and TEME. Before 1960 times are taken as UT.
"""

from __future__ import annotations

import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from functools import cache
from typing import TYPE_CHECKING, Any

import numpy as np

from fields.clock import Micros, utc_text
from fields.errors import InputError, nearest
from fields.magnetic.igrf import EPOCHS, dipole_axis
from fields.units import Floats

if TYPE_CHECKING:
    from astropy.time import Time

FRAMES = ("SM", "GEO", "ITRF", "GCRS", "TEME")
EXTRA = "pip install 'driftrose[orbits]'"


def to_sm(places: Floats, stamps: Micros, frame: str) -> Floats:
    """Places in SM.

    Parameters
    ----------
    places : ndarray, shape (n, 3)
        From the Earth's centre, in any unit of length.
    stamps : ndarray of int64, shape (n,)
        Their instants, microseconds since 1970-01-01 UTC.
    frame : str
        One of `FRAMES`.

    Returns
    -------
    ndarray, shape (n, 3)
        In the same unit.

    Raises
    ------
    InputError
        For an unknown frame, instants outside 1900 to 2030, or without astropy.
    """
    _check(frame)
    if frame == "SM":
        return np.array(places, dtype=float)
    with _sky(stamps) as time:
        return np.asarray(np.einsum("nij,nj->ni", _sm_axes(stamps, time), _turned(places, time, frame, "ITRF")))


def from_sm(places: Floats, stamps: Micros, frame: str) -> Floats:
    """Places given in SM, in another frame: the inverse of `to_sm`."""
    _check(frame)
    if frame == "SM":
        return np.array(places, dtype=float)
    with _sky(stamps) as time:
        return _turned(np.einsum("nji,nj->ni", _sm_axes(stamps, time), places), time, "ITRF", frame)


def sun_direction(stamps: Micros) -> Floats:
    """Unit vectors to the apparent Sun in GEO, shape (n, 3)."""
    with _sky(stamps) as time:
        return _sun(time)


def decimal_year(stamps: Micros) -> Floats:
    """Years with their fraction, as the epochs of the IGRF are counted."""
    instant = stamps.view("datetime64[us]")
    year = instant.astype("datetime64[Y]")
    begin, end = year.astype("datetime64[us]"), (year + 1).astype("datetime64[us]")
    return np.asarray(year.astype(int) + 1970 + (instant - begin) / (end - begin))


def _check(frame: str) -> None:
    if frame not in FRAMES:
        raise InputError("unknown frame", nearest(frame, FRAMES), key="frame", value=frame)


def _sm_axes(stamps: Micros, time: Time) -> Floats:
    """The unit vectors of SM in GEO, shape (n, 3, 3), one in a row."""
    north = _axis(stamps)
    dusk = np.cross(north, _sun(time))
    dusk /= np.linalg.norm(dusk, axis=1, keepdims=True)
    return np.stack([np.cross(dusk, north), dusk, north], axis=1)


def _axis(stamps: Micros) -> Floats:
    year = decimal_year(stamps)
    outside = ~((year >= EPOCHS[0]) & (year <= EPOCHS[-1]))
    if np.any(outside):
        remedy = f"times from {EPOCHS[0]:g} to the start of {EPOCHS[-1]:g}, as the IGRF has them"
        raise InputError("no dipole axis for then", remedy, key="time", value=utc_text(stamps[outside][0]))
    return dipole_axis(year)


def _sun(time: Time) -> Floats:
    from astropy.coordinates import get_sun

    sun = _turned(get_sun(time).cartesian.xyz.to_value("au").T, time, "GCRS", "ITRF")
    return np.asarray(sun / np.linalg.norm(sun, axis=1, keepdims=True))


def _turned(places: Floats, time: Time, given: str, wanted: str) -> Floats:
    """Places from one frame of astropy's to another, which is a rotation."""
    from astropy import coordinates

    kinds: dict[str, Any] = {
        "GEO": coordinates.ITRS,
        "ITRF": coordinates.ITRS,
        "GCRS": coordinates.GCRS,
        "TEME": coordinates.TEME,
    }
    if kinds[given] is kinds[wanted]:
        return np.array(places, dtype=float)
    # any length will do for a rotation; without one astropy would put the places at infinity
    lengths = coordinates.CartesianRepresentation(np.asarray(places, dtype=float).T, unit="km")
    turned = kinds[given](lengths, obstime=time).transform_to(kinds[wanted](obstime=time))
    return np.asarray(turned.cartesian.xyz.to_value("km").T, dtype=float)


@contextmanager
def _sky(stamps: Micros) -> Iterator[Time]:
    """The instants for astropy, with its settings: offline, its own table of Earth orientation, no warnings."""
    try:
        from astropy.utils import iers
        from erfa import ErfaWarning
    except ImportError:
        raise InputError("coordinate frames take astropy, which is not installed", EXTRA) from None
    from astropy.utils.exceptions import AstropyWarning

    with (
        iers.conf.set_temp("auto_download", False),
        iers.conf.set_temp("auto_max_age", None),
        warnings.catch_warnings(),
    ):
        # of times far from now, and outside the table: what that costs stands at the top
        warnings.simplefilter("ignore", ErfaWarning)
        warnings.simplefilter("ignore", AstropyWarning)
        table = _earth_orientation()
        with iers.earth_orientation_table.set(table):
            from astropy.time import Time

            time = Time(stamps.view("datetime64[us]"), scale="utc")
            ut1_utc, status = table.ut1_utc(time, return_status=True)
            beyond = (status == iers.TIME_BEFORE_IERS_RANGE) | (status == iers.TIME_BEYOND_IERS_RANGE)
            time.delta_ut1_utc = np.where(beyond, 0.0, ut1_utc.to_value("s"))
            yield time


@cache
def _earth_orientation() -> Any:
    """The table of UT1 - UTC and polar motion in astropy's own data, 1973 to about a year from their date."""
    from astropy.utils import iers

    return iers.IERS_A.read(file=iers.IERS_A_FILE)
