"""The compiled parts one by one: the method, the arithmetic, the right-hand side, a step and its interpolant."""

from __future__ import annotations

import re
from typing import Any

import canonical
import mpmath
import numpy as np
import pytest
import storm_runs
from hypothesis import given, settings
from hypothesis import strategies as st
from numba import njit
from scipy.integrate import DOP853, solve_ivp
from small_runs import number, population, scenario
from tolerances import bound

import tracer
from fields import arith
from fields.contract import Term
from fields.field import Field, compose
from fields.magnetic.mirror_ratio import cot2_and_slope
from tracer.integrate import prepare
from tracer.kernels import arith as compiled_arith
from tracer.kernels.build import Kernel, kernel_for
from tracer.kernels.source import tableau
from tracer.scenario import SPECIES

# ------------------------------------------------------------------------------------------------------- the method


def table(pattern: str) -> dict[tuple[int, ...], float]:
    """The constants whose names match, by the numbers in their names."""
    found = ((re.fullmatch(pattern, name), value) for name, value in vars(tableau).items())
    return {tuple(map(int, match.groups())): value for match, value in found if match}


def nonzero(matrix: np.ndarray, rows: int = 1) -> dict[tuple[int, ...], float]:
    """The entries of a matrix of scipy's that are not zero, counted from 1 (rows from `rows`)."""
    return {(i + rows, j + 1): float(matrix[i, j]) for i, j in zip(*np.nonzero(matrix))}


def test_tableau_is_that_of_scipy() -> None:
    # scipy.integrate.DOP853 holds the published constants (Hairer, Norsett & Wanner 1993, section II.5)
    assert table(r"A(\d+)_(\d+)") == {**nonzero(DOP853.A), **nonzero(DOP853.A_EXTRA, 14)}
    nodes = {(i + 1,): float(c) for i, c in enumerate(DOP853.C) if c}
    assert table(r"C(\d+)") == {**nodes, **{(14 + i,): float(c) for i, c in enumerate(DOP853.C_EXTRA)}}
    assert table(r"B(\d+)") == {(i + 1,): float(b) for i, b in enumerate(DOP853.B) if b}
    assert table(r"E3_(\d+)") == {(i + 1,): float(e) for i, e in enumerate(DOP853.E3) if e}
    assert table(r"E5_(\d+)") == {(i + 1,): float(e) for i, e in enumerate(DOP853.E5) if e}
    assert table(r"D(\d+)_(\d+)") == nonzero(DOP853.D, 4)


# --------------------------------------------------------------------------------------------------- the arithmetic


@njit
def call_sincos(x: Any) -> Any:
    return compiled_arith.sincos(x)


@njit
def call_inverse_cube_root(x: Any) -> Any:
    return arith.inverse_cube_root(x)


@njit
def call_roots(x: Any) -> Any:
    return arith.square_root(x), arith.inverse_square_root(x), arith.reciprocal(x)


@njit
def call_arc_tangent(x: Any) -> Any:
    return compiled_arith.arc_tangent(x)


@njit
def call_power(x: Any, exponent: Any) -> Any:
    return arith.power(x, exponent)


@settings(deadline=None)  # the first call compiles
@given(st.floats(-20.0, 20.0))
def test_sin_and_cos_within_three_turns(x: float) -> None:
    sin, cos = call_sincos(x)
    with mpmath.workdps(40):
        assert abs(sin - mpmath.sin(mpmath.mpf(x))) < bound("sin and cos")
        assert abs(cos - mpmath.cos(mpmath.mpf(x))) < bound("sin and cos")


def test_sin_and_cos_where_they_vanish_and_turn() -> None:
    for quarter in range(-12, 13):
        for x in (quarter * np.pi / 2, np.nextafter(quarter * np.pi / 2, 99.0), quarter * np.pi / 2 + 1e-9):
            with mpmath.workdps(40):
                want = float(mpmath.sin(mpmath.mpf(x))), float(mpmath.cos(mpmath.mpf(x)))
            assert call_sincos(float(x)) == pytest.approx(want, rel=0, abs=bound("sin and cos"))
    assert call_sincos(0.0) == (0.0, 1.0)


@settings(deadline=None)  # the first call compiles
@given(st.floats(1e-280, 1e280))
def test_inverse_cube_root_of_any_magnitude(x: float) -> None:
    # numpy's cbrt is good to the last digit or two
    assert call_inverse_cube_root(x) == pytest.approx(1.0 / np.cbrt(x), rel=1e-15, abs=0)


