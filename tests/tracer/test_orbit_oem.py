"""Orbit ephemeris messages written in the test as CCSDS 502.0-B (Orbit Data Messages) lays them down."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from oem_messages import GTO, HEADER, block, state_lines

from fields.clock import array_micros
from fields.errors import InputError
from tracer.ephemeris.oem import epoch, read_oem


def written(folder: Path, *blocks: str, header: str = HEADER) -> Path:
    path = folder / "message.oem"
    path.write_text("\n".join([header, *blocks]), "utf-8")
    return path


def refused(folder: Path, *blocks: str, header: str = HEADER) -> str:
    path = written(folder, *blocks, header=header)
    with pytest.raises(InputError) as caught:
        read_oem(path)
    return str(caught.value).replace(f"driftrose: {path}: ", "")


@pytest.mark.parametrize(
    ("method", "degree", "most_km"),
    [("HERMITE", "7", 2e-4), ("LAGRANGE", "9", 2e-3), ("LAGRANGE", "5", 1.0), (None, None, 2e-4)],
)
def test_a_transfer_orbit(method: str | None, degree: str | None, most_km: float, tmp_path: Path) -> None:
    """Nine hours every five minutes: beyond 15000 km the message gives back the orbit that it was made from."""
    lines = state_lines(0.0, 540.0, 5.0)
    orbit = read_oem(written(tmp_path, block(lines, INTERPOLATION=method, INTERPOLATION_DEGREE=degree)))
    stamps = GTO.epoch + np.arange(0, 540 * 60_000_000, 37_000_000)
    assert orbit.covered(stamps).all()
    (piece,) = orbit.pieces(stamps)
    assert piece.frame == "TEME"
    true = next(GTO.pieces(stamps)).places_km
    off = np.linalg.norm(piece.places_km - true, axis=1)
    assert 0.0 < off[np.linalg.norm(true, axis=1) > 15000.0].max() < most_km


def test_linear(tmp_path: Path) -> None:
    lines = state_lines(0.0, 60.0, 10.0)
    (segment,) = read_oem(written(tmp_path, block(lines, INTERPOLATION="LINEAR", INTERPOLATION_DEGREE="1"))).segments
    middle = (segment.times[3] + segment.times[4]) // 2
    expected = segment.places_km[3:5].mean(axis=0)
    assert segment.at(np.array([middle]))[0] == pytest.approx(expected, rel=1e-12)


def test_segments_frames_and_useable_times(tmp_path: Path) -> None:
    early, late = state_lines(0.0, 60.0, 5.0), state_lines(50.0, 120.0, 5.0, by_day=True)
    useable = {"USEABLE_START_TIME": "2027-03-04T00:10:00", "USEABLE_STOP_TIME": "2027-063T00:55:00"}
    path = written(
        tmp_path,
        block(early, REF_FRAME="EME2000", **useable),
        "COMMENT to be passed over\nCOVARIANCE_START\nEPOCH = 2027-03-04T00:00:00\n1.0\nCOVARIANCE_STOP",
        block(late, REF_FRAME="ITRF2000", CENTER_NAME="Earth"),
    )
    orbit = read_oem(path)
    assert [segment.frame for segment in orbit.segments] == ["GCRS", "ITRF"]
    stamps = GTO.epoch + np.array([5, 10, 55, 60, 120, 121]) * 60_000_000
    assert orbit.covered(stamps).tolist() == [False, True, True, True, True, False]
    frames = {int(row): piece.frame for piece in orbit.pieces(stamps) for row in piece.rows}
    assert frames == {1: "GCRS", 2: "GCRS", 3: "ITRF", 4: "ITRF"}
    assert len(orbit.sha256) == 64


def test_states_with_accelerations(tmp_path: Path) -> None:
    plain = state_lines(0.0, 60.0, 5.0)
    path = written(tmp_path, block([f"{line} 0.0 0.0 -0.001" for line in plain]))
    assert np.array_equal(
        read_oem(path).segments[0].places_km, read_oem(written(tmp_path, block(plain))).segments[0].places_km
    )


@pytest.mark.parametrize(
    ("text", "utc"),
    [
        ("2027-03-04T01:02:03.5", "2027-03-04T01:02:03.5"),
        ("2027-063T01:02:03.5Z", "2027-03-04T01:02:03.5"),
        ("2024-366T00:00:00", "2024-12-31"),
        ("2027-03-04T01:02:03.123456789", "2027-03-04T01:02:03.123456"),
    ],
)
def test_epochs(text: str, utc: str) -> None:
    assert epoch(text) == array_micros(utc, "time")


@pytest.mark.parametrize("text", ["2027-366T00:00:00", "2027-000T00:00:00", "2027-03-04T24:10:00", "noon", "2027-063"])
def test_no_epochs(text: str) -> None:
    assert epoch(text) is None


STATES = state_lines(0.0, 30.0, 10.0)
INSIDE = STATES[0].split()[0] + " 1000.0 2000.0 3000.0 1.0 1.0 1.0"


@pytest.mark.parametrize(
    ("text", "said"),
    [
        (
            block(STATES, REF_FRAME=None),
            "line 6: metadata without REF_FRAME; REF_FRAME = EME2000 between META_START and META_STOP",
        ),
        (
            block(STATES, START_TIME=None),
            "line 6: metadata without START_TIME; START_TIME = 2027-03-04T00:00:00 between META_START and META_STOP",
        ),
        (
            block(STATES, TIME_SYSTEM=None),
            "line 6: metadata without TIME_SYSTEM; TIME_SYSTEM = UTC between META_START and META_STOP",
        ),
        (
            block(STATES, TIME_SYSTEM="TAI"),
            'line 11 = "TIME_SYSTEM = TAI": another time system than UTC; TIME_SYSTEM = UTC',
        ),
        (
            block(STATES, CENTER_NAME="MOON"),
            'line 9 = "CENTER_NAME = MOON": another centre than the Earth; CENTER_NAME = EARTH',
        ),
        (
            block(STATES, REF_FRAME="MCI"),
            'line 10 = "REF_FRAME = MCI": not a frame that is read here; '
            "one of GCRF, ICRF, EME2000, TEME, ITRF2000 or another ITRF",
        ),
        (
            block(STATES, STOP_TIME="tomorrow"),
            'line 13 = "STOP_TIME = tomorrow": not a time; such as 2027-03-04T00:00:00.000',
        ),
        (
            block(STATES, STOP_TIME="2027-03-04T00:25:00"),
            'line 21 = "2027-03-04T00:30:00Z": state outside START_TIME to STOP_TIME (2027-03-04T00:25:00Z); '
            "states between the two",
        ),
        (
            block(STATES, USEABLE_START_TIME="2027-03-05T00:00:00"),
            "line 6: no state in the useable times; times that the states span",
        ),
        (
            block(STATES, INTERPOLATION="SPLINE"),
            'line 14 = "INTERPOLATION = SPLINE": unknown; one of HERMITE, LAGRANGE, LINEAR',
        ),
        (
            block(STATES, INTERPOLATION_DEGREE=None),
            'line 14 = "INTERPOLATION = HERMITE": without INTERPOLATION_DEGREE; for example INTERPOLATION_DEGREE = 7',
        ),
        (
            block(STATES, INTERPOLATION_DEGREE="9"),
            'line 15 = "INTERPOLATION_DEGREE = 9": takes 5 states, the segment has 4; a lower degree',
        ),
        (
            block(STATES, INTERPOLATION_DEGREE="0"),
            'line 15 = "INTERPOLATION_DEGREE = 0": not a degree; a whole number from 1 to 31',
        ),
        (block([]), "line 16: 0 states below; two or more a segment"),
        (
            block(STATES[:2] + STATES[1:]),
            'line 20 = "2027-03-04T00:10:00Z": this time stands twice (line 19); one row for each time',
        ),
        (
            block(STATES, END="x").replace("END = x", "END"),
            'line 16 = "END": not KEYWORD = value; such as REF_FRAME = EME2000',
        ),
        (
            block([INSIDE, *STATES[1:]]),
            "line 18: 0.5873 R_E from the Earth's centre: inside the Earth; positions in km, outside the Earth",
        ),
        (
            block([*STATES, "1.0 2.0 3.0 4.0 5.0 6.0 7.0"]),
            'line 22 = "1.0": not a time; a state with its epoch: 2027-03-04T00:00:00.000',
        ),
        (
            block([*STATES, "2027-03-04T01:00:00 1.0 2.0"]),
            'line 22 = "2027-03-04T01:00:00 1.0 2.0": not a state; '
            "position in km and velocity in km/s: six numbers, or nine with acceleration",
        ),
        (
            block([]).replace("META_STOP\n", ""),
            "META_START without its META_STOP; a CCSDS orbit ephemeris message (OEM) in its text form",
        ),
        ("META_STOP", 'line 6 = "META_STOP": out of place; each START with its STOP after it'),
        ("", "holds no META_START; metadata and states"),
    ],
)
def test_damaged_messages(text: str, said: str, tmp_path: Path) -> None:
    assert refused(tmp_path, text) == said


def test_another_kind_of_file(tmp_path: Path) -> None:
    said = refused(tmp_path, header="<?xml version='1.0'?>")
    assert said == (
        "line 1 = \"<?xml version='1.0'?>\": not an orbit ephemeris message; "
        "a CCSDS orbit ephemeris message (OEM) in its text form: CCSDS_OEM_VERS = 2.0 on its first line"
    )
    with pytest.raises(InputError, match=r'oem = "none.oem": no such file; a path relative to the run file'):
        read_oem(tmp_path / "none.oem", file="none.oem")
