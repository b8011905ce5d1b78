"""The one line that bad input prints."""

from __future__ import annotations

from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fields.errors import InputError, nearest, shown


def test_full_line_has_file_key_value_problem_and_remedy() -> None:
    error = InputError("out of range", "a number from 0 to 9", key="electric[1].kp", value=11, file="storm.toml")
    assert str(error) == "driftrose: storm.toml: electric[1].kp = 11: out of range; a number from 0 to 9"


@pytest.mark.parametrize(
    ("parts", "line"),
    [
        ({}, "driftrose: missing"),
        ({"file": "a.toml"}, "driftrose: a.toml: missing"),
        ({"key": "time.hours"}, "driftrose: time.hours: missing"),
        ({"value": 3}, "driftrose: missing"),
        ({"file": "kp.txt", "key": "line 12"}, "driftrose: kp.txt: line 12: missing"),
        ({"key": "gamma", "value": 0.0}, "driftrose: gamma = 0.0: missing"),
        ({"key": "name", "value": "dipol"}, 'driftrose: name = "dipol": missing'),
        ({"key": "flag", "value": True}, "driftrose: flag = true: missing"),
    ],
    ids=lambda case: " ".join(case) or "nothing" if isinstance(case, dict) else "",
)
def test_parts_left_out_leave_no_gap(parts: dict[str, Any], line: str) -> None:
    assert InputError("missing", **parts).line() == line


def test_it_is_a_value_error_and_keeps_its_parts() -> None:
    error = InputError("wrong type", "a number", key="kp", value="four", file="run.toml")
    assert isinstance(error, ValueError)
    assert (error.problem, error.remedy, error.key, error.value) == ("wrong type", "a number", "kp", "four")
    assert error.args == (str(error),)


def test_placed_fills_what_is_unknown_and_keeps_what_is_known() -> None:
    bare = InputError("out of range", "less")
    assert str(bare.placed(file="run.toml", key="kp", value=11)) == "driftrose: run.toml: kp = 11: out of range; less"
    known = InputError("out of range", "less", key="gamma", value=-1.0, file="a.toml")
    assert str(known.placed(file="b.toml", key="kp", value=11)) == str(known)
    half = InputError("missing", key="gamma")
    assert str(half.placed(file="b.toml", key="kp", value=11)) == "driftrose: b.toml: gamma: missing"


@given(st.text(max_size=200), st.text(max_size=200), st.text(max_size=20), st.text(max_size=300))
def test_whatever_is_given_the_line_is_one_line(problem: str, remedy: str, key: str, value: str) -> None:
    line = InputError(problem, remedy, key=key, value=value, file="run.toml").line()
    assert line.startswith("driftrose: run.toml:")
    assert len(line.splitlines()) == 1


@given(st.one_of(st.text(), st.floats(), st.lists(st.integers()), st.booleans()), st.integers(4, 80))
def test_shown_is_short(value: Any, limit: int) -> None:
    assert len(shown(value, limit)) <= limit


def test_shown_marks_what_it_cuts() -> None:
    assert shown("x" * 100) == '"' + "x" * 56 + "..."
    assert shown("line\none") == '"line one"'


def test_nearest_suggests_the_close_name_or_lists_all() -> None:
    assert nearest("dipol", ["dipole", "uniform"]) == "did you mean dipole"
    assert nearest("zzz", ["dipole", "uniform"]) == "one of dipole, uniform"
