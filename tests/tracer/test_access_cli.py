"""The command `access` from outside, and what `check` says of it."""

from __future__ import annotations

import csv
import json
import os
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np
import pytest
import tomli_w
from access_runs import ORBITS, bits, tables

import tracer
from tracer import access_run, cli
from tracer.outcomes import Outcome
from tracer.records import CAUTION


class Done(NamedTuple):
    status: int
    out: str
    err: str


Run = Callable[..., Done]


@pytest.fixture
def run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Run:
    """The command in a folder of its own, with storm.toml in it."""
    monkeypatch.chdir(tmp_path)
    written("storm.toml", *ORBITS)

    def call(*arguments: str) -> Done:
        status = cli.main(arguments)
        printed = capsys.readouterr()
        return Done(status, printed.out, printed.err)

    return call


def written(name: str, *orbits: dict[str, Any], **access: Any) -> None:
    given = tables(*orbits, **access)
    given["series"]["kp"]["value"] = list(given["series"]["kp"]["value"])
    Path(name).write_text(tomli_w.dumps(given), "utf-8")


def rows(name: str) -> list[dict[str, str]]:
    with open(name, encoding="utf-8", newline="") as stream:
        assert stream.readline() == f"# {CAUTION}\n"
        return list(csv.DictReader(stream))


def test_from_a_run_file_to_tables(run: Run) -> None:
    done = run("access", "storm.toml")
    assert (done.status, done.err) == (0, "")
    made = sorted(path.name for path in Path().iterdir() if path.name != "storm.toml")
    assert made == [
        "storm.access.boundary.csv",
        "storm.access.exposure.csv",
        "storm.access.h5",
        "storm.access.openings.csv",
        "storm.access.windows.csv",
    ]
    for name in made:
        assert f"wrote {name}" in done.out.splitlines()
    result = tracer.open("storm.access.h5")
    exposure = rows("storm.access.exposure.csv")
    assert len(exposure) == 2 * 2 * 2 * 2
    last = exposure[-1]
    assert (last["orbit"], last["species"], last["energy_keV"], last["pitch_deg"]) == ("far", "e-", "30", "45")
    share = result.exposure["share_open"][1, 1, 1, 1]
    assert float(last["share_open"]) == pytest.approx(share, rel=1e-8)
    utc = np.datetime64("2027-03-04") + np.timedelta64(round(result.exposure["first_open_h"][1, 1, 1, 1] * 3600), "s")
    assert last["first_open_utc"] == f"{utc}Z"
    openings = rows("storm.access.openings.csv")
    assert len(openings) == int(result.boundary["spells"].sum())
    assert {"closed_before_utc", "first_open_utc"} <= set(openings[0])
    assert len(rows("storm.access.boundary.csv")) == result.boundary["innermost_re"].size
    windows = rows("storm.access.windows.csv")
    assert all(float(one["lowest_keV"]) <= float(one["highest_keV"]) for one in windows)
    again = run("access", "storm.toml")
    assert (again.status, again.out) == (2, "")
    assert again.err == (
        "driftrose: storm.access.h5: exists; another name for the output, or --overwrite to replace it\n"
    )
    finished = run("access", "storm.toml", "--resume")
    assert (finished.status, finished.out) == (0, "storm.access.h5: complete already, nothing to resume\n")


def test_json(run: Run) -> None:
    done = run("access", "storm.toml", "-o", "a.h5", "--json", "--threads", "2")
    assert done.status == 0
    told = json.loads(done.out)
    assert told["file"] == "a.h5"
    assert told["tables"] == [f"a.{name}.csv" for name in ("boundary", "openings", "windows", "exposure")]
    assert told["disk_bytes"] == Path("a.h5").stat().st_size
    result = tracer.open("a.h5")
    counts = np.bincount(result.access["region"].ravel(), minlength=len(Outcome))
    for orbit in result.orbits:
        counts += np.bincount(orbit.access["region"].ravel(), minlength=len(Outcome))
    assert told["found"] == {o.word: int(counts[o]) for o in Outcome if counts[o]}
    assert told["targets"] == counts.sum()
    assert told["end_error_re"]["99"] <= told["tolerance_re"] == 1e-6
    assert [one["species"] for one in told["innermost"]] == ["H+", "e-"]
    assert told["innermost"][0]["r_re"] == np.nanmin(result.boundary["innermost_re"][0])
    assert [(one["orbit"], one["species"]) for one in told["orbits"]] == [
        (orbit, species) for orbit in ("transfer", "far") for species in ("H+", "e-")
    ]


def test_quiet_says_nothing(run: Run) -> None:
    assert run("access", "storm.toml", "--quiet") == Done(0, "", "")


