"""The line averages: traced against closed form, and traced in a field that is no dipole against scipy quadrature."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, ClassVar

import canonical
import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad, solve_ivp
from scipy.optimize import brentq
from tolerances import bound

import fields
from fields.contract import Card, LineAverages, MagneticModel
from fields.errors import InputError
from fields.lines import TracedLines

B0_NT = 30000.0


@dataclass(frozen=True)
class Compressed(MagneticModel):
    """Dipole + b1 (0, 0, 1) + b2 (z, 0, x): Mead (1964), J. Geophys. Res. 69, 1181."""

    b1_nT: float
    b2_nT_per_re: float

    card: ClassVar[Card] = Card("compressed-for-the-test", "magnetic", "", "", (), "")

    def field_nT(self, x: Any, y: Any, z: Any) -> tuple[Any, Any, Any]:
        square = x * x + y * y + z * z
        moment = B0_NT / square**2 / square**0.5
        return (
            -3 * moment * x * z + self.b2_nT_per_re * z,
            -3 * moment * y * z,
            moment * (square - 3 * z * z) + self.b1_nT + self.b2_nT_per_re * x,
        )


# Stand-off at 10 R_E: 25150 / r_b^3 and 21040 / r_b^4 (constants from memory)
MODEL = Compressed(25.15, 2.104)
TRACED = TracedLines(MODEL)
PLACES = [(3.0, 0.3), (6.6, -2.9), (7.5, 1.4)]
at_places = pytest.mark.parametrize(("r", "phi"), PLACES, ids=["near", "tail", "dusk"])


# ------------------------------------------------------------------------- closed form against traced, every model


def scattered(count: int, seed: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """(cot2, r, phi): pitch angles even in angle from 1 to 90 degrees, the last two extreme."""
    random = np.random.default_rng(seed)
    pitch = random.uniform(1.0, 90.0, count)
    pitch[-2:] = 89.99, 1.0
    cot2 = (np.sin(np.radians(90.0 - pitch)) / np.sin(np.radians(pitch))) ** 2
    return cot2, random.uniform(1.5, 10.0, count), random.uniform(-np.pi, np.pi, count)


def density(x: Any, y: Any, z: Any) -> Any:
    """Any smooth function of place, of no symmetry."""
    return np.exp(-0.1 * x + 0.05 * y) / (x * x + y * y + z * z) * (1.0 + 0.3 * z)


AVERAGES: dict[str, Callable[[LineAverages, Any, Any, Any], Any]] = {
    "second invariant": lambda lines, cot2, r, phi: lines.second_invariant(cot2, r, phi),
    "bounce path": lambda lines, cot2, r, phi: lines.bounce_path(cot2, r, phi),
    "foot field": lambda lines, cot2, r, phi: lines.foot_field(r, phi, 1.0157),
    "tube volume": lambda lines, cot2, r, phi: lines.tube_volume(r, phi, 1.0157),
    "bounce average": lambda lines, cot2, r, phi: lines.bounce_average(density, cot2, r, phi),
}

each_model = pytest.mark.parametrize("model", canonical.MAGNETIC, ids=canonical.label)


@pytest.mark.parametrize("name", AVERAGES)
@each_model
def test_own_lines_of_the_model_agree_with_traced_ones(model: MagneticModel, name: str) -> None:
    cot2, r, phi = scattered(24, seed=1)
    want = AVERAGES[name](TracedLines(model), cot2, r, phi)
    np.testing.assert_allclose(AVERAGES[name](model.lines(), cot2, r, phi), want, rtol=bound("traced line"))


@each_model
def test_own_pitch_angle_of_an_invariant_agrees_with_the_traced_one(model: MagneticModel) -> None:
    cot2, r, phi = scattered(24, seed=2)
    traced = TracedLines(model)
    k = traced.second_invariant(cot2, r, phi)
    np.testing.assert_allclose(model.lines().cot2_at(k, r, phi), cot2, rtol=bound("traced line"))
    np.testing.assert_allclose(traced.cot2_at(k, r, phi), cot2, rtol=bound("traced line"))


@each_model
def test_own_mirror_slopes_agree_with_traced_ones(model: MagneticModel) -> None:
    cot2, r, phi = scattered(6, seed=3)
    by_r, by_phi = model.lines().mirror_slopes(cot2, r, phi)
    want_r, want_phi = TracedLines(model).mirror_slopes(cot2, r, phi)
    np.testing.assert_allclose(by_r, want_r, rtol=bound("traced slope"))
    np.testing.assert_allclose(by_phi, want_phi, rtol=0, atol=bound("traced slope"))


@each_model
def test_own_map_to_the_equator_agrees_with_the_traced_one(model: MagneticModel) -> None:
    random = np.random.default_rng(4)
    latitude, phi = random.uniform(-1.0, 1.0, 12), random.uniform(-np.pi, np.pi, 12)
    radius = random.uniform(1.05, 6.0, 12) * np.cos(latitude) ** 2 + 1.0
    place = radius * np.array([np.cos(latitude) * np.cos(phi), np.cos(latitude) * np.sin(phi), np.sin(latitude)])
    got, want = model.lines().equatorial_point(*place), TracedLines(model).equatorial_point(*place)
    np.testing.assert_allclose(got[0], want[0], rtol=bound("traced line"))
    np.testing.assert_allclose(got[1], want[1], atol=bound("traced line"))


@each_model
def test_shapes_broadcast(model: MagneticModel) -> None:
    for lines in (model.lines(), TracedLines(model)):
        cot2, r, phi = np.array([0.0, 0.5])[:, None, None], np.array([3.0, 4.0, 5.0])[:, None], np.array([0.0, 1.0])
        assert lines.second_invariant(cot2, r, phi).shape == (2, 3, 2)
        assert lines.cot2_at(cot2, r, phi).shape == (2, 3, 2)
        assert lines.bounce_path(cot2, r, phi).shape == (2, 3, 2)
        assert lines.bounce_average(density, cot2, r, phi).shape == (2, 3, 2)
        assert [part.shape for part in lines.mirror_slopes(cot2[:1, 0], 3.0, phi)] == [(1, 2), (1, 2)]
        assert lines.foot_field(r, phi, 1.02).shape == (3, 2)
        assert lines.tube_volume(r, phi, 1.02).shape == (3, 2)
        assert [part.shape for part in lines.equatorial_point(3.0, phi, r / 10)] == [(3, 2), (3, 2)]
        assert np.shape(lines.second_invariant(0.5, 4.0, 1.0)) == ()


# ------------------------------------------------------ a second tracing: by latitude, with scipy's adaptive quadrature


class Referee:
    """The line through (r, phi) as a function of latitude: d ln r/dl = B_r/B_l, dphi/dl = B_phi/(cos l B_l)."""

    def __init__(self, r: float, phi: float) -> None:
        def rates(latitude: float, state: np.ndarray) -> list[float]:
            b_r, b_l, b_phi = self.components(latitude, state)
            return [b_r / b_l, b_phi / (np.cos(latitude) * b_l)]

        options: dict[str, Any] = {"rtol": 1e-13, "atol": 1e-14, "dense_output": True, "max_step": 0.02}
        self.state = solve_ivp(rates, (0.0, 1.45), [np.log(r), phi], method="DOP853", **options).sol
        self.b_eq = self.strength(0.0)

    def components(self, latitude: float, state: np.ndarray) -> tuple[float, float, float]:
        radius, c, s = np.exp(state[0]), np.cos(latitude), np.sin(latitude)
        cos, sin = np.cos(state[1]), np.sin(state[1])
        bx, by, bz = MODEL.field_nT(radius * c * cos, radius * c * sin, radius * s)
        outward = bx * cos + by * sin
        return outward * c + bz * s, bz * c - outward * s, by * cos - bx * sin

    def place(self, latitude: float) -> np.ndarray:
        state = self.state(latitude)
        c = np.cos(latitude)
        return np.exp(state[0]) * np.array([c * np.cos(state[1]), c * np.sin(state[1]), np.sin(latitude)])

    def strength(self, latitude: float) -> float:
        return float(np.linalg.norm(self.components(latitude, self.state(latitude))))

    def arc(self, latitude: float) -> float:
        """ds / dlatitude."""
        state = self.state(latitude)
        parts = self.components(latitude, state)
        return float(np.exp(state[0]) * np.linalg.norm(parts) / parts[1])

    def foot_latitude(self, foot_re: float) -> float:
        return float(brentq(lambda l_: np.exp(self.state(l_)[0]) - foot_re, 0.1, 1.45, xtol=1e-15))

    def bounce(self, cot2: float, integrand: Callable[[float, float], float]) -> float:
        """Integral of ``integrand(latitude, 1 - B/B_m) ds`` from the equator to the mirror point."""
        b_m = self.b_eq * (1.0 + cot2)
        mirror = brentq(lambda l_: self.strength(l_) - b_m, 1e-3, 1.45, xtol=1e-15)

        def smooth(t: float) -> float:  # latitude = mirror (1 - t^2) takes out the square root at the mirror point
            latitude = mirror * (1.0 - t * t)
            return 2.0 * t * mirror * integrand(latitude, 1.0 - self.strength(latitude) / b_m) * self.arc(latitude)

        return float(quad(smooth, 0.0, 1.0, epsabs=0.0, epsrel=1e-11, limit=200)[0])


PITCHES_DEG = (2.0, 10.0, 35.0, 65.0, 85.0)


@at_places
@pytest.mark.parametrize("pitch_deg", PITCHES_DEG)
def test_traced_bounce_integrals_agree_with_quadrature_by_latitude(r: float, phi: float, pitch_deg: float) -> None:
    referee, cot2 = Referee(r, phi), 1.0 / np.tan(np.radians(pitch_deg)) ** 2
    k = 2.0 * np.sqrt(referee.b_eq * (1.0 + cot2)) * referee.bounce(cot2, lambda _, depth: depth**0.5)
    path = 4.0 * referee.bounce(cot2, lambda _, depth: depth**-0.5)
    assert float(TRACED.second_invariant(cot2, r, phi)) == pytest.approx(k, rel=bound("referee line"))
    assert float(TRACED.bounce_path(cot2, r, phi)) == pytest.approx(path, rel=bound("referee line"))


@at_places
def test_traced_bounce_average_agrees_with_quadrature_by_latitude(r: float, phi: float) -> None:
    referee, cot2 = Referee(r, phi), 3.0

    def both(latitude: float) -> float:
        x, y, z = referee.place(latitude)
        return float(0.5 * (density(x, y, z) + density(x, y, -z)))

    total = referee.bounce(cot2, lambda latitude, depth: both(latitude) * depth**-0.5)
    want = total / referee.bounce(cot2, lambda _, depth: depth**-0.5)
    assert float(TRACED.bounce_average(density, cot2, r, phi)) == pytest.approx(want, rel=bound("referee line"))


@at_places
def test_traced_feet_and_tubes_agree_with_quadrature_by_latitude(r: float, phi: float) -> None:
    referee, foot_re = Referee(r, phi), 1.0157
    foot = referee.foot_latitude(foot_re)
    volume = 2.0 * quad(lambda l_: referee.arc(l_) / referee.strength(l_), 0.0, foot, epsabs=0.0, epsrel=1e-11)[0]
    assert float(TRACED.foot_field(r, phi, foot_re)) == pytest.approx(referee.strength(foot), rel=bound("referee line"))
    assert float(TRACED.tube_volume(r, phi, foot_re)) == pytest.approx(volume, rel=bound("referee line"))


@at_places
def test_points_on_a_line_map_to_its_equatorial_point(r: float, phi: float) -> None:
    x, y, z = np.transpose([Referee(r, phi).place(latitude) for latitude in (0.0, 0.2, 0.6, 0.9)])
    for north in (1.0, -1.0):
        got_r, got_phi = TRACED.equatorial_point(x, y, north * z)
        np.testing.assert_allclose(got_r, r, rtol=bound("referee line"))
        np.testing.assert_allclose(got_phi, phi, rtol=0, atol=bound("referee line"))


@at_places
def test_near_90_degrees_the_curvature_of_b_at_the_equator_rules(r: float, phi: float) -> None:
    # Harmonic motion about the equator (Northrop 1963): B = B_eq (1 + a s^2), path = 2 pi / sqrt(a),
    # k = (pi/2) sqrt(B_eq / a) cot^2. a by mpmath: B'' = d2B/dz2 + curvature . grad B.
    with mpmath.workdps(30):
        x, y = mpmath.mpf(r * np.cos(phi)), mpmath.mpf(r * np.sin(phi))

        def strength(x_: Any, y_: Any, z_: Any) -> Any:
            return mpmath.norm(mpmath.matrix(MODEL.field_nT(x_, y_, z_)))

        b_eq = strength(x, y, 0)
        curvature = [mpmath.diff(lambda z_, i=i: MODEL.field_nT(x, y, z_)[i], 0) / b_eq for i in (0, 1)]
        slopes = [mpmath.diff(lambda x_: strength(x_, y, 0), x), mpmath.diff(lambda y_: strength(x, y_, 0), y)]
        second = mpmath.diff(lambda z_: strength(x, y, z_), 0, 2)
        a = float((second + curvature[0] * slopes[0] + curvature[1] * slopes[1]) / (2 * b_eq))
    assert float(TRACED.bounce_path(0.0, r, phi)) == pytest.approx(2 * np.pi / np.sqrt(a), rel=bound("referee line"))
    assert float(TRACED.second_invariant(0.0, r, phi)) == 0.0
    assert float(TRACED.cot2_at(0.0, r, phi)) == 0.0
    for cot2 in (1e-12, 1e-20):
        want = 0.5 * np.pi * np.sqrt(float(b_eq) / a) * cot2
        assert float(TRACED.second_invariant(cot2, r, phi)) == pytest.approx(want, rel=bound("referee line"), abs=0)
        assert float(TRACED.cot2_at(want, r, phi)) == pytest.approx(cot2, rel=bound("referee line"), abs=0)


@at_places
def test_axial_field_keeps_its_flux_function_along_the_line(r: float, phi: float) -> None:
    # Dipole + uniform b1: (B0 / R - b1 R^2 / 2) cos^2(latitude) is constant on a line.
    axial = TracedLines(Compressed(25.15, 0.0))
    latitude = np.array([0.1, 0.5, 0.8])
    radius = np.array([brentq(lambda q, c=c: flux(q) * c * c - flux(r), 0.1, r, xtol=1e-15) for c in np.cos(latitude)])
    axis_distance = radius * np.cos(latitude)
    place = axis_distance * np.cos(phi), axis_distance * np.sin(phi), radius * np.sin(latitude)
    got_r, got_phi = axial.equatorial_point(*place)
    np.testing.assert_allclose(got_r, r, rtol=bound("referee line"))
    np.testing.assert_allclose(got_phi, phi, atol=bound("referee line"))


def flux(radius: float) -> float:
    """Flux function in the equatorial plane of the axial field, nT R_E^2 / (2 pi)."""
    return B0_NT / radius - 25.15 * radius**2 / 2.0


# ------------------------------------------------------------------------------------------------------------- laws


@at_places
@pytest.mark.parametrize("cot2", [0.0, 0.2, 1.0, 30.0, 1000.0])
def test_mirror_slopes_obey_the_implicit_function_theorem(r: float, phi: float, cot2: float) -> None:
    # k(r, phi, B_m) constant: dB_m/dx = -(dk/dx at fixed B_m) / (dk/dB_m), dk/dB_m = path / (4 sqrt(B_m))
    def b_eq(r_: float, phi_: float) -> float:
        return float(np.linalg.norm(MODEL.field_nT(r_ * np.cos(phi_), r_ * np.sin(phi_), 0.0)))

    b_m = b_eq(r, phi) * (1.0 + cot2)
    if cot2 == 0.0:  # 90 degrees: k = 0 and the mirror field is that of the equator

        def held(r_: float, phi_: float) -> float:
            return -float(np.log(b_eq(r_, phi_)))

        by_log_b = 1.0
    else:

        def held(r_: float, phi_: float) -> float:
            return float(TRACED.second_invariant(b_m / b_eq(r_, phi_) - 1.0, r_, phi_))

        by_log_b = float(TRACED.bounce_path(cot2, r, phi)) * np.sqrt(b_m) / 4.0
    by_r, by_phi = (float(part) for part in TRACED.mirror_slopes(cot2, r, phi))
    want_r = -central(lambda q: held(q, phi), r, 0.01 * r) / by_log_b
    want_phi = -central(lambda q: held(r, q), phi, 0.01) / by_log_b
    assert by_r == pytest.approx(want_r, rel=bound("difference of slopes"))
    assert by_phi == pytest.approx(want_phi, rel=bound("difference of slopes"), abs=bound("difference of slopes"))


def central(function: Callable[[float], float], x: float, step: float) -> float:
    """First derivative by sixth-order central differences."""
    weights = ((1, 3 / 4), (2, -3 / 20), (3, 1 / 60))
    return float(sum(w * (function(x + n * step) - function(x - n * step)) for n, w in weights) / step)


@settings(max_examples=25, deadline=None)
@given(st.floats(1.0, 89.9), st.sampled_from(PLACES))
def test_mean_depth_below_the_mirror_field_is_the_ratio_of_the_invariants(
    pitch: float, place: tuple[float, float]
) -> None:
    # Bounce average of 1 - B/B_m = (integral of sqrt(1 - B/B_m) ds) / (integral of ds / sqrt(1 - B/B_m))
    cot2 = 1.0 / np.tan(np.radians(pitch)) ** 2
    r, phi = place
    b_m = float(np.linalg.norm(MODEL.field_nT(r * np.cos(phi), r * np.sin(phi), 0.0))) * (1.0 + cot2)

    def depth(x: Any, y: Any, z: Any) -> Any:
        return 1.0 - np.linalg.norm(MODEL.field_nT(x, y, z), axis=0) / b_m

    k, path = float(TRACED.second_invariant(cot2, r, phi)), float(TRACED.bounce_path(cot2, r, phi))
    mean = float(TRACED.bounce_average(depth, cot2, r, phi))
    assert mean == pytest.approx(2.0 * k / (np.sqrt(b_m) * path), abs=bound("traced line"))


@settings(max_examples=25, deadline=None)
@given(st.floats(1e-12, 3000.0), st.sampled_from(PLACES))
def test_invariant_grows_with_cot2_and_gives_it_back(cot2: float, place: tuple[float, float]) -> None:
    k = TRACED.second_invariant([cot2, 1.01 * cot2], *place)
    assert k[1] > k[0] > 0
    np.testing.assert_allclose(TRACED.cot2_at(k, *place), [cot2, 1.01 * cot2], rtol=bound("traced line"))


def test_average_of_a_constant_is_the_constant_and_of_z_is_nothing() -> None:
    cot2 = [0.0, 1.0, 300.0]
    np.testing.assert_allclose(TRACED.bounce_average(lambda x, y, z: 7.0 + 0.0 * x, cot2, 5.0, 1.0), 7.0, rtol=1e-14)
    np.testing.assert_allclose(TRACED.bounce_average(lambda x, y, z: z, cot2, 5.0, 1.0), 0.0, atol=1e-14)
    assert TRACED.bounce_average(lambda x, y, z: x, 0.0, 5.0, 1.0) == pytest.approx(5.0 * np.cos(1.0), rel=1e-14)


def test_order_of_the_questions_changes_no_bit() -> None:
    shallow_first, deep_first = TracedLines(MODEL), TracedLines(MODEL)
    first = [float(shallow_first.second_invariant(cot2, 6.0, 2.0)) for cot2 in (0.1, 5.0, 800.0)]
    last = [float(deep_first.second_invariant(cot2, 6.0, 2.0)) for cot2 in (800.0, 5.0, 0.1)]
    assert first == last[::-1]


# -------------------------------------------------------------------------------------------------------- bad input


@pytest.mark.parametrize("lines", [TRACED, fields.Dipole(b0_nT=30000.0).lines()], ids=["traced", "dipole"])
@pytest.mark.parametrize(
    ("question", "message"),
    [
        (lambda lines: lines.second_invariant(-0.1, 5.0, 0.0), "cot2: not the cot"),
        (lambda lines: lines.bounce_path(np.nan, 5.0, 0.0), "cot2: not the cot"),
        (lambda lines: lines.bounce_path(np.inf, 5.0, 0.0), "cot2: not the cot"),
        (lambda lines: lines.mirror_slopes(-1.0, 5.0, 0.0), "cot2: not the cot"),
        (lambda lines: lines.second_invariant(0.1, [5.0, 0.0], 0.0), "r_re: not a positive distance"),
        (lambda lines: lines.second_invariant(0.1, np.nan, 0.0), "r_re: not a positive distance"),
        (lambda lines: lines.second_invariant(0.1, 5.0, np.inf), "phi: not an angle"),
        (lambda lines: lines.cot2_at(-1.0, 5.0, 0.0), "k: not a second invariant"),
        (lambda lines: lines.foot_field(1.0, 0.0, 1.02), "1.0: no field line .* to the foot.*; r of at least 1.02"),
        (lambda lines: lines.tube_volume(1.0, 0.0, 1.02), "1.0: no field line from there to the foot"),
        (lambda lines: lines.equatorial_point(0.0, 0.0, 0.0), "not a place on a field line"),
        (lambda lines: lines.equatorial_point(np.nan, 0.0, 1.0), "not a place on a field line"),
    ],
)
def test_bad_arguments_are_named(lines: Any, question: Any, message: str) -> None:
    with pytest.raises(InputError, match=message):
        question(lines)


def test_a_line_that_never_mirrors_is_an_error_and_no_nan() -> None:
    # Far out, where the uniform part rules, B no longer grows away from the equator.
    open_field = TracedLines(Compressed(60.0, 0.0))
    with pytest.raises(InputError, match="field line through"):
        open_field.second_invariant(1.0, 40.0, 0.0)
    with pytest.raises(InputError, match="does not reach the foot"):
        open_field.foot_field(40.0, 0.0, 1.0157)
    with pytest.raises(InputError, match="does not reach the equator"):
        TRACED.equatorial_point(0.0, 0.0, 3.0)


def test_at_the_foot_itself_the_line_has_no_length() -> None:
    assert TRACED.tube_volume(1.5, 0.4, 1.5) == 0.0
    b = np.linalg.norm(MODEL.field_nT(1.5 * np.cos(0.4), 1.5 * np.sin(0.4), 0.0))
    assert TRACED.foot_field(1.5, 0.4, 1.5) == pytest.approx(b, rel=1e-15)
