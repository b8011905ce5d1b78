"""Keplerian elements: Kepler's equation, the constants, the secular rates against published ones and an integrator."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp
from sgp4.earth_gravity import wgs84
from tolerances import bound

from fields import constants
from tracer.ephemeris.elements import Elements, eccentric_anomaly

DAY_S = 86400.0


def elements(a_km: float, e: float, i_deg: float, **angles: float) -> Elements:
    usual = {"raan_deg": 0.0, "argp_deg": 0.0, "m_deg": 0.0, **angles}
    return Elements(0, a_km / constants.EARTH_RADIUS_KM, e, i_deg, **usual)


def place_km(orbit: Elements, seconds: float) -> np.ndarray:
    (piece,) = orbit.pieces(np.array([round(seconds * 1e6)]))
    assert piece.frame == "TEME"
    return piece.places_km[0]


def test_constants_agree_with_those_of_wgs_84() -> None:
    # sgp4 carries WGS 84 as printed by Vallado: GM, equatorial radius and J2 to seven, seven and six digits
    assert pytest.approx(wgs84.mu, rel=2e-7) == constants.EARTH_GM_KM3_S2
    assert pytest.approx(wgs84.radiusearthkm, rel=1e-7) == constants.EARTH_EQUATOR_KM
    assert pytest.approx(wgs84.j2, rel=1e-5) == constants.EARTH_J2


@settings(max_examples=200, deadline=None)
@given(mean=st.floats(-50.0, 50.0), e=st.one_of(st.floats(0.0, 0.99), st.floats(0.99, 0.99999)))
def test_keplers_equation(mean: float, e: float) -> None:
    found = float(eccentric_anomaly(np.array([mean]), e)[0])
    turns = round((mean - found) / (2.0 * np.pi))
    with mpmath.workdps(40):
        exact = mpmath.mpf(found) - mpmath.mpf(e) * mpmath.sin(mpmath.mpf(found)) - mpmath.mpf(mean)
        # the residual that a rounding of the anomalies allows
        assert abs(exact + 2 * mpmath.pi * turns) < 1e-14 + 4e-16 * abs(mean)


def test_places_of_a_plain_ellipse() -> None:
    """At perigee and apogee, and by the vis-viva and area laws in between."""
    orbit = elements(26000.0, 0.7, 0.0)
    assert place_km(orbit, 0.0) == pytest.approx([26000.0 * 0.3, 0.0, 0.0], abs=1e-9)
    assert orbit.perigee_re * constants.EARTH_RADIUS_KM == pytest.approx(26000.0 * 0.3, rel=1e-14)
    half = np.pi / orbit.rates()[2]
    assert np.linalg.norm(place_km(orbit, half)) == pytest.approx(26000.0 * 1.7, rel=1e-9)
    assert np.linalg.norm(place_km(orbit, 0.3 * half)) == pytest.approx(
        np.linalg.norm(place_km(orbit, 1.7 * half)), rel=1e-9
    )


def test_orientation() -> None:
    """Node, inclination and perigee turn about the right axes."""
    place = place_km(elements(8000.0, 0.1, 60.0, raan_deg=90.0, argp_deg=90.0), 0.0)
    # perigee a quarter turn past a node that lies on the y axis: 60 degrees up, towards -x
    assert place == pytest.approx(7200.0 * np.array([-np.cos(np.pi / 3), 0.0, np.sin(np.pi / 3)]), abs=1e-9)
    place = place_km(elements(8000.0, 0.0, 30.0, m_deg=90.0), 0.0)
    assert place == pytest.approx(8000.0 * np.array([0.0, np.cos(np.pi / 6), np.sin(np.pi / 6)]), abs=1e-9)


def test_sun_synchronous_orbit() -> None:
    # handbooks: at 800 km above the equator the node keeps pace with the Sun, 0.9856 degrees a day, at 98.6 degrees
    orbit = elements(6378.137 + 800.0, 0.0, 98.6)
    assert np.degrees(orbit.rates()[0]) * DAY_S == pytest.approx(0.9856, abs=0.003)


def test_frozen_perigee() -> None:
    # the critical inclination, 63.4349 degrees: 5 cos^2 i = 1
    orbit = elements(26560.0, 0.74, 63.4349488)
    assert abs(np.degrees(orbit.rates()[1])) * DAY_S < 1e-7
    assert np.degrees(elements(26560.0, 0.74, 60.0).rates()[1]) * DAY_S > 0.01


def oblate(_: float, state: np.ndarray) -> np.ndarray:
    """Acceleration of a point mass and J2 (Vallado 2013, eq. 8-30), km and s."""
    x, y, z, *velocity = state
    r2 = x * x + y * y + z * z
    factor = 1.5 * constants.EARTH_J2 * constants.EARTH_EQUATOR_KM**2 / r2
    pull = -constants.EARTH_GM_KM3_S2 / r2**1.5
    level = pull * (1.0 + factor * (1.0 - 5.0 * z * z / r2))
    upright = pull * (1.0 + factor * (3.0 - 5.0 * z * z / r2))
    return np.array([*velocity, x * level, y * level, z * upright])


def angles_of(state: np.ndarray) -> tuple[float, float]:
    """Node and argument of perigee of the osculating orbit."""
    r, v = state[:3], state[3:]
    h = np.cross(r, v)
    node = np.array([-h[1], h[0], 0.0]) / np.hypot(h[0], h[1])
    ecc = np.cross(v, h) / constants.EARTH_GM_KM3_S2 - r / np.linalg.norm(r)
    across = np.cross(h / np.linalg.norm(h), node)
    return float(np.arctan2(node[1], node[0])), float(np.arctan2(ecc @ across, ecc @ node))


@pytest.mark.parametrize(("a_km", "e", "i_deg"), [(25500.0, 0.6, 28.0), (12000.0, 0.3, 51.6), (20000.0, 0.5, 120.0)])
def test_secular_rates_against_an_integrator(a_km: float, e: float, i_deg: float) -> None:
    """Node and perigee from apogee to apogee of an orbit in the field of an oblate Earth, integrated by scipy."""
    orbit = elements(a_km, e, i_deg)
    apogee, speed = a_km * (1.0 + e), np.sqrt(constants.EARTH_GM_KM3_S2 / a_km * (1.0 - e) / (1.0 + e))
    tilt = np.radians(i_deg)
    start = np.array([-apogee, 0.0, 0.0, 0.0, -speed * np.cos(tilt), -speed * np.sin(tilt)])

    def at_apogee(_: float, state: np.ndarray) -> float:
        return float(np.dot(state[:3], state[3:]))

    at_apogee.direction = -1.0  # type: ignore[attr-defined]
    span = 20.0 * 2.0 * np.pi / orbit.mean_motion
    solved = solve_ivp(oblate, (0.0, 1.05 * span), start, method="DOP853", rtol=1e-12, atol=1e-9, events=at_apogee)
    times, states = solved.t_events[0], solved.y_events[0]
    first, last = 1, 19
    elapsed = times[last] - times[first]
    # the osculating axis at apogee is not the mean one: take the mean one from the period from apogee to apogee
    motion = 2.0 * np.pi * (last - first) / elapsed
    mean = elements((constants.EARTH_GM_KM3_S2 / motion**2) ** (1 / 3), e, i_deg)
    (node0, perigee0), (node1, perigee1) = angles_of(states[first]), angles_of(states[last])
    turned = np.remainder(np.array([node1 - node0, perigee1 - perigee0]) + np.pi, 2.0 * np.pi) - np.pi
    assert turned / elapsed == pytest.approx(mean.rates()[:2], rel=bound("first order in J2"))
