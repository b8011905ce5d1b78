"""What lies between the states of a sampled orbit: against scipy's interpolators and closed forms."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.interpolate import BarycentricInterpolator, KroghInterpolator
from tolerances import bound

from tracer.ephemeris.interpolation import interpolated
from tracer.ephemeris.sampled import Ephemeris, EquatorialTable, Segment

MINUTE = 60_000_000
START = 1_800_000_000_000_000  # in 2027


def nodes_of(seed: int, count: int) -> np.ndarray:
    """Uneven instants, one to ten minutes apart."""
    return START + np.cumsum(np.random.default_rng(seed).integers(MINUTE, 10 * MINUTE, count))


@settings(deadline=None)
@given(seed=st.integers(0, 10**6), count=st.integers(2, 7))
def test_lagrange_is_that_of_scipy(seed: int, count: int) -> None:
    nodes = nodes_of(seed, count)
    places = np.random.default_rng(seed).normal(size=(count, 3))
    stamps = np.linspace(nodes[0], nodes[-1], 23).astype(np.int64)
    seconds = (nodes - nodes[0]) / 1e6
    expected = BarycentricInterpolator(seconds, places)((stamps - nodes[0]) / 1e6)
    found = interpolated(stamps, nodes, places, None, count)
    assert found == pytest.approx(expected, abs=bound("interpolating polynomial") * np.abs(expected).max() * 10**2)


@settings(deadline=None)
@given(seed=st.integers(0, 10**6), count=st.integers(2, 5))
def test_hermite_is_that_of_scipy(seed: int, count: int) -> None:
    nodes = nodes_of(seed, count)
    rng = np.random.default_rng(seed)
    places, velocities = rng.normal(size=(2, count, 3))
    stamps = np.linspace(nodes[0], nodes[-1], 23).astype(np.int64)
    minutes = (nodes - nodes[0]) / MINUTE
    # scipy takes a node twice, its value and then its slope
    twice = np.repeat(minutes, 2)
    data = np.stack([places, velocities * 60.0], axis=1).reshape(-1, 3)
    expected = KroghInterpolator(twice, data)((stamps - nodes[0]) / MINUTE)
    found = interpolated(stamps, nodes, places, velocities, count)
    assert found == pytest.approx(expected, abs=bound("interpolating polynomial") * np.abs(expected).max() * 10**3)


@settings(deadline=None)
@given(seed=st.integers(0, 10**6), points=st.integers(2, 7), hermite=st.booleans())
def test_its_own_polynomials_are_met(seed: int, points: int, hermite: bool) -> None:
    """More nodes than a stencil takes: wherever it stands, a polynomial of its degree comes out."""
    nodes = nodes_of(seed, 20)
    hours = (nodes - nodes[0]) / (60 * MINUTE)
    degree = 2 * points - 1 if hermite else points - 1
    curve = np.polynomial.Polynomial(np.random.default_rng(seed).normal(size=degree + 1))
    places = np.stack([curve(hours)] * 3, axis=1)
    velocities = np.stack([curve.deriv()(hours) / 3600.0] * 3, axis=1) if hermite else None
    stamps = np.linspace(nodes[0], nodes[-1], 57).astype(np.int64)
    found = interpolated(stamps, nodes, places, velocities, points)
    expected = curve((stamps - nodes[0]) / (60 * MINUTE))
    assert found[:, 1] == pytest.approx(expected, abs=bound("interpolating polynomial") * np.abs(places).max() * 10**2)


def test_nodes_are_met_to_the_bit() -> None:
    nodes = nodes_of(1, 12)
    places, velocities = np.random.default_rng(2).normal(size=(2, 12, 3))
    assert np.array_equal(interpolated(nodes, nodes, places, None, 8), places)
    assert np.array_equal(interpolated(nodes, nodes, places, velocities, 4), places)


def circle(times: np.ndarray, period_min: float) -> np.ndarray:
    angle = 2.0 * np.pi * (times - START) / (period_min * MINUTE)
    return 7000.0 * np.stack([np.cos(angle), np.sin(angle), 0.0 * angle], axis=1)


def test_a_low_orbit_sampled_every_five_minutes() -> None:
    """What the README may promise of a CSV: the fastest orbit there is, 7000 km and 97 minutes."""
    times = START + np.arange(60) * 5 * MINUTE
    segment = Segment("TEME", times, circle(times, 97.0), None, 8, int(times[0]), int(times[-1]))
    middle = times[4:-4] + 5 * MINUTE // 2
    off = np.linalg.norm(segment.at(middle) - circle(middle, 97.0), axis=1)
    assert 1e-4 < off.max() < 0.02  # km


def segment(first: int, last: int, places: float, frame: str = "TEME") -> Segment:
    times = START + np.arange(first, last + 1) * MINUTE
    return Segment(frame, times, np.full((times.size, 3), places), None, 2, int(times[0]), int(times[-1]))


def test_segments_do_not_mix() -> None:
    orbit = Ephemeris((segment(0, 10, 1e4), segment(10, 20, 2e4, "ITRF"), segment(30, 40, 3e4)))
    stamps = START + np.array([-1, 0, 5, 10, 15, 25, 30, 40, 41]) * MINUTE
    covered = orbit.covered(stamps)
    assert covered.tolist() == [False, True, True, True, True, False, True, True, False]
    found = {}
    for piece in orbit.pieces(stamps):
        for row, place in zip(piece.rows, piece.places_km, strict=True):
            assert row not in found
            found[int(row)] = (piece.frame, float(place[0]))
    assert found == {
        1: ("TEME", 1e4),
        2: ("TEME", 1e4),
        3: ("TEME", 1e4),  # where two meet, the first
        4: ("ITRF", 2e4),
        6: ("TEME", 3e4),
        7: ("TEME", 3e4),
    }
    assert orbit.cover == (START, START + 40 * MINUTE)


def test_points_of_the_equator_go_the_shorter_way_round() -> None:
    table = EquatorialTable(
        START + np.array([0, 60, 120]) * MINUTE, np.array([4.0, 6.0, 5.0]), np.array([23.0, 1.0, 20.0])
    )
    r, phi = table.at(START + np.array([0, 30, 60, 90, 120]) * MINUTE)
    assert r == pytest.approx([4.0, 5.0, 6.0, 5.5, 5.0])
    assert np.mod(12.0 + phi * 12.0 / np.pi, 24.0) == pytest.approx([23.0, 0.0, 1.0, 22.5, 20.0], abs=1e-12)
    assert table.covered(START + np.array([-1, 0, 7200, 7201]) * 1_000_000).tolist() == [False, True, True, False]
