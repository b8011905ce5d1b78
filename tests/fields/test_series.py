"""A history to a driver: numpy.interp and the definition of a step are the references."""

from __future__ import annotations

import re
from dataclasses import replace
from datetime import UTC, datetime, timedelta, timezone

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from tolerances import bound

from fields.errors import InputError
from fields.series import Series

START = datetime(2027, 3, 4, tzinfo=UTC)


def at(hours: float) -> np.datetime64:
    return np.datetime64("2027-03-04", "us") + np.timedelta64(round(hours * 3.6e9), "us")


def iso(hours: float) -> str:
    return str(at(hours).astype("datetime64[s]")) + "Z"


def series(hours: list[float] | np.ndarray, values: list[float] | np.ndarray, **more: object) -> Series:
    return Series("kp", "kp", np.array([at(h) for h in hours]), values, **more)  # type: ignore[arg-type]


@st.composite
def regular(draw: st.DrawFn) -> tuple[float, np.ndarray, np.ndarray]:
    """Interval, hours of the rows, and values, in whole minutes; the cover may begin before the run."""
    interval = draw(st.integers(1, 400)) / 60
    values = np.array(draw(st.lists(st.integers(0, 27), min_size=2, max_size=20))) / 3
    return interval, draw(st.integers(-3000, 3000)) / 60 + interval * np.arange(values.size), values


@st.composite
def irregular(draw: st.DrawFn) -> tuple[np.ndarray, np.ndarray]:
    gaps = draw(st.lists(st.integers(1, 500), min_size=1, max_size=20))
    values = draw(st.lists(st.floats(0.0, 9.0), min_size=len(gaps) + 1, max_size=len(gaps) + 1))
    return draw(st.integers(-3000, 3000)) / 60 + np.cumsum([0, *gaps]) / 60, np.array(values)


fractions = st.tuples(st.floats(0.0, 1.0), st.floats(0.0, 1.0)).map(sorted)


def inside(fraction: list[float], first: float, last: float) -> tuple[float, float]:
    low, high = (first + f * (last - first) for f in fraction)
    return float(np.clip(low, first, last)), float(np.clip(high, first, last))


@given(regular(), fractions)
def test_step_is_each_value_over_its_interval(rows: tuple[float, np.ndarray, np.ndarray], cut: list[float]) -> None:
    interval, hours, values = rows
    low, high = inside(cut, hours[0] + 1e-6, hours[-1] + interval - 1e-6)
    driver = series(hours, values, interval_h=interval).driver(START, low, high)
    times = np.linspace(low, high, 37)
    away = np.abs((times - hours[0]) / interval - np.round((times - hours[0]) / interval)) > 1e-6
    row = np.floor((times - hours[0]) / interval).astype(int)
    np.testing.assert_array_equal(driver.at(times[away]), values[row[away]])
    np.testing.assert_array_equal(driver.slope, 0.0)


@given(regular(), fractions)
def test_linear_joins_centres_and_is_flat_beyond(rows: tuple[float, np.ndarray, np.ndarray], cut: list[float]) -> None:
    interval, hours, values = rows
    low, high = inside(cut, hours[0] + 1e-6, hours[-1] + interval - 1e-6)
    driver = series(hours, values, interval_h=interval, hold="linear").driver(START, low, high)
    times = np.linspace(low, high, 37)
    # numpy.interp is flat beyond its first and last point.
    np.testing.assert_allclose(driver.at(times), np.interp(times, hours + interval / 2, values), rtol=0, atol=1e-7)


@given(irregular(), fractions)
def test_without_an_interval_a_row_holds_until_the_next(rows: tuple[np.ndarray, np.ndarray], cut: list[float]) -> None:
    hours, values = rows
    low, high = inside(cut, hours[0] + 1e-6, hours[-1] - 1e-6)
    driver = series(hours, values).driver(START, low, high)
    times = np.linspace(low, high, 37)
    times = times[np.min(np.abs(times[:, None] - hours), axis=1) > 1e-6]
    expected = [max((h, v) for h, v in zip(hours, values) if h <= t)[1] for t in times]
    np.testing.assert_array_equal(driver.at(times), expected)


@given(irregular(), fractions)
def test_without_an_interval_lines_join_the_rows(rows: tuple[np.ndarray, np.ndarray], cut: list[float]) -> None:
    hours, values = rows
    low, high = inside(cut, hours[0] + 1e-6, hours[-1] - 1e-6)
    driver = series(hours, values, hold="linear").driver(START, low, high)
    times = np.linspace(low, high, 37)
    np.testing.assert_allclose(driver.at(times), np.interp(times, hours, values), rtol=0, atol=1e-7)