def test_inverse_cube_root_over_one_octave_and_the_next() -> None:
    # the start of its iteration depends on where x stands between 1 and 8
    x = np.geomspace(1.0, 8.0, 4001)
    got = np.array([call_inverse_cube_root(v) for v in x])
    np.testing.assert_allclose(got, 1.0 / np.cbrt(x), rtol=1e-15, atol=0)


@settings(deadline=None)  # the first call compiles
@given(st.floats(0.5, 20.0), st.floats(-8.0, 8.0))
def test_power(x: float, exponent: float) -> None:
    assert call_power(x, exponent) == pytest.approx(np.power(x, exponent), rel=bound("power"), abs=0)


@settings(deadline=None)  # the first call compiles
@given(st.floats(1e-250, 1e250))
def test_square_root_and_reciprocals_of_any_magnitude(x: float) -> None:
    # those of the processor are exact to the last digit
    assert call_roots(x) == pytest.approx((np.sqrt(x), 1.0 / np.sqrt(x), 1.0 / x), rel=bound("rough root"), abs=0)


def test_square_root_and_reciprocals_over_two_octaves() -> None:
    # the start of the iteration depends on where x stands between two powers of 4
    x = np.geomspace(1.0, 4.0, 4001)
    got = np.array([call_roots(v) for v in x])
    np.testing.assert_allclose(got, np.stack([np.sqrt(x), 1.0 / np.sqrt(x), 1.0 / x], axis=1), rtol=bound("rough root"))


@settings(deadline=None)  # the first call compiles
@given(st.floats(0.0, 1e12))
def test_arc_tangent(x: float) -> None:
    assert call_arc_tangent(x) == pytest.approx(np.arctan(x), rel=4e-16, abs=1e-15)


@settings(deadline=None)  # the first call compiles
@given(st.floats(1e-9, 1.0))
def test_arc_tangent_of_a_small_number_keeps_its_digits(x: float) -> None:
    assert call_arc_tangent(x) == pytest.approx(np.arctan(x), rel=1e-15, abs=0)


@settings(deadline=None)  # the first call compiles
@given(st.floats(0.0, 1e8))
def test_mirror_ratio_compiled_is_the_interpreted_one(kappa: float) -> None:
    want = tuple(float(v) for v in cot2_and_slope(np.float64(kappa)))
    assert CALL_MIRROR_RATIO(kappa) == pytest.approx(want, rel=bound("rounding"), abs=0)


# -------------------------------------------------------------------------------------------- point functions


def compiled_call(function: Any) -> Any:
    """`function`, compiled as a kernel compiles it."""
    compiled_arith.register_pointwise()

    @njit
    def call(arguments: Any) -> Any:
        return function(*arguments)

    return call


CALL_MIRROR_RATIO = njit(lambda kappa: cot2_and_slope(kappa))


def places(count: int = 200) -> tuple[np.ndarray, np.ndarray]:
    random = np.random.default_rng(8)
    return random.uniform(1.1, 12.0, count), random.uniform(-np.pi, np.pi, count)


@pytest.mark.parametrize("model", canonical.ELECTRIC, ids=canonical.label)
def test_electric_point_functions_compiled_and_interpreted(model: Any) -> None:
    term: Term = model.term(canonical.MAGNETIC[0])
    call, (r, phi) = compiled_call(term.function), places()
    for time_h in (0.0, 4.0, 8.5):
        fixed = term.at(time_h)
        want = np.stack(np.broadcast_arrays(*term.function(r, np.sin(phi), np.cos(phi), *fixed)))
        got = np.array([call((a, b, c, *fixed)) for a, b, c in zip(r, np.sin(phi), np.cos(phi))]).T
        scale = np.abs(want[0]) + np.abs(want[1] * r) + np.abs(want[2])
        assert np.max(np.abs(got - want) / scale) < bound("point function")


@pytest.mark.parametrize("model", canonical.MAGNETIC, ids=canonical.label)
def test_magnetic_point_functions_compiled_and_interpreted(model: Any) -> None:
    terms = model.terms()
    r, phi = places()
    sin, cos = np.sin(phi), np.cos(phi)
    for k in (0.0, 1e-3, 30.0, 1e3, 1e5):
        cases = [(terms.equator, (), ()), (terms.mirror, (k,), ()), (terms.foot, (), (1.02,))]
        for function, before, after in cases:
            wanted = function(*(np.full_like(r, b) for b in before), r, sin, cos, *after, *terms.arguments)
            want = np.atleast_2d(np.stack(np.broadcast_arrays(*wanted)) if isinstance(wanted, tuple) else wanted)
            call = compiled_call(function)
            rows = [call((*before, a, b, c, *after, *terms.arguments)) for a, b, c in zip(r, sin, cos)]
            np.testing.assert_allclose(np.atleast_2d(np.array(rows).T), want, rtol=1e-13, atol=0)


