"""A geostationary orbit, of which one knows by heart where it goes in a dipole."""

from __future__ import annotations

from datetime import UTC, datetime
from importlib.util import find_spec
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import tracer
from fields import constants
from tracer import orbit

# The geostationary radius, 42164.2 km (handbooks): 6.6107 of the Earth's equatorial radius, 6.6179 of 6371.2 km.
RADIUS_KM = 42164.2
LONGITUDES = (-72.7, -30.0, 17.3, 107.3, 180.0)


def run(folder: Path, orbits: list[dict[str, Any]]) -> tracer.scenario.Scenario:  # type: ignore[name-defined]
    return tracer.build(
        {
            "time": {"start": datetime(2027, 3, 4, tzinfo=UTC), "hours": 24.0},
            "magnetic": {"model": "dipole", "epoch": 2027.2},
            "access": {"species": "e-", "energy_keV": 10.0, "pitch_deg": 90.0},
            "orbit": orbits,
        },
        base=folder,
    )


def published_axis(year: float) -> np.ndarray:
    """The dipole axis from IGRF14.shc of the `ppigrf` wheel (IAGA V-MOD, doi:10.5281/zenodo.14012302)."""
    spec = find_spec("ppigrf")
    assert spec is not None
    assert spec.origin
    rows = [line.split() for line in (Path(spec.origin).parent / "IGRF14.shc").read_text("ascii").splitlines()]
    rows = [row for row in rows if row[0] != "#"]
    epochs = np.array([float(epoch) for epoch in rows[1]])
    table = {(int(n), int(m)): np.array([float(v) for v in values]) for n, m, *values in rows[2:]}
    moment = np.array([np.interp(year, epochs, table[key]) for key in ((1, 1), (1, -1), (1, 0))])
    return -moment / np.linalg.norm(moment)


@pytest.fixture
def stationary(tmp_path: Path) -> dict[float, orbit.Orbit]:
    """Fixed over the equator at several longitudes, for a day."""
    tables = []
    for i, longitude in enumerate(LONGITUDES):
        x, y = RADIUS_KM * np.cos(np.radians(longitude)), RADIUS_KM * np.sin(np.radians(longitude))
        rows = [f"2027-03-0{day}T00:00:00Z,{x!s},{y!s},0" for day in (4, 5)]
        (tmp_path / f"{i}.csv").write_text("\n".join(["time,x_km,y_km,z_km", *rows]))
        tables.append({"name": f"{i}", "csv": f"{i}.csv", "frame": "GEO", "every_min": 15.0})
    return dict(zip(LONGITUDES, orbit.orbits(run(tmp_path, tables)), strict=True))


def test_it_sits_where_its_magnetic_latitude_says(stationary: dict[float, orbit.Orbit]) -> None:
    """``r = 6.61 / cos^2(magnetic latitude)``, the latitude from the published axis alone."""
    axis = published_axis(2027.0 + 62.5 / 365.0)
    for longitude, found in stationary.items():
        up = np.array([np.cos(np.radians(longitude)), np.sin(np.radians(longitude)), 0.0])
        cos2 = 1.0 - float(up @ axis) ** 2
        expected = RADIUS_KM / constants.EARTH_RADIUS_KM / cos2
        assert found.r_re == pytest.approx(np.full(found.r_re.size, expected), rel=1e-6)
    # handbooks: L from 6.6 where the two equators cross to 6.8 at the longitude of the pole
    assert stationary[17.3].r_re[0] == pytest.approx(6.62, abs=0.01)
    assert stationary[107.3].r_re[0] == pytest.approx(6.79, abs=0.02)


def test_it_goes_once_through_local_time_a_day(stationary: dict[float, orbit.Orbit]) -> None:
    for longitude, found in stationary.items():
        mlt = np.unwrap(found.mlt_h, period=24.0)
        # within a minute: the Sun's declination and the equation of time change in a day
        assert mlt[-1] - mlt[0] == pytest.approx(24.0, abs=0.02)
        assert np.all(np.diff(mlt) > 0.0)
        # local time of the dipole runs ahead of and behind that of the clock by the tilt of the axis: 10 degrees of 90
        clock = found.time_h + longitude / 15.0
        ahead = np.remainder(mlt - clock + 12.0, 24.0) - 12.0
        assert np.abs(ahead).max() < 1.2


def test_elements_of_a_geostationary_orbit(tmp_path: Path) -> None:
    elements = {
        "epoch": datetime(2027, 3, 4, tzinfo=UTC),
        "a_re": RADIUS_KM / constants.EARTH_RADIUS_KM,
        "e": 0.0,
        "i_deg": 0.0,
        "raan_deg": 0.0,
        "argp_deg": 0.0,
        "m_deg": 0.0,
    }
    (found,) = orbit.orbits(run(tmp_path, [{"name": "stationary", "elements": elements}]))
    # it keeps its longitude, so the map does not move: within what J2 makes of its period, and the equator of date
    assert np.ptp(found.r_re) < 1e-3
    mlt = np.unwrap(found.mlt_h, period=24.0)
    assert mlt[-1] - mlt[0] == pytest.approx(24.0, abs=0.02)