@given(regular(), fractions, st.sampled_from(["step", "linear"]))
def test_a_cut_driver_keeps_every_corner_inside(
    rows: tuple[float, np.ndarray, np.ndarray], cut: list[float], hold: str
) -> None:
    interval, hours, values = rows
    history = series(hours, values, interval_h=interval, hold=hold)
    whole = history.driver(START, hours[0] + 1e-6, hours[-1] + interval - 1e-6)
    low, high = inside(cut, hours[0] + 1e-6, hours[-1] + interval - 1e-6)
    part = history.driver(START, low, high)
    assert part.start_h[0] <= low
    assert part.end_h >= high
    corners = whole.corners()
    assert set(corners[(corners > low) & (corners < high)]) <= set(part.corners())
    assert set(part.corners()) <= set(corners)
    assert part.name == "series:kp"
    assert part.hold == hold


@given(irregular())
def test_linear_segments_never_pass_their_values(rows: tuple[np.ndarray, np.ndarray]) -> None:
    hours, values = rows
    driver = series(hours, values, hold="linear").driver(START, float(hours[0]) + 1e-6, float(hours[-1]) - 1e-6)
    rising = driver.slope > 0
    ends = driver.end_values()
    assert np.all(driver.corner_values() >= values.min())
    assert np.all(driver.corner_values() <= values.max())
    np.testing.assert_allclose(ends, values[1:], rtol=bound("rounding"), atol=bound("rounding"))
    assert np.all(ends[rising] >= driver.value[rising])


@given(regular(), st.data())
def test_a_removed_row_is_a_gap_that_names_its_interval(
    rows: tuple[float, np.ndarray, np.ndarray], data: st.DataObject
) -> None:
    interval, hours, values = rows
    lost = data.draw(st.integers(0, values.size - 1))
    left = np.delete(np.arange(values.size), lost)
    history = series(hours[left], values[left], interval_h=interval)
    with pytest.raises(InputError) as caught:
        history.driver(START, float(hours[0]), float(hours[-1] + interval))
    assert f"no value from {utc(hours[lost])} to {utc(hours[lost] + interval)}" in str(caught.value)


def utc(hours: float) -> str:
    """To the second, or to the microsecond where there is a fraction: whole minutes here."""
    return iso(round(hours * 60) / 60)


@given(regular(), st.data())
def test_a_repeated_row_is_named(rows: tuple[float, np.ndarray, np.ndarray], data: st.DataObject) -> None:
    interval, hours, values = rows
    twice = data.draw(st.integers(0, values.size - 1))
    order = np.sort([*range(values.size), twice])
    with pytest.raises(InputError, match=re.escape(f'"{utc(hours[twice])}": this time stands twice')):
        series(hours[order], values[order], interval_h=interval)


@given(regular(), st.data())
def test_rows_out_of_order_are_named(rows: tuple[float, np.ndarray, np.ndarray], data: st.DataObject) -> None:
    interval, hours, values = rows
    order = np.array(data.draw(st.permutations(range(values.size)).filter(lambda p: list(p) != sorted(p))))
    early = next(i for i in range(1, order.size) if order[i] < order[i - 1])
    with pytest.raises(InputError, match=re.escape(f'"{utc(hours[order[early]])}": out of order')):
        series(hours[order], values[order], interval_h=interval)


