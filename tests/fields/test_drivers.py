"""A driver as a function of time: numpy.interp and hand-made steps are the references."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from tolerances import bound

from fields.drivers import Driver
from fields.errors import InputError

STEPS = Driver("series:kp", np.array([-3.0, 0.0, 3.0]), np.array([2.0, 5.0, 3.0]), np.zeros(3), 6.0)


def joined(times: np.ndarray, values: np.ndarray) -> Driver:
    """A polyline through (times, values)."""
    return Driver("series:a", times[:-1], values[:-1], np.diff(values) / np.diff(times), float(times[-1]), "linear")


@st.composite
def polylines(draw: st.DrawFn) -> tuple[np.ndarray, np.ndarray]:
    gaps = draw(st.lists(st.floats(0.1, 10.0), min_size=1, max_size=12))
    values = draw(st.lists(st.floats(-100.0, 100.0), min_size=len(gaps) + 1, max_size=len(gaps) + 1))
    return draw(st.floats(-50.0, 50.0)) + np.cumsum([0.0, *gaps]), np.array(values)


def test_steps_hold_from_their_corner_on() -> None:
    np.testing.assert_array_equal(STEPS.at([-3.0, -0.001, 0.0, 2.999, 3.0, 6.0]), [2.0, 2.0, 5.0, 5.0, 3.0, 3.0])


def test_backward_a_corner_belongs_to_the_earlier_step() -> None:
    np.testing.assert_array_equal(STEPS.at([6.0, 3.0, 2.999, 0.0, -3.0], backward=True), [3.0, 5.0, 5.0, 2.0, 2.0])
    np.testing.assert_array_equal(STEPS.segment([6.0, 3.0, 0.0, -3.0], backward=True), [2, 1, 0, 0])
    np.testing.assert_array_equal(STEPS.segment([-3.0, 0.0, 3.0, 6.0]), [0, 1, 2, 2])


def test_corners_and_their_values() -> None:
    np.testing.assert_array_equal(STEPS.corners(), [-3.0, 0.0, 3.0, 6.0])
    np.testing.assert_array_equal(STEPS.end_values(), [2.0, 5.0, 3.0])
    assert STEPS.hold == "step"


@given(polylines(), st.lists(st.floats(0.0, 1.0), min_size=1, max_size=20), st.booleans())
def test_a_polyline_agrees_with_numpy_interp(
    line: tuple[np.ndarray, np.ndarray], fractions: list[float], backward: bool
) -> None:
    times, values = line
    asked = np.clip(times[0] + np.array(fractions) * (times[-1] - times[0]), times[0], times[-1])
    got = joined(times, values).at(asked, backward)
    np.testing.assert_allclose(got, np.interp(asked, times, values), rtol=0, atol=1e-10)


@given(polylines(), st.floats(0.0, 1.0))
def test_corner_values_bound_the_quantity(line: tuple[np.ndarray, np.ndarray], fraction: float) -> None:
    times, values = line
    driver = joined(times, values)
    asked = float(np.clip(times[0] + fraction * (times[-1] - times[0]), times[0], times[-1]))
    ends = driver.corner_values()
    slack = 1e-10
    assert ends.min() - slack <= float(driver.at(asked)) <= ends.max() + slack


@given(polylines())
def test_a_polyline_has_no_jump_at_its_corners(line: tuple[np.ndarray, np.ndarray]) -> None:
    driver = joined(*line)
    np.testing.assert_allclose(driver.at(line[0]), driver.at(line[0], backward=True), rtol=0, atol=1e-10)
    np.testing.assert_allclose(driver.end_values(), line[1][1:], rtol=0, atol=1e-10)


@pytest.mark.parametrize("time_h", [-3.0001, 6.0001, np.nan, np.inf, -np.inf])
def test_nothing_is_extrapolated(time_h: float) -> None:
    with pytest.raises(InputError, match=r"series:kp: asked outside its cover -3 to 6 h; a time inside it"):
        STEPS.at([0.0, time_h])


def test_shapes_are_kept() -> None:
    assert STEPS.at(1.0).shape == ()
    assert STEPS.at(np.zeros((2, 3))).shape == (2, 3)
    assert STEPS.at(np.zeros(0)).shape == (0,)


def test_values_within_a_ramp() -> None:
    ramp = Driver("series:b", np.array([0.0]), np.array([1.0]), np.array([0.25]), 8.0, "linear")
    np.testing.assert_allclose(ramp.at([0.0, 2.0, 8.0]), [1.0, 1.5, 3.0], rtol=bound("rounding"))