def test_check_foretells_it(run: Run) -> None:
    told = json.loads(run("check", "storm.toml", "--json").out)["access"]
    result = tracer.access(tracer.load("storm.toml"), "storm.access.h5")
    assert told["targets"] == result.access["region"].size + sum(o.access["region"].size for o in result.orbits)
    assert told["traced"] == result.work["traced"]
    assert told["map"] == {"species": 2, "time": 2, "energy": 2, "pitch": 2, "r": 3, "mlt": 8}
    assert told["back_hours"] == 12.0
    assert [orbit["name"] for orbit in told["orbits"]] == ["transfer", "far"]
    assert told["orbits"][0]["times"] == result.orbits[0].time_h.size
    reach = result.exposure["share_in_reach"][1, 0, 0]
    assert list(told["orbits"][1]["share_in_reach"].values()) == pytest.approx(list(reach))
    assert told["seconds"] > 0.0
    assert Path("storm.access.h5").stat().st_size < told["disk_bytes"] < 10 * Path("storm.access.h5").stat().st_size
    text = run("check", "storm.toml").out
    assert f"access: {told['targets']} targets" in text
    assert "orbit far: " in text


def test_what_cannot_be_asked(run: Run) -> None:
    given = tables()
    del given["access"]
    population = {"species": "e-", "count": 5, "r_re": 6.6, "mlt_h": 0.0, "energy_keV": 10.0, "pitch_deg": 90.0}
    given["population"] = [population]
    given["series"]["kp"]["value"] = list(given["series"]["kp"]["value"])
    Path("none.toml").write_text(tomli_w.dumps(given), "utf-8")
    assert run("access", "none.toml") == Done(2, "", "driftrose: none.toml: access: missing; a table [access]\n")
    written("sunk.toml", {**ORBITS[0], "elements": {**ORBITS[0]["elements"], "a_re": 2.0}})
    for command in ("access", "check"):
        done = run(command, "sunk.toml")
        assert (done.status, done.out, done.err.count("\n")) == (2, "", 1)
        assert done.err.startswith("driftrose: sunk.toml: orbit[1].elements")
    done = run("access", "storm.toml", "-o", "nowhere/a.h5")
    assert (done.status, done.err) == (
        2,
        "driftrose: nowhere/a.h5: the directory nowhere does not exist; an existing directory\n",
    )
    assert sorted(path.name for path in Path().iterdir()) == ["none.toml", "storm.toml", "sunk.toml"]


def test_ctrl_c(run: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    def told(*_: Any) -> None:
        os.kill(os.getpid(), signal.SIGTERM)

    with monkeypatch.context() as patched:
        patched.setattr(access_run, "pilot", told)
        done = run("access", "storm.toml")
    assert done.status == 3
    assert "stopped after 0 of" in done.err
    assert done.err.count("\n") == 1
    assert run("access", "storm.toml", "--resume", "--quiet").status == 0


def test_a_signal_stops_a_long_run_which_then_goes_on(run: Run, tmp_path: Path) -> None:
    mlt_h = {"from": 0.0, "to": 24.0, "n": 96}
    written("long.toml", r_re={"from": 1.5, "to": 9.5, "n": 60}, mlt_h=mlt_h, time_h=[12.0, 18.0, 24.0])
    command = [sys.executable, "-m", "tracer", "access", "long.toml", "--threads", "1"]
    with subprocess.Popen(command, cwd=tmp_path, stderr=subprocess.PIPE, text=True) as process:
        log = Path("long.access.h5.part.log")
        while process.poll() is None and (not log.exists() or log.read_bytes().rstrip(b"\0").count(b"\n") < 3):
            time.sleep(0.01)
        process.send_signal(signal.SIGTERM)
        _, err = process.communicate(timeout=30)
    assert process.returncode == 3, err
    assert "long.access.h5.part keeps them; the same command with --resume goes on" in err
    assert not Path("long.access.h5").exists()
    assert run("access", "long.toml", "--resume", "--quiet") == Done(0, "", "")
    Path("other").mkdir()
    shutil.copy("long.toml", "other")
    for path in Path().glob("long.access.*"):
        shutil.move(path, "other")
    found = bits(Path("other/long.access.h5"))
    shutil.rmtree("other")
    assert run("access", "long.toml", "--quiet") == Done(0, "", "")
    assert bits(Path("long.access.h5")) == found


def test_a_file_in_place_of_the_run(run: Run) -> None:
    assert run("access", "storm.toml", "--quiet").status == 0
    done = run("access", "storm.access.h5")
    assert (done.status, done.out, done.err.count("\n")) == (2, "", 1)
    done = run("trace", "storm.access.h5")
    assert (done.status, done.out, done.err.count("\n")) == (2, "", 1)


def test_figures_of_a_file(run: Run) -> None:
    assert run("access", "storm.toml", "--quiet").status == 0
    done = run("draw", "storm.access.h5")
    assert (done.status, done.err) == (0, "")
    assert all(Path(line.removeprefix("wrote ")).stat().st_size > 10_000 for line in done.out.splitlines())


def test_the_shipped_scenario(run: Run) -> None:
    assert run("new", "mine.toml", "--like", "access").status == 0
    told = json.loads(run("access", "mine.toml", "--json").out)
    assert {"open", "before_record", "out_of_reach"} <= set(told["found"])
    assert {one["orbit"] for one in told["orbits"]} == {"transfer"}