# ---------------------------------------------------------------------------------------------- the right-hand side


def every_electric_model() -> Field:
    """All of tests/canonical.py at once: the sum is linear, so one wrong term shows."""
    return compose(canonical.MAGNETIC[0], canonical.ELECTRIC)


FIELDS = {
    "every electric model": every_electric_model(),
    "no electric field": compose(canonical.MAGNETIC[0]),
    "storm": storm_runs.STORM,
}


@pytest.mark.parametrize("name", FIELDS)
def test_slope_is_the_drift_rate(name: str) -> None:
    # tracer.drift_rate takes the bounce integrals by exact quadrature, the kernel by its fit
    field = FIELDS[name]
    kernel = kernel_for(field)
    slope = storm_runs.part(kernel, "drift").slope_at
    random = np.random.default_rng(5)
    for species in SPECIES.values():
        energy, pitch = np.exp(random.uniform(np.log(1e-3), np.log(1e4), 40)), random.uniform(0.05, 90.0, 40)
        pitch[:2] = 90.0, 0.01
        r, mlt, time = random.uniform(1.1, 12.0, 40), random.uniform(0.0, 24.0, 40), random.uniform(0.0, 9.0, 40)
        inv = tracer.invariants(field, species, energy, pitch, r, mlt)
        want = tracer.drift_rate(field, species, energy, pitch, r, mlt, time)
        still = tracer.drift_rate(field, species, 0.0 * energy, 90.0, r, mlt, time)  # the electric part alone
        magnetic = np.abs(want.dmlt_per_h - still.dmlt_per_h)
        scale = np.hypot(still.dr_re_per_h / r, still.dmlt_per_h * np.pi / 12) + magnetic * np.pi / 12
        for i in range(40):
            p = kernel_particle(inv, i, species)
            D = storm_runs.drivers_at(kernel, time[i])
            got = slope(time[i], r[i], (mlt[i] - 12.0) * np.pi / 12, p, kernel.constants, D)
            assert got[0] / r[i] == pytest.approx(want.dr_re_per_h[i] / r[i], rel=0, abs=1e-12 * scale[i])
            assert got[1] == pytest.approx(want.dmlt_per_h[i] * np.pi / 12, rel=0, abs=1e-12 * scale[i])


def kernel_particle(inv: Any, i: int, species: Any) -> tuple[float, float, float, float]:
    """(mu, k, 1/q, 2/(m c^2)) from public units."""
    rest_keV = species.mass_kg * 299792458.0**2 / 1.602176634e-19 / 1e3
    return inv.mu_MeV_per_G[i] * 1e-2, inv.K_re_sqrtG[i] * np.sqrt(1e5), 1.0 / species.charge_e, 2.0 / rest_keV


@pytest.mark.parametrize("name", FIELDS)
def test_the_kernel_gives_back_local_time_energy_and_pitch(name: str) -> None:
    run = scenario(
        population(species="O+", count=64, energy_keV=number(1e-3)),
        population("electrons", "e-", count=64, energy_keV=number(1e4), r_re=number(1.5)),
        population("steep", "H+", count=1, pitch_deg=number(0.01)),
        population("flat", "H+", count=1, pitch_deg=number(90.0)),
        field=FIELDS[name],
    )
    prepared, kernel = prepare(run, 0, run.count), kernel_for(FIELDS[name])
    observed = storm_runs.part(kernel, "drift").observed
    for i, row in enumerate(prepared.state):
        mlt, energy, pitch = observed(row[0], row[1], storm_runs.particle(row), kernel.constants)
        assert mlt == pytest.approx(prepared.columns["mlt_h"][i], rel=1e-12, abs=1e-14)
        assert energy == pytest.approx(prepared.columns["energy_keV"][i], rel=1e-12)
        assert pitch == pytest.approx(prepared.columns["pitch_deg"][i], rel=1e-12)


# ------------------------------------------------------------------------------------------------------- one step


@pytest.fixture(scope="module")
def kernel() -> Kernel:
    return kernel_for(storm_runs.STORM)


