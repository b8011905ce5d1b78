"""Two-line element sets: sgp4's own verification set through the reading path, and every kind of damaged file."""

from __future__ import annotations

import builtins
from importlib.util import find_spec
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from tolerances import bound

from fields.clock import array_micros
from fields.constants import EARTH_RADIUS_KM
from fields.errors import InputError
from fields.readers.textfile import TextFile
from tracer.ephemeris import twoline
from tracer.ephemeris.twoline import TwoLine, checksum, read_two_line

MICROS_PER_MINUTE = 60_000_000

# The verification sets and their output, which come with the sgp4 package (Vallado et al. 2006, AIAA 2006-6753)
FOLDER = Path(next(iter(find_spec("sgp4").submodule_search_locations)))  # type: ignore[union-attr, arg-type]


def published_sets() -> list[tuple[str, str, list[float]]]:
    """Both lines of every set; and start, stop and step in minutes, which stand behind column 69."""
    lines = (FOLDER / "SGP4-VER.TLE").read_text("ascii").splitlines()
    lines = [line for line in lines if not line.startswith("#")]
    return [
        (first[:69], second[:69], [float(cell) for cell in second[69:].split()])
        for first, second in zip(lines[::2], lines[1::2], strict=True)
    ]


def published_places() -> list[tuple[str, np.ndarray]]:
    """Number of each satellite, and its rows of minutes since epoch and place in km."""
    found: list[tuple[str, list[list[float]]]] = []
    for line in (FOLDER / "tcppver.out").read_text("ascii").splitlines():
        cells = line.split()
        if cells[-1] == "xx":
            found.append((cells[0], []))
        else:
            found[-1][1].append([float(cell) for cell in cells[:4]])
    return [(name, np.array(rows).reshape(-1, 4)) for name, rows in found]


CASES = [
    pytest.param(first, second, span, rows, id=f"{i}: {name}")
    for i, ((first, second, span), (name, rows)) in enumerate(zip(published_sets(), published_places(), strict=True))
]
# they decay, or leave the model, within their span
ENDING = {"20413", "22312", "23333", "28350", "28872", "29141", "33333"}
# made up by the authors of the set to provoke errors of the model; their checksums are wrong, too
PROVOKED = {"33333", "33334", "33335"}
SAMPLE, BELOW = published_sets()[0][:2]


def with_checksum(line: str) -> str:
    return line[:68] + str(checksum(line))


def written(folder: Path, *lines: str) -> Path:
    path = folder / "set.tle"
    path.write_text("\n".join(lines) + "\n", "utf-8")
    return path


def refused(folder: Path, *lines: str) -> str:
    """What is said of a file, without its name."""
    path = written(folder, *lines)
    with pytest.raises(InputError) as caught:
        read_two_line(path)
    return str(caught.value).replace(f"driftrose: {path}: ", "")


@pytest.mark.parametrize(("first", "second", "span", "rows"), CASES)
def test_verification_set(first: str, second: str, span: list[float], rows: np.ndarray, tmp_path: Path) -> None:
    name = first[2:7]
    if name in PROVOKED:
        assert "wrong checksum" in refused(tmp_path, first, second)
        first, second = with_checksum(first), with_checksum(second)
    found = read_two_line(written(tmp_path, first, second))
    stamps = found.epoch + np.rint(rows[:, 0] * MICROS_PER_MINUTE).astype(np.int64)
    if name == "33334":  # no place at all: the published row is what the model left behind
        with pytest.raises(InputError, match=r"no place at 2006-06-23T20:35:47.504544Z: perturbed eccentr"):
            found.places_km(stamps)
        return
    assert found.places_km(stamps) == pytest.approx(rows[:, 1:], abs=bound("two-line set km"))
    _, stop, step = span
    if rows[-1, 0] + step < stop:  # the model ends there
        with pytest.raises(InputError, match="SGP4 gives no place at"):
            found.places_km(stamps[-1:] + round(step * MICROS_PER_MINUTE))
        assert name in ENDING


def test_the_whole_set_is_read() -> None:
    assert len(CASES) == 33
    assert sum(rows.shape[0] for _, rows in published_places()) == 667


