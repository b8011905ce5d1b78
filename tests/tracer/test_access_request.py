"""What a run file asks about access, as the scenario holds it."""

from __future__ import annotations

import pickle
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from oem_messages import HEADER, block, state_lines

import tracer
from tracer import cli
from tracer.access_plan import AccessRequest, Sector
from tracer.ephemeris.elements import Elements
from tracer.ephemeris.sampled import Ephemeris
from tracer.scenario import SPECIES, Species
from tracer.worker import packed

RUN = Path(__file__).parents[1] / "data" / "access" / "run.toml"
POPULATION = {"species": "e-", "count": 5, "r_re": 6.6, "mlt_h": 0.0, "energy_keV": 10.0, "pitch_deg": 90.0}


def tables(**access: Any) -> dict[str, Any]:
    usual = {"species": "H+", "energy_keV": 10.0, "pitch_deg": 90.0, "r_re": 4.0, "mlt_h": 0.0, "time_h": 1.0}
    return {
        "time": {"start": datetime(2027, 3, 4, tzinfo=UTC), "hours": 6.0},
        "magnetic": {"model": "dipole", "b0_nT": 30000.0},
        "access": {key: value for key, value in {**usual, **access}.items() if value is not None},
    }


def asked(**access: Any) -> AccessRequest:
    found = tracer.build(tables(**access)).access
    assert found is not None
    return found


def test_a_run_file() -> None:
    run = tracer.load(RUN)
    assert run.populations == ()
    assert run.access is not None
    assert [species.name for species in run.access.species] == ["H+", "e-"]
    assert run.access.energy_keV.tolist() == [1.0, 10.0, 100.0]
    assert run.access.pitch_deg.tolist() == [90.0, 45.0]
    assert run.access.r_re == pytest.approx(np.arange(1.5, 10.1, 0.5))
    assert run.access.mlt_h == pytest.approx(np.arange(24.0))  # the ends of the circle are one place
    assert run.access.time_h.tolist() == [6.0, 12.0, 24.0]
    assert (run.access.back_hours, run.access.source) == (24.0, Sector(10.0, 18.0, 6.0))
    assert run.access.has_map
    assert [(orbit.name, orbit.every_min, orbit.key) for orbit in run.orbits] == [
        ("transfer", 5.0, "orbit[1].elements"),
        ("given", 60.0, "orbit[2].csv"),
    ]
    epoch = int(np.datetime64("2027-03-04", "us").astype(np.int64))
    assert run.orbits[0].source == Elements(epoch, 4.0, 0.72, 7.0, 0.0, 180.0, 0.0)
    assert isinstance(run.orbits[1].source, Ephemeris)


def test_defaults_and_the_order_of_the_file() -> None:
    found = asked(energy_keV=[30, 1, 10], pitch_deg=[45, 90], mlt_h=[23.0, 3.0], r_re=[6.0, 4.0])
    assert found.energy_keV.tolist() == [30.0, 1.0, 10.0]
    assert (found.pitch_deg.tolist(), found.mlt_h.tolist()) == ([45.0, 90.0], [23.0, 3.0])
    assert found.r_re.tolist() == [6.0, 4.0]
    assert found.source == Sector(10.0, 0.0, 24.0)
    assert found.back_hours == 24.0
    assert found.species == (SPECIES["H+"],)
    with pytest.raises(ValueError, match="read-only"):
        found.energy_keV[0] = 1.0


def test_ranges_are_those_of_grids() -> None:
    found = asked(
        energy_keV={"from": 1.0, "to": 100.0, "n": 3, "spacing": "log"},
        mlt_h={"from": 22.0, "to": 2.0, "n": 5},
        time_h={"from": 0.0, "to": 6.0, "n": 7},
    )
    assert found.energy_keV == pytest.approx([1.0, 10.0, 100.0])
    assert found.mlt_h == pytest.approx([22.0, 23.0, 0.0, 1.0, 2.0])
    assert found.time_h == pytest.approx(np.arange(7.0))


def test_cold_plasma() -> None:
    assert asked(energy_keV=0.0).energy_keV.tolist() == [0.0]


def test_a_species_of_ones_own() -> None:
    found = asked(species=["e-", {"mass_u": 14.0, "charge": 2}])
    assert found.species[0] == SPECIES["e-"]
    assert isinstance(found.species[1], Species)
    assert (found.species[1].name, found.species[1].charge_e) == ("14u2+", 2)


def test_orbits_take_no_map() -> None:
    elements = {
        "epoch": datetime(2027, 3, 4),
        "a_re": 6.6,
        "e": 0.0,
        "i_deg": 0,
        "raan_deg": 0,
        "argp_deg": 0,
        "m_deg": 0,
    }
    given_ = tables(r_re=None, mlt_h=None, time_h=None)
    run = tracer.build({**given_, "orbit": [{"name": "one", "elements": elements}]})
    assert run.access is not None
    assert not run.access.has_map
    assert run.access.time_h.size == 0