class TestCover:
    rows = series([0.0, 3.0, 6.0], [1.0, 2.0, 3.0], interval_h=3.0)

    @pytest.mark.parametrize("hold", ["step", "linear"])
    def test_reaches_to_the_end_of_the_last_interval(self, hold: str) -> None:
        driver = replace(self.rows, hold=hold).driver(START, 0.0, 9.0)
        assert (driver.start_h[0], driver.end_h) == (0.0, 9.0)
        assert self.rows.cover == (iso(0), iso(9))
        with pytest.raises(InputError, match=re.escape(f"no value from {iso(9)} to {iso(10)}; the run needs {iso(0)}")):
            replace(self.rows, hold=hold).driver(START, 0.0, 10.0)

    @pytest.mark.parametrize("hold", ["step", "linear"])
    def test_begins_with_the_first_row(self, hold: str) -> None:
        with pytest.raises(InputError, match=re.escape(f"no value from {iso(-1)} to {iso(0)}")):
            replace(self.rows, hold=hold).driver(START, -1.0, 2.0)

    @pytest.mark.parametrize("hold", ["step", "linear"])
    def test_without_an_interval_ends_at_the_last_row(self, hold: str) -> None:
        rows = series([0.0, 3.0, 6.0], [1.0, 2.0, 3.0], hold=hold)
        assert rows.driver(START, 0.0, 6.0).end_h == 6.0
        with pytest.raises(InputError, match=re.escape(f"no value from {iso(6)} to {iso(9)}")):
            rows.driver(START, 0.0, 9.0)

    def test_a_run_wholly_outside_names_its_own_span(self) -> None:
        with pytest.raises(InputError, match=re.escape(f"no value from {iso(20)} to {iso(44)}")):
            self.rows.driver(START, 20.0, 44.0)
        with pytest.raises(InputError, match=re.escape(f"no value from {iso(-44)} to {iso(-20)}")):
            self.rows.driver(START, -44.0, -20.0)

    def test_a_gap_hurts_only_the_run_that_needs_it(self) -> None:
        rows = series([0.0, 3.0, 12.0, 15.0], [1.0, 2.0, 3.0, 4.0], interval_h=3.0, hold="linear")
        np.testing.assert_array_equal(rows.driver(START, 0.0, 6.0).at([0.0, 1.5, 3.0, 4.5, 6.0]), [1, 1, 1.5, 2, 2])
        np.testing.assert_array_equal(rows.driver(START, 12.0, 18.0).at([12.0, 15.0, 18.0]), [3, 3.5, 4])
        for span in ((5.0, 13.0), (7.0, 8.0), (0.0, 6.001), (11.999, 13.0)):
            with pytest.raises(InputError, match=re.escape(f"no value from {iso(6)} to {iso(12)}")):
                rows.driver(START, *span)

    def test_a_rounding_error_of_the_span_is_no_gap(self) -> None:
        rows = series([0.0, 0.1, 0.2], [1.0, 2.0, 3.0], interval_h=0.1)
        assert 0.1 + 0.2 > 0.3
        assert rows.driver(START, 0.0, 0.1 + 0.2).at(0.1 + 0.2) == 3.0
        assert rows.driver(START + timedelta(hours=0.3), -(0.1 + 0.2), 0.0).at(-(0.1 + 0.2)) == 1.0
        with pytest.raises(InputError, match="no value from"):
            rows.driver(START, 0.0, 0.3 + 1e-9)

    def test_a_moment_is_a_span(self) -> None:
        for moment in (0.0, 1.0, 3.0, 9.0):
            driver = self.rows.driver(START, moment, moment)
            assert driver.start_h[0] <= moment <= driver.end_h
        assert self.rows.driver(START, 4.0, 4.0).at(4.0) == 2.0

    def test_neighbours_of_the_span_shape_lines_inside_it(self) -> None:
        rows = replace(self.rows, hold="linear")
        np.testing.assert_allclose(rows.driver(START, 3.0, 3.5).at([3.0, 3.5]), [1.5, 1.5 + 0.5 / 3], rtol=1e-14)
        np.testing.assert_allclose(rows.driver(START, 5.0, 6.0).at(6.0), 2.5, rtol=1e-14)

    @pytest.mark.parametrize("span", [(2.0, 1.0), (float("nan"), 1.0), (0.0, float("inf"))])
    def test_needs_a_span_that_is_one(self, span: tuple[float, float]) -> None:
        with pytest.raises(InputError, match="a finite span"):
            self.rows.driver(START, *span)


class TestStart:
    rows = series([0.0, 3.0], [1.0, 2.0], interval_h=3.0)

    def test_without_an_offset_is_utc(self) -> None:
        np.testing.assert_array_equal(self.rows.driver(datetime(2027, 3, 4), 0, 6).corners(), [0.0, 3.0, 6.0])

    def test_with_an_offset_is_converted(self) -> None:
        start = datetime(2027, 3, 4, 2, tzinfo=timezone(timedelta(hours=2)))
        np.testing.assert_array_equal(self.rows.driver(start, 0, 6).corners(), [0.0, 3.0, 6.0])

    def test_backward_hours_are_negative(self) -> None:
        driver = self.rows.driver(datetime(2027, 3, 4, 6), -6.0, 0.0)
        np.testing.assert_array_equal(driver.corners(), [-6.0, -3.0, 0.0])

    def test_keeps_fractions_of_a_second(self) -> None:
        start = START + timedelta(microseconds=250_001)
        assert self.rows.driver(start, 1.0, 5.0).corners()[1] == (3 * 3_600_000_000 - 250_001) / 3_600_000_000


