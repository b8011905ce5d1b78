"""The ratios that say where drift theory holds."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy import constants as codata
from storm_runs import STORM, steady, storm_field

import tracer
from fields.drivers import Driver
from tracer.scenario import SPECIES, Species
from tracer.validity import LIMIT, driver_time_scale_h, gyroradius_re, ratios

NAMES = [
    "gyroradius / curvature radius",
    "bounce period / drift period",
    "bounce period / driver time scale",
    "drift speed / particle speed",
]


def sample(**given: Any) -> dict[str, np.ndarray]:
    usual = {"energy_keV": 100.0, "pitch_deg": 60.0, "r_re": 6.0, "mlt_h": 0.0, "release_h": 0.0}
    return dict(zip({**usual, **given}, np.broadcast_arrays(*np.atleast_1d(*{**usual, **given}.values()))))


def by_name(species: str, field: Any = STORM, **given: Any) -> dict[str, Any]:
    return {ratio.name: ratio for ratio in ratios(field, SPECIES[species], sample(**given))}


def history(start: list[float], value: list[float], slope: list[float], end: float) -> Driver:
    return Driver("series:kp", np.array(start), np.array(value), np.array(slope), end)


@pytest.mark.parametrize("species", ["e-", "H+", "He++", "O+"])
@pytest.mark.parametrize("energy_keV", [1e-3, 1.0, 1e3, 1e4])
def test_gyroradius(species: str, energy_keV: float) -> None:
    # p / (|q| B), p from the relativistic energy; CODATA constants
    kind = SPECIES[species]
    field_T = 30000e-9 / 5.0**3
    rest = kind.mass_kg * codata.c**2
    energy = energy_keV * 1e3 * codata.e
    momentum = np.sqrt(energy * (energy + 2 * rest)) / codata.c
    want = momentum / (abs(kind.charge_e) * codata.e * field_T) / 6371.2e3
    assert float(gyroradius_re(STORM, kind, energy_keV, 5.0, 3.0)) == pytest.approx(want, rel=1e-12)


def test_gyroradius_over_curvature_radius_in_a_dipole() -> None:
    # the equatorial curvature radius of a dipole line is r / 3 (textbook)
    r = np.array([2.0, 5.0, 8.0])
    found = by_name("H+", r_re=r, energy_keV=300.0)["gyroradius / curvature radius"]
    want = gyroradius_re(STORM, SPECIES["H+"], 300.0, r, 0.0) / (r / 3.0)
    assert found.largest == pytest.approx(want[2], rel=1e-6)
    assert found.median == pytest.approx(want[1], rel=1e-6)
    assert found.worst == "300 keV, 60 deg, 8 R_E, 0 h"


def test_bounce_of_a_cold_oxygen_ion_takes_half_a_day() -> None:
    # 1 eV O+ at 6 R_E: 3.5 km/s along a path of 4 r T(y)
    found = by_name("O+", energy_keV=1e-3, pitch_deg=45.0)
    bounce_s = float(tracer.periods(STORM, "O+", 1e-3, 45.0, 6.0, 0.0).bounce_s)
    speed_m_s = np.sqrt(2.0 * codata.e / SPECIES["O+"].mass_kg)
    assert bounce_s == pytest.approx(4.0 * 6.0 * 6371.2e3 * float(tracer.bounce_T(45.0)) / speed_m_s, rel=1e-6)
    assert 10.0 < bounce_s / 3600.0 < 14.0
    over_driver = found["bounce period / driver time scale"]
    assert over_driver.median == pytest.approx(bounce_s / 3600.0 / driver_time_scale_h(STORM))
    assert over_driver.share_above == 1.0


def test_ratios_are_periods_and_speeds_over_each_other() -> None:
    found = by_name("e-", energy_keV=1e3, r_re=4.0)
    assert list(found) == NAMES
    time = tracer.periods(STORM, "e-", 1e3, 60.0, 4.0, 0.0)
    assert found["bounce period / drift period"].median == pytest.approx(float(time.bounce_s / time.drift_s))
    rate = tracer.drift_rate(STORM, "e-", 1e3, 60.0, 4.0, 0.0, 0.0)
    drift_m_s = np.hypot(rate.dr_re_per_h, 4.0 * rate.dmlt_per_h * np.pi / 12) * 6371.2e3 / 3600.0
    gamma = 1.0 + 1e6 * codata.e / (codata.m_e * codata.c**2)
    speed = codata.c * np.sqrt(1.0 - gamma**-2)
    assert found["drift speed / particle speed"].median == pytest.approx(float(drift_m_s / speed), rel=1e-9)
    assert all(ratio.share_above == 0.0 for ratio in found.values())  # an MeV electron at 4 R_E is in safe waters
    assert all(ratio.meaning for ratio in found.values())


def test_share_above_the_limit() -> None:
    energy = np.geomspace(1.0, 1e4, 41)
    found = by_name("H+", r_re=8.0, energy_keV=energy)["gyroradius / curvature radius"]
    each = gyroradius_re(STORM, SPECIES["H+"], energy, 8.0, 0.0) / (8.0 / 3.0)
    assert 0.0 < found.share_above < 1.0
    assert found.share_above == pytest.approx(np.mean(each > LIMIT))


def test_cold_particles_are_left_out() -> None:
    assert ratios(STORM, SPECIES["H+"], sample(energy_keV=0.0, pitch_deg=90.0)) == []
    mixed = by_name("H+", energy_keV=np.array([0.0, 100.0]), pitch_deg=90.0)
    alone = by_name("H+", energy_keV=100.0, pitch_deg=90.0)
    assert {n: r.median for n, r in mixed.items()} == {n: r.median for n, r in alone.items()}


@pytest.mark.parametrize(
    ("kp", "scale_h"),
    [
        (steady(3.0), np.inf),
        (history([0.0, 3.0, 6.0], [2.0, 4.0, 3.0], [0.0, 0.0, 0.0], 9.0), 3.0),
        (history([0.0, 3.0, 4.0], [2.0, 4.0, 3.0], [0.0, 0.0, 0.0], 9.0), 1.0),
        (history([0.0, 3.0], [2.0, 2.0], [0.0, 0.0], 6.0), np.inf),
        (history([0.0], [2.0], [0.5], 10.0), 4.0),  # a factor e in about 2 / 0.5 h
    ],
    ids=["constant", "steps", "a short step", "no step", "ramp"],
)
def test_time_scale_of_the_drivers(kp: Driver, scale_h: float) -> None:
    field = storm_field(kp)
    assert driver_time_scale_h(field) == scale_h
    kind: Species = SPECIES["H+"]
    found = {ratio.name: ratio for ratio in ratios(field, kind, sample())}["bounce period / driver time scale"]
    bounce_h = float(tracer.periods(field, kind, 100.0, 60.0, 6.0, 0.0).bounce_s) / 3600.0
    assert found.median == pytest.approx(bounce_h / scale_h)
