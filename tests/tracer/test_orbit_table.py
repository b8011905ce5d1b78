"""Orbits in CSV files: both kinds of columns, and what may be wrong with them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from fields.clock import array_micros
from fields.errors import InputError
from tracer.ephemeris.sampled import Ephemeris, EquatorialTable
from tracer.ephemeris.table import read_table

PLACES = """# invented
Time, X_km, y_km, z_km, comment
2027-03-04T00:00:00Z, 42164, 0, 0, start
2027-03-04T06:00:00, 0, 42164, 0,

2027-03-04T12:00:00+00:00, -42164, 0, 100.5, noon
"""
EQUATOR = "time;r_re;mlt_h\n2027-03-04T00:00;4.0;23.0\n2027-03-04T02:00;5.0;1.0\n"


def written(folder: Path, text: str) -> Path:
    path = folder / "orbit.csv"
    path.write_text(text, "utf-8")
    return path


def refused(folder: Path, text: str, frame: str | None = "GEO") -> str:
    path = written(folder, text)
    with pytest.raises(InputError) as caught:
        read_table(path, frame, file="orbit.csv", key="orbit[1].csv")
    return str(caught.value).removeprefix("driftrose: ")


def test_places(tmp_path: Path) -> None:
    orbit = read_table(written(tmp_path, PLACES), "GEO", file="orbit.csv")
    assert isinstance(orbit, Ephemeris)
    (segment,) = orbit.segments
    assert (segment.frame, segment.points, segment.velocities_km_s) == ("GEO", 3, None)
    stamps = array_micros(np.array(["2027-03-04T00", "2027-03-04T06", "2027-03-04T12"], "datetime64[us]"), "time")
    assert np.array_equal(segment.times, stamps)
    assert segment.places_km.tolist() == [[42164.0, 0.0, 0.0], [0.0, 42164.0, 0.0], [-42164.0, 0.0, 100.5]]
    assert orbit.cover == (stamps[0], stamps[-1])
    assert (orbit.file, len(orbit.sha256)) == ("orbit.csv", 64)


def test_points_of_the_equator(tmp_path: Path) -> None:
    orbit = read_table(written(tmp_path, EQUATOR), None)
    assert isinstance(orbit, EquatorialTable)
    assert (orbit.r_re.tolist(), orbit.mlt_h.tolist()) == ([4.0, 5.0], [23.0, 1.0])


@pytest.mark.parametrize(
    ("text", "frame", "said"),
    [
        (PLACES, None, "orbit[1].frame: missing: orbit.csv holds x_km, y_km, z_km; one of SM, GEO, ITRF, GCRS, TEME"),
        (
            EQUATOR,
            "SM",
            'orbit[1].frame = "SM": orbit.csv holds points of the magnetic equator; no frame beside r_re and mlt_h',
        ),
        (
            PLACES.replace("X_km", "x_m"),
            "GEO",
            'orbit.csv: line 2 = "Time,x_m,y_km,z_km,comment": not the columns of an orbit; '
            "a header with time,x_km,y_km,z_km or time,r_re,mlt_h",
        ),
        (
            PLACES.replace("comment", "z_km"),
            "GEO",
            'orbit.csv: line 2 = "Time,X_km,y_km,z_km,z_km": two columns called z_km; one of each name',
        ),
        (PLACES.replace("42164, 0, 0, start", "42164, 0, 0"), "GEO", "orbit.csv: line 3: 4 cells; 5, as in the header"),
        (
            PLACES.replace("2027-03-04T06:00:00", "six"),
            "GEO",
            'orbit.csv: line 4 = "six": not a time; ISO 8601 in UTC, as 2027-03-04T03:00:00Z',
        ),
        (
            PLACES.replace("2027-03-04T06:00:00", "2027-03-04T00:00:00"),
            "GEO",
            'orbit.csv: line 4 = "2027-03-04T00:00:00Z": this time stands twice (line 3); one row for each time',
        ),
        (
            PLACES.replace("100.5", "nan"),
            "GEO",
            'orbit.csv: line 6 = "nan": z_km is not a finite number; a number such as 4.5',
        ),
        (
            PLACES.replace("0, 42164, 0,", "0, 4.2164, 0,"),
            "GEO",
            "orbit.csv: line 4: 0.0006618 R_E from the Earth's centre: inside the Earth; "
            "places in km, outside the Earth",
        ),
        (
            EQUATOR.replace("4.0", "0.9"),
            None,
            'orbit.csv: line 2 = "r_re 0.9": inside the Earth; distances from 1 R_E',
        ),
        (
            EQUATOR.replace("23.0", "24.5"),
            None,
            'orbit.csv: line 2 = "mlt_h 24.5": not a local time; hours from 0 to 24',
        ),
        (
            "time,r_re,mlt_h\n2027-03-04T00:00,4,5\n",
            None,
            "orbit.csv: too few rows: 1; two or more under the header",
        ),
        (
            "# nothing\n",
            None,
            'orbit.csv: line 1 = "": not the columns of an orbit; a header with time,x_km,y_km,z_km or time,r_re,mlt_h',
        ),
        (
            "",
            None,
            "orbit.csv: empty file; a CSV with the columns time,x_km,y_km,z_km or time,r_re,mlt_h",
        ),
    ],
)
def test_damaged_tables(text: str, frame: str | None, said: str, tmp_path: Path) -> None:
    assert refused(tmp_path, text, frame) == said