class TestInCode:
    def test_takes_datetimes_texts_and_datetime64(self) -> None:
        forms = [
            [datetime(2027, 3, 4, tzinfo=UTC), datetime(2027, 3, 4, 3)],
            ["2027-03-04T00:00:00Z", "2027-03-04T04:00+01:00"],
            np.array(["2027-03-04T00", "2027-03-04T03"], dtype="datetime64[h]"),
        ]
        for times in forms:
            made = Series("a", "a", times, [1, 2])  # type: ignore[arg-type]
            np.testing.assert_array_equal(made.times, [at(0), at(3)])
            assert made.times.dtype == "datetime64[us]"

    def test_is_frozen_and_owns_its_arrays(self) -> None:
        values = np.array([1.0, 2.0])
        made = series([0.0, 3.0], values)
        values[0] = 9.0
        assert made.values[0] == 1.0
        with pytest.raises(ValueError, match="read-only"):
            made.values[0] = 5.0
        with pytest.raises(ValueError, match="read-only"):
            made.times[0] = at(1)

    @pytest.mark.parametrize(
        ("hours", "values", "more", "line"),
        [
            ([0.0], [1.0], {}, "driftrose: series.kp: 1 row; two rows or more, or interval_h"),
            ([], [], {"interval_h": 3.0}, "driftrose: series.kp: no rows; at least one"),
            ([0.0, 3.0], [1.0], {}, "driftrose: series.kp: 1 values at 2 times; one value a time"),
            ([0.0, 3.0], [1.0, np.nan], {}, f"driftrose: series.kp: nan at {iso(3)}; finite values"),
            ([0.0, 3.0], [1.0, np.inf], {}, f"driftrose: series.kp: inf at {iso(3)}; finite values"),
            ([0.0, 3.0], [1.0, 9.5], {}, f"driftrose: series.kp: Kp 9.5 at {iso(3)}; Kp from 0 to 9"),
            ([0.0, 3.0], [1.0, -1.0], {}, f"driftrose: series.kp: Kp -1 at {iso(3)}; Kp from 0 to 9"),
            (
                [0.0, 3.0, 4.0],
                [1.0, 2.0, 3.0],
                {"interval_h": 3.0},
                f"driftrose: series.kp: rows 1 h apart, {iso(3)} to {iso(4)}, while interval_h = 3; "
                "rows one interval apart",
            ),
            (
                [0.0, 3.0],
                [1.0, 2.0],
                {"hold": "spline"},
                'driftrose: series.kp.hold = "spline": unknown hold; step or linear',
            ),
        ],
    )
    def test_refuses_in_one_line(self, hours: list[float], values: list[float], more: dict, line: str) -> None:
        with pytest.raises(InputError) as caught:
            series(hours, values, **more)
        assert str(caught.value) == line

    @pytest.mark.parametrize("interval", [0.0, -3.0, float("nan"), float("inf"), True, "3", 1e-12])
    def test_refuses_an_interval_that_is_none(self, interval: object) -> None:
        with pytest.raises(InputError, match=r"series\.kp\.interval_h = .*: not a length of time; hours above 0"):
            series([0.0, 3.0], [1.0, 2.0], interval_h=interval)

    @pytest.mark.parametrize("times", [["2027-03-04", "soon"], np.array(["2027-03-04", "NaT"], dtype="datetime64[s]")])
    def test_refuses_what_is_no_time(self, times: object) -> None:
        with pytest.raises(InputError, match=r"series\.a = .*: not a time"):
            Series("a", "a", times, [1.0, 2.0])  # type: ignore[arg-type]

    def test_only_kp_is_held_to_its_range(self) -> None:
        made = Series("amplitude", "amplitude", np.array([at(0), at(3)]), np.array([-40.0, 400.0]))
        assert made.driver(START, 0, 3).at(1.0) == -40.0

    def test_an_interval_with_few_digits_fits(self) -> None:
        rows = series([0.0, 1 / 3, 2 / 3], [1.0, 2.0, 3.0], interval_h=0.33333)
        np.testing.assert_array_equal(rows.driver(START, 0.0, 0.99).value, [1.0, 2.0, 3.0])
