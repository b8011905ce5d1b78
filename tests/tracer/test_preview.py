"""What `check` foretells, against what the run takes. How true its times are, scripts/bench_forecast.py says."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from small_runs import number, population, span
from storm_runs import steady, storm, storm_field

import tracer
from tracer import preview
from tracer.scenario import Output
from tracer.templates import new_runfile

RUN = storm(
    population(count=600),
    population("cold", "O+", draw="grid", r_re=span(3.0, 6.0, n=4), mlt_h=number(0.0), energy_keV=number(0.0),
               pitch_deg=number(90.0), count=4),
    title="Invented storm",
)  # fmt: skip


def test_foretold_disk_and_work_are_those_of_the_run(tmp_path: Path) -> None:
    found = tracer.check(RUN, threads=1)
    result = tracer.trace(RUN, tmp_path / "out.h5", threads=1)
    assert found["disk_bytes"] == pytest.approx((tmp_path / "out.h5").stat().st_size, rel=0.01)
    steps = (result.work["accepted"] + result.work["rejected"]) / RUN.count
    work = found["work"]
    assert work["steps_per_particle"] == pytest.approx(steps, rel=0.15)
    assert work["right_hand_sides"] == pytest.approx(12.0 * work["steps_per_particle"] * RUN.count)
    assert work["local_tolerance_re"] == result.attrs["local_tolerance_re"]
    assert work["seconds"] > 0.0


SIZES = ((500, 1.0, 0.0), (150_000, 0.5, 0.0), (8192, 1.0, 0.06))  # particles, hours, minutes between saved times


def told(*arguments: str, folder: Path) -> Any:
    """What the command, in a process of its own, says of itself."""
    command = [sys.executable, "-m", "tracer", *arguments, "--json"]
    env = {**os.environ, "PYTHONPATH": str(Path(tracer.__file__).parents[1])}
    done = subprocess.run(command, cwd=folder, env=env, capture_output=True, text=True, check=True)
    return json.loads(done.stdout)


def test_memory_and_disk_of_three_sizes_are_foretold(tmp_path: Path) -> None:
    path = tmp_path / "storm.toml"
    new_runfile(path)
    text = path.read_text("utf-8").replace('tracks = "double"', 'tracks = "single"')
    told("check", "storm.toml", folder=tmp_path)  # compiles, if nobody has
    memory, disk = [], []
    for count, hours, every_min in SIZES:
        for key, value in (("count", count), ("hours", hours), ("every_min", every_min)):
            line = next(line for line in text.splitlines() if line.startswith(f"{key} = "))
            text = text.replace(line, f"{key} = {value}")
        path.write_text(text, "utf-8")
        foretold = told("check", "storm.toml", folder=tmp_path)
        taken = told("trace", "storm.toml", "--overwrite", folder=tmp_path)
        assert taken["disk_bytes"] == (tmp_path / "storm.h5").stat().st_size
        memory.append((foretold["memory_bytes"], taken["memory_bytes"]))
        disk.append((foretold["disk_bytes"], taken["disk_bytes"]))
    assert memory[2][1] > 1.5 * memory[0][1]  # so that no single number would do for all
    assert disk[2][1] > 3.0 * disk[1][1] > 9.0 * disk[0][1]
    np.testing.assert_allclose(*np.transpose(memory), rtol=0.25)
    np.testing.assert_allclose(*np.transpose(disk), rtol=0.01)


def test_what_is_computed() -> None:
    found = tracer.check(RUN)
    assert (found["title"], found["start"], found["end_h"]) == ("Invented storm", "2027-03-04T00:00:00Z", 12.0)
    assert found["particles"] == 604
    assert found["saved_times"] == 17
    assert found["field"]["magnetic"] == {"model": "dipole", "b0_nT": 30000.0}
    assert [model["model"] for model in found["field"]["electric"]] == ["corotation", "volland-stern"]
    protons, cold = found["populations"]
    assert (protons["name"], protons["species"], protons["count"], protons["draw"], protons["seed"]) == (
        "protons", "H+", 600, "sobol", 7,
    )  # fmt: skip
    assert cold["periods_s"] == {"gyro": None, "bounce": None, "drift": None}
    assert cold["validity"] == []


def test_periods_bound_those_of_the_population() -> None:
    fixed = population(count=5, r_re=number(6.0), mlt_h=number(0.0), energy_keV=number(50.0), pitch_deg=number(60.0))
    (found,) = tracer.check(storm(fixed))["populations"]
    want = tracer.periods(RUN.field, "H+", 50.0, 60.0, 6.0, 0.0)
    for name, value in (("gyro", want.gyro_s), ("bounce", want.bounce_s), ("drift", want.drift_s)):
        assert found["periods_s"][name] == pytest.approx([float(value)] * 3)
    wide = tracer.check(RUN)["populations"][0]["periods_s"]
    for least, median, most in wide.values():
        assert 0.0 < least < median < most


def test_warnings_and_validity_are_told() -> None:
    run = storm(population(count=20), field=storm_field(steady(8.8)))
    found = tracer.check(run)
    assert len(found["warnings"]) == 1
    assert "Kp up to 8.8" in found["warnings"][0]
    names = [ratio["name"] for ratio in found["populations"][0]["validity"]]
    assert names[0] == "gyroradius / curvature radius"
    assert len(names) == 4


def test_memory_grows_with_the_tracks_and_the_threads(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(preview, "_work", lambda *_: {})  # what takes time, and is not looked at here

    def memory(every_min: float, threads: int) -> int:
        run = storm(population(count=10**6), output=Output(every_min=every_min))
        return int(tracer.check(run, threads)["memory_bytes"])

    assert memory(0.0, 1) < memory(5.0, 1) < memory(0.5, 1)
    assert memory(0.5, 1) < memory(0.5, 8)
    assert memory(0.0, 1) > 10**8  # the interpreter and its libraries alone


def test_all_is_plain() -> None:
    found = tracer.check(RUN)
    assert json.loads(json.dumps(found, allow_nan=False)) == found


def test_nothing_is_written(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    tracer.check(storm(population(count=3)))
    assert list(tmp_path.iterdir()) == []


def test_many_particles_cost_no_more_to_look_at() -> None:
    # a hundred million: nothing of their number may be held
    found = tracer.check(storm(population(count=10**8), output=Output(every_min=0.0)))
    assert found["particles"] == 10**8
    assert found["disk_bytes"] > 10**10
    assert np.isfinite(found["work"]["seconds"])
