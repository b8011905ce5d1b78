"""Coordinate frames: against published rotations, an almanac's Sun and an axis put together by hand; always offline."""

from __future__ import annotations

import builtins
import json
import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from tolerances import bound

from fields import frames
from fields.clock import array_micros, iso_micros
from fields.errors import InputError
from fields.magnetic.igrf import dipole_axis

ROOT = Path(__file__).parents[2]
J2000_MICROS = array_micros("2000-01-01T12:00:00", "time")


def instants(*texts: str) -> np.ndarray:
    return array_micros(np.array(texts, dtype="datetime64[us]"), "time")


def every(days: int, first: str, last: str) -> np.ndarray:
    """Instants of all hours of the day, some days apart."""
    grid = np.arange(np.datetime64(first), np.datetime64(last), np.timedelta64(days, "D")).astype("datetime64[us]")
    return array_micros(grid, "time") + np.arange(grid.size) * 7919 % 86400 * 1_000_000


def angle_deg(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    """Between vectors, also when it is small."""
    return np.degrees(np.arctan2(np.linalg.norm(np.cross(a, b), axis=1), np.sum(a * b, axis=1)))


@settings(max_examples=30, deadline=None)
@given(
    place=st.tuples(*[st.floats(-10.0, 10.0)] * 3).filter(lambda p: np.linalg.norm(p) > 0.5),
    seconds=st.integers(-2 * 10**9, 1_893_400_000),  # 1906 to 2029
    frame=st.sampled_from(frames.FRAMES),
)
def test_there_and_back(place: tuple[float, float, float], seconds: int, frame: str) -> None:
    stamps = np.array([seconds * 1_000_000])
    given_ = np.array([place])
    there = frames.to_sm(given_, stamps, frame)
    assert np.linalg.norm(there) == pytest.approx(np.linalg.norm(place), rel=bound("frame round trip"))
    back = frames.from_sm(there, stamps, frame)
    assert back == pytest.approx(given_, abs=bound("frame round trip") * np.linalg.norm(place))


def test_sm_stands_as_it_is_defined() -> None:
    """z to the geomagnetic pole, x at right angles to it in the half plane of the Sun, y to dusk; right-handed."""
    stamps = every(97, "1901-01-01", "2029-12-31")
    basis = [frames.from_sm(np.tile(unit, (stamps.size, 1)), stamps, "GEO") for unit in np.eye(3)]
    sun = frames.sun_direction(stamps)
    north = dipole_axis(frames.decimal_year(stamps))
    assert basis[2] == pytest.approx(north, abs=bound("frame round trip"))
    assert np.abs(np.sum(basis[1] * sun, axis=1)).max() < bound("frame round trip")
    assert np.all(np.sum(basis[0] * sun, axis=1) > 0.5)
    assert np.cross(basis[0], basis[1]) == pytest.approx(basis[2], abs=bound("frame round trip"))


def shorter_almanac(days: np.ndarray) -> np.ndarray:
    """Unit vectors to the apparent Sun, mean equator and equinox of date, at `days` since 2000 January 1.5.

    "Low precision formulas for the Sun's coordinates", Astronomical Almanac, section C: to 0.01 degree between 1950 and
    2050 (coefficients from memory).
    """
    anomaly = np.radians(357.528 + 0.9856003 * days)
    longitude = 280.460 + 0.9856474 * days + 1.915 * np.sin(anomaly) + 0.020 * np.sin(2.0 * anomaly)
    return on_the_ecliptic(np.radians(longitude), np.radians(23.439 - 4e-7 * days))


def almanac(days: np.ndarray) -> np.ndarray:
    """The same by Meeus (1998), Astronomical Algorithms, chapter 25, "low accuracy", to 0.01 degree (coefficients from
    memory), with the nutation of the node, and turned back by the equation of the equinoxes."""
    t = days / 36525.0
    anomaly = np.radians(357.52911 + 35999.05029 * t - 1.537e-4 * t * t)
    centre = (1.914602 - 0.004817 * t - 1.4e-5 * t * t) * np.sin(anomaly)
    centre += (0.019993 - 1.01e-4 * t) * np.sin(2.0 * anomaly) + 2.89e-4 * np.sin(3.0 * anomaly)
    node = np.radians(125.04 - 1934.136 * t)
    nutation = -0.00478 * np.sin(node)
    longitude = 280.46646 + 36000.76983 * t + 3.032e-4 * t * t + centre - 0.00569 + nutation
    tilt = np.radians(23.43929111 - 0.01300417 * t + 0.00256 * np.cos(node))
    return turned_by(np.radians(nutation) * np.cos(tilt), on_the_ecliptic(np.radians(longitude), tilt))


def on_the_ecliptic(longitude: np.ndarray, tilt: np.ndarray) -> np.ndarray:
    """Unit vectors on the ecliptic in equatorial coordinates; angles in radians."""
    north = np.sin(longitude)
    return np.stack([np.cos(longitude), np.cos(tilt) * north, np.sin(tilt) * north], axis=1)


def sidereal_rad(days: np.ndarray) -> np.ndarray:
    """Greenwich mean sidereal time of 1982 (Aoki et al. 1982, Astron. Astrophys. 105, 359; from memory)."""
    century = days / 36525.0
    return np.radians(np.mod(280.46061837 + 360.98564736629 * days + 3.87933e-4 * century**2, 360.0))


def turned_by(angle: np.ndarray, vectors: np.ndarray) -> np.ndarray:
    """Components along axes that are turned about z by `angle`."""
    x, y, z = vectors.T
    return np.stack([x * np.cos(angle) + y * np.sin(angle), y * np.cos(angle) - x * np.sin(angle), z], axis=1)


@pytest.mark.parametrize(
    ("formula", "tolerance"), [(almanac, "almanac sun deg"), (shorter_almanac, "shorter almanac sun deg")]
)
def test_the_sun_stands_where_an_almanac_has_it(formula: Callable[[np.ndarray], np.ndarray], tolerance: str) -> None:
    stamps = every(11, "1973-02-01", "2027-01-01")
    days = (stamps - J2000_MICROS) / 86400e6
    ut1_utc, _ = frames._earth_orientation().ut1_utc(2451545.0 + days, 0.0, return_status=True)
    terrestrial = days + 60.0 / 86400.0  # 45 to 69 s; the Sun takes 0.0002 degree for the difference
    by_almanac = turned_by(sidereal_rad(days + ut1_utc.value / 86400.0), formula(terrestrial))
    apart = angle_deg(frames.sun_direction(stamps), by_almanac)
    assert apart.max() < bound(tolerance)
    assert np.sqrt(np.mean(apart**2)) < 0.5 * bound(tolerance)


def test_a_published_place_of_the_sun() -> None:
    # Meeus (1998), Astronomical Algorithms, example 25.a: 1992 October 13.0 TD, apparent right ascension 198.38083,
    # declination -7.78507 degrees (from memory). TT - UTC was 27 + 32.184 s.
    stamps = instants("1992-10-12T23:59:00.816")
    days = (stamps - J2000_MICROS) / 86400e6
    sun = turned_by(-sidereal_rad(days), frames.sun_direction(stamps))[0]
    found = np.degrees([np.mod(np.arctan2(sun[1], sun[0]), 2.0 * np.pi), np.arcsin(sun[2])])
    assert found == pytest.approx([198.38083, -7.78507], abs=bound("almanac sun deg"))


def test_sm_put_together_by_hand() -> None:
    """From the almanac's Sun, mean sidereal time and the axis, as in Hapgood (1992), Planet. Space Sci. 40, 711."""
    stamps = every(53, "1960-01-01", "2029-12-31")
    days = (stamps - J2000_MICROS) / 86400e6
    sun = turned_by(sidereal_rad(days), almanac(days))
    north = dipole_axis(frames.decimal_year(stamps))
    dusk = np.cross(north, sun)
    dusk /= np.linalg.norm(dusk, axis=1, keepdims=True)
    for place in np.eye(3):
        places = np.tile(place, (stamps.size, 1))
        by_hand = np.stack([np.cross(dusk, north) @ place, dusk @ place, north @ place], axis=1)
        # the Sun is up to 34 degrees off the SM equator: its error in azimuth is larger by one over the cosine
        most = (bound("almanac sun deg") + bound("earth orientation deg")) / np.cos(np.radians(34.0))
        assert angle_deg(frames.to_sm(places, stamps, "GEO"), by_hand).max() < most


# Vallado et al. (2006), AIAA 2006-6753, appendix C: a satellite on 2004 April 6, 07:51:28.386009 UTC, km (from memory)
PUBLISHED = {
    "ITRF": (-1033.4793830, 7901.2952754, 6380.3565958),
    "TEME": (5094.18016210, 6127.64465950, 6380.34453270),
    "GCRS": (5102.50895290, 6123.01139910, 6378.13693380),
}


@pytest.mark.parametrize("given_", PUBLISHED)
@pytest.mark.parametrize("wanted", PUBLISHED)
def test_published_rotations(given_: str, wanted: str) -> None:
    stamps = instants("2004-04-06T07:51:28.386009")
    sm = frames.to_sm(np.array([PUBLISHED[given_]]), stamps, given_)
    found = frames.from_sm(sm, stamps, wanted)[0]
    assert found == pytest.approx(PUBLISHED[wanted], abs=bound("published rotation km"))


def test_geo_is_fixed_to_the_earth() -> None:
    stamps = every(211, "1970-01-01", "2029-12-31")
    places = np.random.default_rng(1).normal(size=(stamps.size, 3))
    assert np.array_equal(frames.to_sm(places, stamps, "GEO"), frames.to_sm(places, stamps, "ITRF"))


@pytest.mark.parametrize(("frame", "most_deg"), [("GEO", 0.0038), ("GCRS", 0.001), ("TEME", 0.001)])
def test_what_is_lost_beyond_the_table(frame: str, most_deg: float, monkeypatch: pytest.MonkeyPatch) -> None:
    """The table's own years, with the table and without."""
    table = frames._earth_orientation()
    stamps = every(61, "1973-02-01", "2027-01-01")
    places = [np.tile(unit, (stamps.size, 1)) for unit in np.eye(3)]
    with_table = [frames.to_sm(place, stamps, frame) for place in places]
    monkeypatch.setattr(frames, "_earth_orientation", lambda: table[:2])
    without = [frames.to_sm(place, stamps, frame) for place in places]
    lost = max(angle_deg(a, b).max() for a, b in zip(with_table, without, strict=True))
    assert 1e-4 < lost < most_deg <= bound("earth orientation deg")


def test_an_instant_counts_alone() -> None:
    """Whether others lie outside the table of Earth orientation makes no difference."""
    stamps = instants("1955-05-05", "2004-04-06T07:51:28", "2029-12-31T23:59:59")
    places = np.ones((3, 3))
    together = frames.to_sm(places, stamps, "GEO")
    alone = [frames.to_sm(places[i : i + 1], stamps[i : i + 1], "GEO")[0] for i in range(3)]
    assert together == pytest.approx(np.array(alone), abs=bound("frame round trip"))


OFFLINE = """
import json, socket, warnings
warnings.simplefilter("error")
asked = []
def refuse(*arguments, **named):
    asked.append(str(arguments))
    raise OSError("no network here")
socket.getaddrinfo = socket.create_connection = socket.socket.connect = refuse
import numpy as np
from fields import frames
stamps = np.array(["1905-01-01", "1990-06-01", "2026-10-01", "2029-12-31"], "datetime64[us]").view(np.int64)
for frame in frames.FRAMES:
    assert np.isfinite(frames.to_sm(np.ones((4, 3)), stamps, frame)).all()
from astropy.utils import iers
print(json.dumps([asked, iers.conf.auto_download, iers.conf.auto_max_age, iers.earth_orientation_table._value is None]))
"""


def test_nothing_is_downloaded_and_no_setting_stays(tmp_path: Path) -> None:
    env = {**os.environ, "PYTHONPATH": str(ROOT), "HOME": str(tmp_path), "XDG_CACHE_HOME": str(tmp_path)}
    done = subprocess.run([sys.executable, "-c", OFFLINE], env=env, cwd=tmp_path, capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    assert json.loads(done.stdout) == [[], True, 30.0, True]


@pytest.mark.parametrize("convert", [frames.to_sm, frames.from_sm])
def test_unknown_frame(convert: Callable[..., Any]) -> None:
    with pytest.raises(InputError, match='frame = "ITRS": unknown frame; did you mean ITRF'):
        convert(np.ones((1, 3)), instants("2020-01-01"), "ITRS")


@pytest.mark.parametrize("time", ["1899-12-31T23:59:59", "2030-01-01T00:00:01", "2040-01-01"])
def test_times_without_an_axis(time: str) -> None:
    with pytest.raises(InputError, match=f"time = .{time}.*: no dipole axis for then; times from 1900 to the start of"):
        frames.to_sm(np.ones((1, 3)), instants(time), "GEO")


def test_without_astropy(monkeypatch: pytest.MonkeyPatch) -> None:
    found = builtins.__import__

    def missing(name: str, *rest: Any) -> Any:
        if name.partition(".")[0] == "astropy":
            raise ImportError(name)
        return found(name, *rest)

    monkeypatch.setattr(builtins, "__import__", missing)
    with pytest.raises(InputError) as caught:
        frames.to_sm(np.ones((1, 3)), instants("2020-01-01"), "GEO")
    assert str(caught.value) == (
        "driftrose: coordinate frames take astropy, which is not installed; pip install 'driftrose[orbits]'"
    )
    assert np.array_equal(frames.to_sm(np.ones((1, 3)), instants("2020-01-01"), "SM"), np.ones((1, 3)))


def test_decimal_years() -> None:
    stamps = instants("2020-01-01", "2020-07-01", "2021-12-31T12:00:00")
    assert frames.decimal_year(stamps) == pytest.approx([2020.0, 2020.0 + 182 / 366, 2022.0 - 0.5 / 365], rel=1e-15)
    assert iso_micros("2020-07-01") == stamps[1]