def test_a_run_backward() -> None:
    given_ = tables(time_h=[-6.0, -1.0])
    given_["time"]["backward"] = True
    run = tracer.build(given_)
    assert run.access is not None
    assert run.access.time_h.tolist() == [-6.0, -1.0]


def test_populations_may_stand_beside() -> None:
    run = tracer.build({**tables(), "population": [POPULATION]})
    assert run.count == 5
    assert run.access is not None
    assert tracer.build({**tables(), "access": None, "population": [POPULATION]}).access is None


def test_orbits_without_access_are_told(tmp_path: Path) -> None:
    (tmp_path / "orbit.csv").write_text(FILES["orbit.csv"], "utf-8")
    orbit = {"name": "one", "csv": "orbit.csv", "frame": "GEO"}
    run = tracer.build({**tables(), "access": None, "population": [POPULATION], "orbit": [orbit]}, base=tmp_path)
    assert run.origin.remarks == ("orbit one is used by [access] only",)


def test_what_is_built_can_be_written_and_read() -> None:
    import tomllib

    run = tracer.build(tables(energy_keV=np.array([1.0, 2.0])))
    again = tracer.build(tomllib.loads(run.origin.text))
    assert again.access is not None
    assert run.access is not None
    assert np.array_equal(again.access.energy_keV, run.access.energy_keV)


def test_it_travels_to_workers() -> None:
    run = tracer.load(RUN)
    there = pickle.loads(packed(run))
    assert run.access is not None
    assert np.array_equal(there.access.r_re, run.access.r_re)
    assert there.orbits[0].source == run.orbits[0].source


def test_there_is_nothing_to_trace(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    out = tmp_path / "out.h5"
    assert cli.main(["trace", str(RUN), "-o", str(out)]) == 2
    said = capsys.readouterr().err
    assert said == f"driftrose: {RUN}: population: nothing to trace; at least one [[population]]\n"
    assert list(tmp_path.iterdir()) == []


def test_it_can_be_checked() -> None:
    found = tracer.check(tracer.load(RUN))
    assert (found["particles"], found["populations"], found["work"], found["disk_bytes"]) == (0, [], {}, 0)
    assert cli.main(["check", str(RUN)]) == 0


FILES = {
    "orbit.csv": (RUN.parent / "orbit.csv").read_text("utf-8"),
    "orbit.oem": HEADER + block(state_lines(0.0, 60.0, 10.0), REF_FRAME="GCRF"),
    "orbit.tle": "1 00005U 58002B   27063.50000000  .00000023  00000-0  28098-4 0  4758\n"
    "2 00005  34.2682 348.7242 1859667 331.7664  19.3264 10.82419157413667\n",
}


@settings(max_examples=150, deadline=None)
@given(data=st.data(), name=st.sampled_from(sorted(FILES)))
def test_damaged_orbit_files(data: st.DataObject, name: str, tmp_path_factory: pytest.TempPathFactory) -> None:
    """Read, or refused in one line."""
    raw = bytearray(FILES[name].encode())
    for _ in range(data.draw(st.integers(1, 5))):
        start = data.draw(st.integers(0, len(raw)))
        raw[start : start + data.draw(st.integers(0, 3))] = data.draw(
            st.binary(max_size=3) | st.sampled_from([b"9", b"\n"])
        )
    folder = tmp_path_factory.mktemp("damaged")
    (folder / name).write_bytes(raw)
    kind = name.removeprefix("orbit.")
    orbit = {"name": "one", kind: name, **({"frame": "GEO"} if kind == "csv" else {})}
    try:
        run = tracer.build({**tables(), "orbit": [orbit]}, base=folder)
    except tracer.InputError as error:
        line = str(error)
        assert len(line.splitlines()) == 1
        assert line.startswith("driftrose: ")
        assert line.isprintable()
        return
    assert run.origin.input_sha256.keys() == {name}


def test_whole_orbit_files(tmp_path: Path) -> None:
    """The property above is not met by refusing everything."""
    for name, text in FILES.items():
        (tmp_path / name).write_text(text, "utf-8")
    orbits = [
        {"name": "a", "csv": "orbit.csv", "frame": "GEO"},
        {"name": "b", "oem": "orbit.oem"},
        {"name": "c", "tle": "orbit.tle"},
    ]
    run = tracer.build({**tables(), "orbit": orbits}, base=tmp_path)
    assert len(run.orbits) == len(run.origin.input_sha256) == 3
    assert run.origin.remarks == ("orbit b: covers 13 of the run's 73 times, from 0 to 1 h",)
