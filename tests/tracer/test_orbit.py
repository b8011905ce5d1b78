"""Orbits through a run: times, mapping to the equator, pitch angles that reach, and what is said when it cannot be."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import tomli_w
from hypothesis import given, settings
from hypothesis import strategies as st
from tolerances import bound

import tracer
from fields import Dipole, compose
from fields.contract import LineAverages
from fields.errors import InputError
from fields.lines import TracedLines
from tracer import orbit
from tracer.access_plan import Sector, sample_times
from tracer.scenario import Scenario

SM_ROWS = ["time,x_km,y_km,z_km"] + [
    f"2027-03-04T{hour:02d}:00:00Z,{-20000 + 1000 * hour},{3000 * hour + 10000},{500 * hour - 6000}"
    for hour in range(3, 21)
]
TLE = (
    "1 00005U 58002B   00179.78495062  .00000023  00000-0  28098-4 0  4753",
    "2 00005  34.2682 348.7242 1859667 331.7664  19.3264 10.82419157413667",
)


def built(folder: Path, *orbits: dict[str, Any], **changes: Any) -> Scenario:
    tables = {
        "time": {"start": datetime(2027, 3, 4, tzinfo=UTC), "hours": 24.0},
        "magnetic": {"model": "dipole", "b0_nT": 30000.0},
        "access": {"species": "H+", "energy_keV": 10.0, "pitch_deg": 90.0},
        "orbit": list(orbits),
        **changes,
    }
    return tracer.build(tables, base=folder)


def table(folder: Path, rows: list[str], **keys: Any) -> dict[str, Any]:
    (folder / "orbit.csv").write_text("\n".join(rows) + "\n", "utf-8")
    return {"name": "given", "csv": "orbit.csv", "every_min": 30.0, **keys}


ELEMENTS = {
    "epoch": datetime(2027, 3, 4, tzinfo=UTC),
    "a_re": 4.0,
    "e": 0.72,
    "i_deg": 7.0,
    "raan_deg": 0,
    "argp_deg": 180,
    "m_deg": 0,
}


def test_times_of_a_run() -> None:
    start = datetime(2027, 3, 4, tzinfo=UTC)
    stamps, time_h = sample_times(5.0, start, 24.0)
    assert (time_h.size, time_h[0], time_h[-1]) == (289, 0.0, 24.0)
    assert np.all(np.diff(stamps) == 300_000_000)
    backward, hours = sample_times(7.0, start, -1.0)
    assert hours * 60.0 == pytest.approx(np.arange(-56.0, 1.0, 7.0))
    assert backward[-1] == stamps[0]


def test_places_in_sm_map_along_the_dipole(tmp_path: Path) -> None:
    """``r = R / cos^2(latitude)`` and B over B_eq = ``sqrt(4 - 3 cos^2) / cos^6`` of a dipole, in closed form."""
    run = built(tmp_path, table(tmp_path, SM_ROWS, frame="SM"))
    (found,) = orbit.orbits(run)
    assert found.name == "given"
    assert found.time_h == pytest.approx(np.arange(3.0, 20.1, 0.5))  # what the file covers of 0 to 24
    assert found.place_re is not None
    hours = np.arange(3, 21)
    whole = np.stack([-20000 + 1000 * hours, 3000 * hours + 10000, 500 * hours - 6000], axis=1) / 6371.2
    assert found.place_re[::2] == pytest.approx(whole, rel=1e-14)
    distance = np.linalg.norm(found.place_re, axis=1)
    cos2 = 1.0 - (found.place_re[:, 2] / distance) ** 2
    assert found.r_re == pytest.approx(distance / cos2, rel=1e-13)
    assert found.b_ratio == pytest.approx(np.sqrt(4.0 - 3.0 * cos2) / cos2**3, rel=1e-13)
    phi = np.arctan2(found.place_re[:, 1], found.place_re[:, 0])
    assert found.mlt_h == pytest.approx(np.mod(12.0 + phi * 12.0 / np.pi, 24.0), rel=1e-13)
    assert np.array_equal(found.inside, found.r_re <= 10.0)
    assert {bool(inside) for inside in found.inside} == {True, False}
    assert run.origin.remarks == ("orbit given: covers 35 of the run's 49 times, from 3 to 20 h",)


@dataclass(frozen=True, eq=False)
class Traced(Dipole):
    """A dipole whose lines are traced as those of any other model."""

    def lines(self) -> LineAverages:
        return TracedLines(self)


def test_any_other_field_is_traced() -> None:
    places = np.array([[3.0, 1.0, 1.5], [-5.0, 0.1, -1.0], [0.0, 4.0, 0.0]])
    r, phi, ratio = orbit.mapped(compose(Traced(b0_nT=30000.0)), places)
    expected = orbit.mapped(compose(Dipole(b0_nT=30000.0)), places)
    for found, wanted in zip((r, phi, ratio), expected, strict=True):
        assert found == pytest.approx(wanted, rel=bound("traced line"))


def test_a_place_without_an_equator() -> None:
    """On the axis of the dipole: no answer there, and none of the others is lost."""
    places = np.array([[3.0, 0.0, 1.0], [0.0, 0.0, 2.0], [-4.0, 0.0, 0.0]])
    r, phi, ratio = orbit.mapped(compose(Dipole(b0_nT=30000.0)), places)
    assert np.isinf(r).tolist() == [False, True, False]
    assert np.isinf(ratio).tolist() == [False, True, False]
    assert np.isfinite(phi).all()
    assert not orbit.reaches([90.0, 1.0], np.inf).any()
    assert orbit.local_to_equatorial_pitch([90.0, 45.0], np.inf).tolist() == [0.0, 0.0]


@settings(deadline=None)
@given(local=st.floats(1.0, 90.0), ratio=st.floats(1.0, 1e4))
def test_pitch_angles_there_and_back(local: float, ratio: float) -> None:
    equatorial = orbit.local_to_equatorial_pitch(local, ratio)
    assert np.sin(np.radians(equatorial)) ** 2 == pytest.approx(np.sin(np.radians(local)) ** 2 / ratio, rel=1e-12)
    assert orbit.reaches(equatorial * (1.0 - 1e-12), ratio)
    back, there = orbit.equatorial_to_local_pitch(equatorial * (1.0 - 1e-12), ratio)
    assert there
    # near 90 degrees the local pitch angle goes as a root of the equatorial one
    assert back == pytest.approx(local, rel=1e-4 if local > 89.0 else 1e-8)


@settings(deadline=None)
@given(equatorial=st.floats(0.1, 90.0), ratio=st.floats(1.0, 1e4))
def test_who_mirrors_before(equatorial: float, ratio: float) -> None:
    sine2 = np.sin(np.radians(equatorial)) ** 2
    local, there = orbit.equatorial_to_local_pitch(equatorial, ratio)
    if sine2 * ratio < 1.0 - 1e-12:
        assert there
        assert np.sin(np.radians(local)) ** 2 == pytest.approx(sine2 * ratio, rel=1e-9)
    if sine2 * ratio > 1.0 + 1e-12:
        assert not there
        assert local == 90.0


def test_out_of_reach(tmp_path: Path) -> None:
    (found,) = orbit.orbits(built(tmp_path, table(tmp_path, SM_ROWS, frame="SM")))
    pitch = np.array([90.0, 75.0, 5.0])
    mask = found.out_of_reach(pitch)
    assert mask.shape == (3, found.time_h.size)
    assert np.array_equal(mask, np.sin(np.radians(pitch))[:, None] ** 2 > 1.0 / found.b_ratio)
    assert mask[0].sum() > mask[1].sum() > mask[2].sum() == 0


def test_points_of_the_equator_are_on_it(tmp_path: Path) -> None:
    rows = ["time,r_re,mlt_h", "2027-03-04T00:00,4,23", "2027-03-05T00:00,8,1"]
    (found,) = orbit.orbits(built(tmp_path, table(tmp_path, rows)))
    assert found.place_re is None
    assert found.r_re == pytest.approx(4.0 + found.time_h / 6.0)
    assert np.mod(found.mlt_h + 12.0, 24.0) == pytest.approx(11.0 + found.time_h / 12.0)
    assert np.all(found.b_ratio == 1.0)
    assert not found.out_of_reach([90.0, 10.0]).any()


def test_elements_and_a_run_backward(tmp_path: Path) -> None:
    time = {"start": datetime(2027, 3, 5, tzinfo=UTC), "hours": 24.0}
    elements = {"name": "transfer", "elements": ELEMENTS}
    (forward,) = orbit.orbits(built(tmp_path, elements))
    (backward,) = orbit.orbits(built(tmp_path, elements, time={**time, "backward": True}))
    assert backward.time_h == pytest.approx(forward.time_h - 24.0)
    assert backward.r_re == pytest.approx(forward.r_re, rel=1e-9)
    perigee = np.linalg.norm(forward.place_re, axis=1).min()  # type: ignore[arg-type]
    assert perigee == pytest.approx(4.0 * 0.28, abs=0.01)  # at the start of the run


def test_frames_of_a_table_agree(tmp_path: Path) -> None:
    """The same orbit written in each frame."""
    from fields import frames

    stamps, _ = sample_times(60.0, datetime(2027, 3, 4, tzinfo=UTC), 24.0)
    angle = np.linspace(0.0, 3.0, stamps.size)
    sm = 3e4 * np.stack([np.cos(angle), np.sin(angle), 0.3 * np.sin(angle)], axis=1)
    maps = []
    for frame in frames.FRAMES:
        places = frames.from_sm(sm, stamps, frame)
        rows = [
            ",".join([str(stamp.view("datetime64[us]")), *(repr(float(value)) for value in place)])
            for stamp, place in zip(stamps, places, strict=True)
        ]
        given_ = table(tmp_path, ["time,x_km,y_km,z_km", *rows], frame=frame, every_min=60.0)
        (found,) = orbit.orbits(built(tmp_path, given_))
        maps.append(np.stack([found.r_re, found.mlt_h, found.b_ratio]))
    for other in maps[1:]:
        assert other == pytest.approx(maps[0], rel=bound("frame round trip"))


def test_hashes_of_the_files(tmp_path: Path) -> None:
    run = built(tmp_path, table(tmp_path, SM_ROWS, frame="SM"))
    assert run.origin.input_sha256 == {"orbit.csv": hashlib.sha256((tmp_path / "orbit.csv").read_bytes()).hexdigest()}


def test_two_line_elements_far_from_their_epoch(tmp_path: Path) -> None:
    (tmp_path / "old.tle").write_text("\n".join(TLE) + "\n", "ascii")
    run = built(tmp_path, {"name": "old", "tle": "old.tle"})
    (remark,) = run.origin.remarks
    assert remark.startswith("orbit old: two-line elements 9746.2 days from their epoch; SGP4 errs by some 1 to 3 km")
    near = built(tmp_path, {"name": "new", "tle": "old.tle"}, time={"start": datetime(2000, 6, 28), "hours": 24.0})
    assert near.origin.remarks == ()
    (found,) = orbit.orbits(near)
    distance = np.linalg.norm(found.place_re, axis=1) * 6371.2  # type: ignore[arg-type]
    assert 7000.0 < distance.min() < distance.max() < 10300.0  # perigee and apogee of the verification output


def test_into_the_earth_between_rows(tmp_path: Path) -> None:
    rows = ["time,x_km,y_km,z_km", "2027-03-04T00:00,7000,0,0", "2027-03-04T02:00,-7000,10,0"]
    run = built(tmp_path, table(tmp_path, rows, frame="SM"))
    with pytest.raises(InputError) as caught:
        orbit.orbits(run)
    assert str(caught.value) == (
        "driftrose: orbit[1].csv: 0.5493 R_E from the Earth's centre at 2027-03-04T00:30:00Z: inside the Earth; "
        "an orbit outside the Earth"
    )


def test_a_decayed_satellite(tmp_path: Path) -> None:
    path = tmp_path / "run.toml"
    (tmp_path / "low.tle").write_text(
        "1 29141U 85108AA  06170.26783845  .99999999  00000-0  13519-0 0   718\n"
        "2 29141  82.4288 273.4882 0015848 277.2124  83.9133 15.93343074  6828\n"
    )
    tables = {
        "time": {"start": datetime(2006, 6, 19, 12, tzinfo=UTC), "hours": 24.0},
        "magnetic": {"model": "dipole", "b0_nT": 30000.0},
        "access": {"species": "H+", "energy_keV": 10.0, "pitch_deg": 90.0},
        "orbit": [{"name": "low", "tle": "low.tle"}],
    }
    path.write_text(tomli_w.dumps(tables), "utf-8")
    with pytest.raises(InputError, match=r"low.tle: orbit\[1\].tle: SGP4 gives no place at 2006-06-19T1.*decayed"):
        orbit.orbits(tracer.load(path))


def test_sectors() -> None:
    evening = Sector(10.0, 18.0, 6.0)
    assert evening.width_h == 12.0
    assert evening.holds([18.0, 0.0, 6.0, 12.0, 17.99]).tolist() == [True, True, True, False, False]
    whole = Sector(10.0)
    assert whole.width_h == 24.0
    assert whole.holds(np.linspace(0.0, 24.0, 49)).all()