def test_epochs() -> None:
    """1957 to 2056, exact to the last of eight decimals."""
    for year, day, fraction, utc in (
        ("00", "179", "78495062", "2000-06-27T18:50:19.733568"),
        ("57", "001", "00000000", "1957-01-01"),
        ("56", "366", "99999999", "2056-12-31T23:59:59.999136"),
    ):
        line = with_checksum(f"{SAMPLE[:18]}{year}{day}.{fraction}{SAMPLE[32:]}")
        found = TwoLine(line, BELOW, twoline._epoch(TextFile([], "", ""), 1, line))
        assert found.epoch == array_micros(utc, "time")


def test_a_name_and_blank_lines_are_passed_over(tmp_path: Path) -> None:
    plain = read_two_line(written(tmp_path, SAMPLE, BELOW))
    named = read_two_line(written(tmp_path, "# a comment", "", "0 VANGUARD 1", SAMPLE + "  ", BELOW, ""))
    assert (named.line1, named.line2, named.epoch) == (plain.line1, plain.line2, plain.epoch)


@settings(deadline=None)
@given(at=st.integers(0, 67), digit=st.sampled_from("0123456789"), second=st.booleans())
def test_any_other_digit_is_noticed(at: int, digit: str, second: bool, tmp_path_factory: Any) -> None:
    lines = [SAMPLE, BELOW]
    line = lines[second]
    if not line[at].isdigit() or line[at] == digit:
        return
    lines[second] = line[:at] + digit + line[at + 1 :]
    said = refused(tmp_path_factory.mktemp("tle"), *lines)
    assert "wrong checksum" in said or "not line" in said


@pytest.mark.parametrize(
    ("lines", "said"),
    [
        (
            [SAMPLE[:-1] + "4", BELOW],
            'line 1 = "4": wrong checksum: a character of the line is damaged; '
            "3 for the line as it stands, or the line as published",
        ),
        ([SAMPLE], "holds no element set; one: its two lines, or a name and two lines"),
        ([SAMPLE, BELOW, SAMPLE, BELOW], "holds 2 element sets; one: its two lines, or a name and two lines"),
        ([BELOW, SAMPLE], 'line 1 = "2 ": not line 1 of an element set; it begins with "1 "'),
        ([SAMPLE[:60], BELOW], "line 1: 60 characters; the 69 columns of a two-line element set, in ASCII"),
        (
            [SAMPLE, with_checksum(BELOW.replace("00005", "00006"))],
            'line 2 = "00006": line 1 is of satellite 00005; both of the same',
        ),
        (
            [SAMPLE, with_checksum(BELOW.replace("1859667", "18x9667"))],
            'line 2 = "18x9667": eccentricity: not such a number; a two-line element set as published',
        ),
        (
            [SAMPLE, with_checksum(BELOW.replace("10.82419157", " 0.00000000"))],
            'line 2 = " 0.00000000": mean motion 0; revolutions a day above 0',
        ),
        (
            [with_checksum(SAMPLE.replace("00179.78495062", "00379.78495062")), BELOW],
            'line 1 = "00379.78495062": not an epoch; year and day of the year, as 27063.50000000',
        ),
        (["", "  "], "empty file; a two-line element set"),
    ],
)
def test_damaged_files(lines: list[str], said: str, tmp_path: Path) -> None:
    assert refused(tmp_path, *lines) == said


def test_perigee() -> None:
    # Vanguard 1: 654 km above the ground at its perigee (handbooks; from memory), by a mean motion of SGP4
    found = TwoLine(SAMPLE, BELOW, 0)
    assert found.perigee_re * EARTH_RADIUS_KM - 6378.0 == pytest.approx(654.0, abs=10.0)


def test_without_sgp4(monkeypatch: pytest.MonkeyPatch) -> None:
    imported = builtins.__import__

    def missing(name: str, *rest: Any) -> Any:
        if name.partition(".")[0] == "sgp4":
            raise ImportError(name)
        return imported(name, *rest)

    monkeypatch.setattr(builtins, "__import__", missing)
    with pytest.raises(InputError) as caught:
        TwoLine(SAMPLE, BELOW, 0, "a.tle").places_km(np.array([0]))
    assert str(caught.value) == (
        "driftrose: a.tle: two-line elements take sgp4, which is not installed; pip install 'driftrose[orbits]'"
    )