class Motion:
    """One proton in one driver segment with a ramp."""

    def __init__(self, kernel: Kernel) -> None:
        run = storm_runs.storm(population(count=1, energy_keV=number(80.0), pitch_deg=number(50.0), r_re=number(4.0)))
        row = prepare(run, 0, 1).state[0]
        self.p, self.C, self.D = storm_runs.particle(row), kernel.constants, storm_runs.drivers_at(kernel, 22.0)
        assert self.D[2] != 0.0  # the driver changes along the step
        self.start = (self.D[0], 4.0, 2.5)
        self.step, self._drift = storm_runs.part(kernel, "step"), storm_runs.part(kernel, "drift")

    def slope(self, t: float, y: Any) -> Any:
        return self._drift.slope_at(t, y[0], y[1], self.p, self.C, self.D)

    def trial(self, t: float, r: float, phi: float, h: float) -> Any:
        return self.step.trial(t, r, phi, h, *self.slope(t, (r, phi)), self.p, self.C, self.D)

    def exact(self, hours: float) -> Any:
        t, r, phi = self.start
        done = solve_ivp(
            self.slope, (t, t + hours), (r, phi), "DOP853", rtol=storm_runs.STRICT, atol=storm_runs.STRICT,
            dense_output=True, max_step=0.02 * abs(hours),
        )  # fmt: skip
        assert done.success
        return done.sol


def order(steps: Any, errors: Any) -> float:
    """Slope of log error against log step."""
    return float(np.polyfit(np.log(steps), np.log(errors), 1)[0])


def test_trial_has_order_8(kernel: Kernel) -> None:
    motion, hours = Motion(kernel), 2.4
    end = motion.exact(hours)(motion.start[0] + hours)
    steps, errors = [], []
    for count in (4, 5, 7, 9):
        (t, r, phi), h = motion.start, hours / count
        for i in range(count):
            r, phi = motion.trial(t + i * h, r, phi, h)[:2]
        steps.append(h)
        errors.append(np.hypot(r - end[0], r * (phi - end[1])))
    assert min(errors) > 1e-13  # above rounding, or the slope says nothing
    assert order(steps, errors) == pytest.approx(8.0, abs=0.6)


def test_interpolant_has_order_7(kernel: Kernel) -> None:
    motion, exact = Motion(kernel), Motion(kernel).exact(0.8)
    t, r, phi = motion.start
    k1, l1 = motion.slope(t, (r, phi))
    steps, errors = [0.2, 0.28, 0.4, 0.56, 0.8], []
    for h in steps:
        rn, pn, _, stages = motion.trial(t, r, phi, h)
        F = motion.step.interpolant(t, r, phi, h, rn, pn, k1, l1, stages, motion.p, motion.C, motion.D)
        along = motion.step.along
        assert (along(*F[:8], 0.0), along(*F[8:], 0.0)) == (r, phi)
        assert along(*F[:8], 1.0) == pytest.approx(rn, rel=1e-15)
        x = np.linspace(0.05, 0.95, 19)
        got = np.array([[along(*coefficients, v) for v in x] for coefficients in (F[:8], F[8:])])
        want = exact(t + x * h)
        errors.append(np.max(np.hypot(got[0] - want[0], want[0] * (got[1] - want[1]))))
    assert min(errors) > 1e-13
    assert order(steps, errors) == pytest.approx(8.0, abs=0.7)  # a local error goes one power higher


def test_step_and_error_estimate_are_those_of_scipy(kernel: Kernel) -> None:
    motion = Motion(kernel)
    t, r, phi = motion.start
    for h in (0.05, 0.4, -0.3):
        K = np.zeros((13, 2))
        for s in range(12):
            K[s] = motion.slope(t + DOP853.C[s] * h, np.array([r, phi]) + h * K[:s].T @ DOP853.A[s, :s])
        rn, pn, error, _ = motion.trial(t, r, phi, h)
        assert (rn, pn) == pytest.approx(np.array([r, phi]) + h * K[:12].T @ DOP853.B, rel=1e-14)
        # the norm of scipy.integrate.DOP853, on distances in R_E: r, and r times the angle
        apart = K * (1.0, r)
        five, three = np.sum((apart.T @ DOP853.E5) ** 2), np.sum((apart.T @ DOP853.E3) ** 2)
        rms = abs(h) * five / np.sqrt((five + 0.01 * three) * 2.0)
        # a distance, where scipy takes the root of the mean over the two components
        assert error == pytest.approx(np.sqrt(2.0) * rms, rel=1e-9)
