"""Exposure, windows, boundary history: on arrays made by hand, and by counting one by one. All numbers are invented."""

from __future__ import annotations

from io import StringIO
from itertools import pairwise
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays

from tracer.access_csv import tables, write
from tracer.access_plan import Sector
from tracer.access_records import ACCESS, AccessResult, OrbitAccess
from tracer.analysis.boundary_history import innermost, openings, runs, spells
from tracer.analysis.exposure import exposure
from tracer.analysis.windows import windows
from tracer.outcomes import Outcome
from tracer.records import CAUTION

O, E, B, U, I, R, D = (  # noqa: E741
    Outcome.OPEN,
    Outcome.OPEN_ELSEWHERE,
    Outcome.BEFORE_RECORD,
    Outcome.UNDECIDED,
    Outcome.INNER,
    Outcome.OUT_OF_REACH,
    Outcome.OUTSIDE_DOMAIN,
)
NAN = float("nan")


def told(region: list[int], time_h: list[float], every_min: float = 30.0) -> dict[str, float]:
    found = exposure(np.array(region, np.uint8), np.array(time_h), every_min)
    return {name: float(value) for name, value in found.items()}


def halves(count: int) -> list[float]:
    return [0.5 * i for i in range(count)]


def test_exposure_by_hand() -> None:
    region = [B, O, O, R, E, I, O, O, O, U, D, D]
    assert told(region, halves(12)) == pytest.approx(
        {
            "share_open": 5 / 9,
            "share_unknown": 2 / 9,
            "share_in_reach": 9 / 12,
            "passes": 2,
            "first_open_h": 0.5,
            "last_open_h": 4.0,
            "longest_closed_h": 1.5,  # two passes lie three samples apart, and three follow the last
            "worst_pass_h": 1.5,
            "worst_pass_begin_h": 3.0,
        }
    )


def test_never_in_reach_is_not_zero() -> None:
    never = told([R, R, D], halves(3))
    closed = told([I, B, I], halves(3))
    assert np.isnan([never["share_open"], never["share_unknown"], never["longest_closed_h"]]).all()
    assert (closed["share_open"], closed["longest_closed_h"]) == (0.0, 1.5)
    for found in (never, closed):
        assert found["passes"] == 0
        assert np.isnan([found["first_open_h"], found["last_open_h"], found["worst_pass_h"]]).all()
    assert (never["share_in_reach"], closed["share_in_reach"]) == (0.0, 1.0)
    assert told([O, O], halves(2))["longest_closed_h"] == 0.0


def test_a_gap_in_the_orbit_ends_a_pass() -> None:
    region, with_gap = [O, O, O, O], [0.0, 0.5, 3.0, 3.5]
    assert told(region, halves(4))["passes"] == 1
    found = told(region, with_gap)
    assert (found["passes"], found["worst_pass_h"], found["worst_pass_begin_h"]) == (2, 1.0, 0.0)


@given(arrays.arrays(np.uint8, st.tuples(st.integers(1, 12), st.integers(1, 3)), elements=st.integers(0, 10)))
def test_exposure_by_counting(region: np.ndarray) -> None:
    found = exposure(region, np.arange(region.shape[0]) / 4.0, 15.0)
    for channel in range(region.shape[1]):
        codes = region[:, channel].tolist()
        answered = [code for code in codes if code not in (Outcome.FAILED, R, D)]
        words = "".join("O" if code == O else "." for code in codes)
        passes = [part for part in words.split(".") if part]
        closed = [part for part in words.split("O") if part]
        assert found["passes"][channel] == len(passes)
        if not answered:
            assert np.isnan(found["share_open"][channel])
            continue
        assert found["share_open"][channel] == pytest.approx(words.count("O") / len(answered))
        assert found["longest_closed_h"][channel] == max(map(len, closed), default=0) / 4.0
        if passes:
            assert found["worst_pass_h"][channel] == max(map(len, passes)) / 4.0
            assert found["first_open_h"][channel] == words.index("O") / 4.0
            assert found["last_open_h"][channel] == words.rindex("O") / 4.0


@given(st.lists(st.booleans(), max_size=20))
def test_runs(flags: list[bool]) -> None:
    found = runs(np.array(flags, bool))
    rebuilt = np.zeros(len(flags), bool)
    for begin, end in found:
        assert begin < end
        rebuilt[begin:end] = True
    assert rebuilt.tolist() == flags
    assert all(one[1] < other[0] for one, other in pairwise(found))


def test_innermost_in_whatever_order_the_map_is() -> None:
    r_re = np.array([6.0, 4.0, 8.0])
    is_open = np.array([[True, False, False, True], [False, False, False, True], [True, True, False, False]])
    found = innermost(is_open, r_re)
    np.testing.assert_array_equal(found["innermost_re"], [6.0, 8.0, NAN, 4.0])
    np.testing.assert_array_equal(found["next_inward_re"], [4.0, 6.0, NAN, NAN])


def test_openings_in_whatever_order_the_times_are() -> None:
    is_open = np.array([[True, False, True], [False, False, True], [True, False, True], [False, False, True]])
    found = openings(is_open, np.array([6.0, 3.0, 0.0, 9.0]))  # in order: 0 open, 3 closed, 6 open, 9 closed
    np.testing.assert_array_equal(found["first_open_h"], [0.0, NAN, 0.0])
    np.testing.assert_array_equal(found["last_open_h"], [6.0, NAN, 9.0])
    np.testing.assert_array_equal(found["spells"], [2, 0, 1])


# --------------------------------------------------------------------------------------------- one place, by hand


def one_place(region: Any, energy_keV: list[float], time_h: list[float]) -> AccessResult:
    """A result at 6.6 R_E, midnight, one species and pitch angle; `region` by time and energy."""
    codes = np.array(region, np.uint8)[None, :, :, None, None, None]
    access = {column.name: np.full(codes.shape, NAN) for column in ACCESS} | {"region": codes}
    is_open = codes == O
    boundary = innermost(is_open, np.array([6.6])) | {
        name: values[None] for name, values in openings(is_open[0], np.array(time_h)).items()
    }
    orbit = OrbitAccess("a,b", 30.0, *(np.zeros(1) for _ in range(4)), {})
    table = exposure(codes[0, :, :, :, 0, 0], np.array(time_h), 180.0)
    return AccessResult(
        ("H+",),
        np.array(energy_keV),
        np.array([90.0]),
        np.array(time_h),
        np.array([6.6]),
        np.array([0.0]),
        Sector(10.0),
        access,
        boundary,
        (orbit,),
        {name: values[None, None] for name, values in table.items()},
        {"start": "2027-03-04T00:00:00Z"},
    )


# by energy 100, 1, 10, 30 keV; in rising order: open, closed, open, undecided at 3 h, and so on
HAND = one_place([[U, O, I, O], [O, O, O, I], [B, B, B, B]], [100.0, 1.0, 10.0, 30.0], [3.0, 0.0, 6.0])


def test_windows_by_hand() -> None:
    place = (6.6, 0.0, 90.0)
    found = list(windows(HAND))
    assert [(w.species, w.time_h, w.r_re, w.mlt_h, w.pitch_deg) for w in found] == [
        ("H+", 3.0, *place), ("H+", 3.0, *place), ("H+", 0.0, *place), ("H+", 0.0, *place),
    ]  # fmt: skip
    edges = [(w.closed_below_keV, w.lowest_keV, w.highest_keV, w.closed_above_keV) for w in found]
    np.testing.assert_array_equal(
        edges, [(NAN, 1.0, 1.0, 10.0), (10.0, 30.0, 30.0, 100.0), (NAN, 1.0, 10.0, 30.0), (30.0, 100.0, 100.0, NAN)]
    )
    nearest = list(windows(HAND, r_re=6.0, mlt_h=23.0))  # the only place there is
    assert list(map(repr, nearest)) == list(map(repr, found))


def test_spells_by_hand() -> None:
    found = list(spells(HAND))
    assert [s.energy_keV for s in found] == [100.0, 1.0, 10.0, 30.0]
    times = [(s.closed_before_h, s.first_h, s.last_h, s.closed_after_h) for s in found]
    np.testing.assert_array_equal(
        times, [(NAN, 0.0, 0.0, 3.0), (NAN, 0.0, 3.0, 6.0), (NAN, 0.0, 0.0, 3.0), (0.0, 3.0, 3.0, 6.0)]
    )


def test_tables_by_hand() -> None:
    found = {}
    for name, header, rows in tables(HAND):
        stream = StringIO()
        write(stream, header, rows)
        found[name] = stream.getvalue()
    assert set(found) == {"boundary", "openings", "windows", "exposure"}
    for text in found.values():
        assert text.startswith(f"# {CAUTION}\n")
    assert found["windows"].splitlines()[1:3] == [
        "species,time_utc,time_h,r_re,mlt_h,pitch_deg,closed_below_keV,lowest_keV,highest_keV,closed_above_keV",
        "H+,2027-03-04T03:00:00Z,3,6.6,0,90,,1,1,10",
    ]
    assert (
        found["openings"].splitlines()[2]
        == "H+,100,90,6.6,0,,2027-03-04T00:00:00Z,2027-03-04T00:00:00Z,2027-03-04T03:00:00Z"
    )
    assert found["boundary"].splitlines()[2:4] == [
        "H+,2027-03-04T03:00:00Z,3,100,90,0,,",
        "H+,2027-03-04T03:00:00Z,3,1,90,0,6.6,",
    ]
    first = found["exposure"].splitlines()[2]
    assert first.startswith('"a,b",H+,100,90,')
    assert len(first.split(",")) == len(found["exposure"].splitlines()[1].split(",")) + 1  # a comma in the name
