"""The command from outside: exit status, what goes to which stream, files written and left alone."""

from __future__ import annotations

import json
import os
import shutil
import signal
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any, NamedTuple, NoReturn

import h5py
import numpy as np
import pytest

import tracer
from tracer import cli, pipeline
from tracer.records import CAUTION, Result
from tracer.scenario import Scenario
from tracer.status import Cause
from tracer.store import expected_bytes


class Done(NamedTuple):
    status: int
    out: str
    err: str


Run = Callable[..., Done]


@pytest.fixture
def run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Run:
    """The command in a folder of its own, with a small storm in storm.toml."""
    monkeypatch.chdir(tmp_path)

    def call(*arguments: str) -> Done:
        status = cli.main(arguments)
        printed = capsys.readouterr()
        return Done(status, printed.out, printed.err)

    return call


@pytest.fixture
def small(run: Run) -> Run:
    assert run("new", "storm.toml").status == 0
    change("count = 20000", "count = 40")
    change("hours = 24.0", "hours = 9.0")
    change("every_min = 5.0", "every_min = 30.0")
    return run


def change(old: str, new: str) -> None:
    text = Path("storm.toml").read_text("utf-8")
    assert old in text
    Path("storm.toml").write_text(text.replace(old, new), encoding="utf-8")


def files() -> list[str]:
    return sorted(os.listdir())


def strictly(text: str) -> Any:
    """One JSON object, no NaN and no Infinity in it."""

    def refuse(word: str) -> NoReturn:
        raise AssertionError(f"{word} is no JSON")

    return json.loads(text, parse_constant=refuse)


def assert_fault(done: Done, *parts: str) -> None:
    """Exit status 2 and one line on stderr, nothing on stdout."""
    assert (done.status, done.out) == (2, "")
    assert done.err.startswith("driftrose: ")
    assert done.err.count("\n") == 1
    for text in parts:
        assert text in done.err


# --------------------------------------------------------------------------------------------------------- new, models


def test_new_writes_a_run_file_and_its_history(run: Run) -> None:
    assert run("new", "mine.toml") == (0, "wrote mine.toml\nwrote storm-kp.csv\n", "")
    assert files() == ["mine.toml", "storm-kp.csv"]
    assert tracer.load("mine.toml").count == 20000


def test_new_like_another(run: Run) -> None:
    assert run("new", "--like", "quiet", "mine.toml").status == 0
    assert tracer.load("mine.toml").field.drivers == ()


def test_new_never_overwrites(small: Run) -> None:
    before = Path("storm.toml").read_bytes()
    assert_fault(small("new", "storm.toml"), "storm.toml: already exists, and is not overwritten; ")
    assert Path("storm.toml").read_bytes() == before


def test_new_like_nothing(run: Run) -> None:
    assert_fault(run("new", "--like", "strom", "mine.toml"), '--like = "strom": no such scenario; did you mean storm')
    assert files() == []


def test_models(run: Run) -> None:
    done = run("models")
    assert (done.status, done.err) == (0, "")
    assert [line.split()[1] for line in done.out.splitlines()] == ["dipole", "corotation", "uniform", "volland-stern"]
    assert "Maynard & Chen (1975)" in run("models", "volland-stern").out


def test_models_as_json(run: Run) -> None:
    assert strictly(run("models", "--json").out)["models"][0]["name"] == "dipole"
    (model,) = strictly(run("models", "uniform", "--json").out)["models"]
    assert model["parameters"][0]["unit"] == "mV/m"


def test_models_of_an_unknown_name(run: Run) -> None:
    assert_fault(run("models", "dipol"), 'NAME = "dipol": unknown model; did you mean dipole')


# --------------------------------------------------------------------------------------------------------------- check


def test_check_says_what_would_be_computed(small: Run) -> None:
    before = files()
    done = small("check", "storm.toml")
    assert (done.status, done.err) == (0, "")
    assert files() == before
    for expected in (
        "Invented storm: protons injected before midnight",
        "from 2027-03-04T00:00:00Z for 9 h",
        "dipole  b0_nT = 30000.0",
        "volland-stern  gamma = 2.0, kp = series:kp",
        "protons: 40 H+, sobol, seed 7",
        "(least / median / most)",
        "gyroradius / curvature radius",
        "40 particles at 19 saved times",
        " R_E",
        " of memory, ",
        "B of disk",
        CAUTION,
    ):
        assert expected in done.out
    periods = [line for line in done.out.splitlines() if line.endswith("(least / median / most)")]
    assert len(periods) == 3
    for line in periods:
        durations = line.partition("period")[2].partition("(")[0].split("/")
        assert len(durations) == 3
        assert all(text.split()[1] in {"d", "h", "min", "s", "ms", "us"} for text in durations)


def test_check_as_json(small: Run) -> None:
    found = strictly(small("check", "storm.toml", "--json").out)
    assert found["particles"] == 40
    assert found["disk_bytes"] == expected_bytes(tracer.load("storm.toml"))
    assert set(found["populations"][0]["periods_s"]) == {"gyro", "bounce", "drift"}


def test_check_of_a_backward_run(run: Run) -> None:
    run("new", "back.toml", "--like", "backward")
    done = run("check", "back.toml")
    assert done.status == 0
    assert "from 2027-03-04T15:00:00Z for -12 h" in done.out or "back" in done.out.lower()


# --------------------------------------------------------------------------------------------------------------- trace


def test_trace_writes_a_file_and_closes_with_a_table(small: Run) -> None:
    done = small("trace", "storm.toml")
    assert (done.status, done.err) == (0, "")
    assert files() == ["storm-kp.csv", "storm.h5", "storm.toml"]
    lines = done.out.splitlines()
    result = tracer.open("storm.h5")
    causes = np.bincount(result.end["cause"], minlength=8)
    for cause in Cause:
        counted = [line.split()[0] for line in lines if line.strip().endswith(cause.sentence) and line.startswith("  ")]
        assert counted == ([str(causes[cause])] if causes[cause] else []), cause
    table = done.out.partition("\n\n")[0]
    for expected in (
        "R_E, end error of half the particles (40 re-run 1000 times finer)",
        "R_E, end error of 99 %; asked for 1e-06",
        "R_E, largest end error in the sample",
        "steps a particle",
        "particles per second",
        "s in all",
    ):
        assert expected in table
    assert any(line.startswith("protons: ") and "reached 4 R_E" in line for line in lines)
    assert lines[-1] == "wrote storm.h5"


def test_trace_as_json(small: Run) -> None:
    done = small("trace", "storm.toml", "--json", "-o", "out.h5")
    assert (done.status, done.err) == (0, "")
    found = strictly(done.out)
    assert found["file"] == "out.h5"
    assert sum(found["ended"].values()) == found["particles"] == 40
    assert found["end_error_re"]["99"] <= found["tolerance_re"] == 1e-6
    assert found["end_error_re"]["sample"] == 40
    for name in ("seconds", "particles_per_s", "steps_per_particle", "local_tolerance_re", "memory_bytes"):
        assert found[name] > 0
    assert Path("out.h5").is_file()


def test_an_infinite_error_is_null_in_json(small: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    real = pipeline.trace

    def once(scenario: Scenario, out: str, **_: Any) -> Result:
        result = real(scenario, out, overwrite=True)
        result.attrs["end_error_100_re"] = float("inf")  # as when one ends elsewhere in the finer run
        return result

    monkeypatch.setattr(pipeline, "trace", once)
    assert strictly(small("trace", "storm.toml", "--json").out)["end_error_re"]["100"] is None
    assert "another cause  R_E, largest end error" in small("trace", "storm.toml").out


def test_quiet_prints_nothing(small: Run) -> None:
    assert small("trace", "storm.toml", "--quiet") == (0, "", "")
    assert Path("storm.h5").is_file()


def test_the_default_output_is_in_the_current_folder(
    small: Run, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    (tmp_path / "elsewhere").mkdir()
    monkeypatch.chdir(tmp_path / "elsewhere")
    assert small("trace", "../storm.toml", "--quiet").status == 0
    assert files() == ["storm.h5"]
    assert not (tmp_path / "storm.h5").exists()


def test_threads_change_nothing(small: Run) -> None:
    for threads in ("1", "3"):
        assert small("trace", "storm.toml", "--quiet", "--threads", threads, "-o", f"{threads}.h5").status == 0
    one, three = tracer.open("1.h5"), tracer.open("3.h5")
    for name in one.end:
        assert one.end[name].tobytes() == three.end[name].tobytes()


def test_overwrite(small: Run) -> None:
    assert small("trace", "storm.toml", "--quiet").status == 0
    before = Path("storm.h5").stat().st_ino
    assert_fault(
        small("trace", "storm.toml"), "storm.h5: exists; another name for the output, or --overwrite to replace it"
    )
    assert Path("storm.h5").stat().st_ino == before
    assert small("trace", "storm.toml", "--quiet", "--overwrite").status == 0
    assert files() == ["storm-kp.csv", "storm.h5", "storm.toml"]


def test_a_warning_is_said_once_and_not_on_stdout(small: Run) -> None:
    history = Path("storm-kp.csv")
    history.write_text(history.read_text("utf-8").replace("6.667", "8.667"), encoding="utf-8")
    done = small("trace", "storm.toml", "--json")
    assert done.status == 0
    assert done.err.count("\n") == 1
    assert done.err.startswith("driftrose: warning: volland-stern: Kp up to 8.6")
    strictly(done.out)
    assert small("check", "storm.toml").out.count("Kp up to 8.6") == 1
    # a fault is the only line there is, whatever there is to warn of
    assert_fault(small("trace", "storm.toml"), "storm.h5: exists; another name for the output, or --overwrite")


# -------------------------------------------------------------------------------------------------------------- faults


@pytest.mark.parametrize("command", ["check", "trace"])
def test_missing_run_file(run: Run, command: str) -> None:
    assert_fault(run(command, "none.toml"), "none.toml: no such file; a run file")


@pytest.mark.parametrize("command", ["check", "trace"])
def test_a_trajectory_file_where_a_run_file_belongs(small: Run, command: str) -> None:
    assert small("trace", "storm.toml", "--quiet").status == 0
    before = files()
    assert_fault(
        small(command, "storm.h5"), "storm.h5: is an HDF5 file, a result and not a run file; a run file in TOML"
    )
    assert files() == before


def test_a_run_file_where_a_trajectory_file_belongs(small: Run) -> None:
    before = files()
    assert_fault(small("draw", "storm.toml"), "storm.toml: a run file where a trajectory file belongs; trace it first")
    assert files() == before


def test_an_output_named_as_its_run_file(small: Run) -> None:
    before = Path("storm.toml").read_bytes()
    assert_fault(small("trace", "storm.toml", "-o", "storm.toml", "--overwrite"), "storm.toml: is a run file")
    assert Path("storm.toml").read_bytes() == before


def test_output_directory_missing(small: Run) -> None:
    assert_fault(small("trace", "storm.toml", "-o", "no/out.h5"), "no/out.h5: the directory no does not exist; ")
    assert files() == ["storm-kp.csv", "storm.toml"]


def test_disk_too_small(small: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    usage = shutil.disk_usage(".")._replace(free=100)
    monkeypatch.setattr(shutil, "disk_usage", lambda path: usage)
    assert_fault(small("trace", "storm.toml"), "storm.h5: the file takes", "the disk has 100 bytes free; another disk")
    assert files() == ["storm-kp.csv", "storm.toml"]


def test_files_that_cannot_be_drawn(small: Run) -> None:
    assert small("trace", "storm.toml", "--quiet").status == 0
    whole = Path("storm.h5").read_bytes()
    Path("short.h5").write_bytes(whole[: len(whole) // 2])
    Path("empty.h5").write_bytes(b"")
    Path("text.h5").write_text("time,kp\n", encoding="utf-8")
    with h5py.File("foreign.h5", "w") as file:
        file["x"] = np.arange(3)
    before = files()
    for name, expected in (
        ("short.h5", "truncated"),
        ("empty.h5", "empty, not a trajectory file"),
        ("text.h5", "not a trajectory file"),
        ("foreign.h5", "an HDF5 file from elsewhere"),
        ("none.h5", "no such file"),
    ):
        assert_fault(small("draw", name), f"driftrose: {name}: ", expected)
    assert files() == before


# ---------------------------------------------------------------------------------------------------------------- draw


def test_draw_writes_the_figures(small: Run) -> None:
    assert small("trace", "storm.toml", "--quiet").status == 0
    done = small("draw", "storm.h5", "-o", "figures", "--format", "svg")
    assert (done.status, done.err) == (0, "")
    written = [line.removeprefix("wrote ") for line in done.out.splitlines()]
    assert sorted(os.path.basename(name) for name in written) == sorted(os.listdir("figures"))
    assert "figures/storm-paths.svg" in written
    assert_fault(
        small("draw", "storm.h5", "-o", "figures", "--format", "svg"), "exists; another directory, or --overwrite"
    )
    assert small("draw", "storm.h5", "-o", "figures", "--format", "svg", "--overwrite").status == 0


# ----------------------------------------------------------------------------------------------- misuse, stop, failure


@pytest.mark.parametrize(
    "arguments",
    [
        ["trace"],
        ["trace", "a", "b"],
        ["trace", "--what", "a"],
        ["nothing"],
        ["draw", "a", "--format", "gif"],
        ["trace", "a", "--threads", "0"],
    ],
)
def test_a_misused_command_line_keeps_its_usual_text(run: Run, arguments: list[str]) -> None:
    done = run(*arguments)
    assert (done.status, done.out) == (2, "")
    assert done.err.startswith("Usage: driftrose")
    assert "Error: " in done.err
    assert files() == []


@pytest.mark.parametrize("option", ["--help", "-h"])
def test_help(run: Run, option: str) -> None:
    done = run(option)
    assert (done.status, done.err) == (0, "")
    for name in ("new", "models", "check", "trace", "repack", "draw"):
        assert f"\n  {name} " in done.out
        assert run(name, option).status == 0


def test_version(run: Run) -> None:
    assert run("--version") == (0, f"driftrose, version {tracer.__version__}\n", "")


def test_ctrl_c(small: Run, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def stop(*_: Any) -> NoReturn:
        raise KeyboardInterrupt

    monkeypatch.setattr(pipeline, "run_chunk", stop)
    done = small("trace", "storm.toml")
    line = "driftrose: stopped after 0 of 40 particles; the same command with --resume goes on\n"
    assert done == (3, "", line)
    assert files() == ["storm-kp.csv", "storm.h5.part", "storm.h5.part.log", "storm.toml"]
    monkeypatch.undo()
    monkeypatch.chdir(tmp_path)
    assert small("trace", "storm.toml", "--resume", "--quiet").status == 0
    assert files() == ["storm-kp.csv", "storm.h5", "storm.toml"]


def test_sigterm_stops_as_ctrl_c_does(small: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    before = signal.getsignal(signal.SIGTERM)
    monkeypatch.setattr(pipeline, "run_pilot", lambda *_: os.kill(os.getpid(), signal.SIGTERM))
    assert small("trace", "storm.toml").status == 3
    assert files() == ["storm-kp.csv", "storm.h5.part", "storm.toml"]
    assert signal.getsignal(signal.SIGTERM) is before


def test_ctrl_c_outside_a_run(small: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    def stop(*_: Any) -> NoReturn:
        raise KeyboardInterrupt

    monkeypatch.setattr("tracer.preview._work", stop)
    done = small("check", "storm.toml")
    assert (done.status, done.out, done.err.strip()) == (3, "", "driftrose: stopped")


def test_an_internal_failure(small: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    def fail(*_: Any) -> NoReturn:
        raise ZeroDivisionError("unforeseen")

    monkeypatch.setattr(pipeline, "run_pilot", fail)
    done = small("trace", "storm.toml")
    assert (done.status, done.out) == (1, "")
    assert "ZeroDivisionError: unforeseen" in done.err
    assert done.err.splitlines()[-1].startswith("driftrose: internal failure (ZeroDivisionError)")
    assert files() == ["storm-kp.csv", "storm.toml"]


def test_a_reader_that_leaves_early_is_no_failure(tmp_path: Path) -> None:
    root = Path(tracer.__file__).parents[1]
    reader, writer = os.pipe()
    os.close(reader)
    try:
        done = subprocess.run(
            [sys.executable, "-m", "tracer", "models"], cwd=tmp_path, stdout=writer, stderr=subprocess.PIPE, text=True,
            env={**os.environ, "PYTHONPATH": str(root)}, check=False,
        )  # fmt: skip
    finally:
        os.close(writer)
    assert (done.returncode, done.stderr) == (0, "")


# -------------------------------------------------------------------------------------------------------------- resume


def test_resume_of_a_complete_file_says_so(small: Run) -> None:
    assert small("trace", "storm.toml", "--quiet").status == 0
    before = Path("storm.h5").read_bytes()
    assert small("trace", "storm.toml", "--resume") == (0, "storm.h5: complete already, nothing to resume\n", "")
    found = strictly(small("trace", "storm.toml", "--resume", "--json").out)
    assert (found["particles"], "seconds" in found) == (40, False)
    assert Path("storm.h5").read_bytes() == before
    change("hours = 9.0", "hours = 8.0")
    assert_fault(small("trace", "storm.toml", "--resume"), "storm.h5: ", "is complete, but of another run")


def test_resume_of_nothing(small: Run) -> None:
    line = "driftrose: storm.h5: nothing to resume; the same command without --resume\n"
    assert small("trace", "storm.toml", "--resume") == (2, "", line)
    assert files() == ["storm-kp.csv", "storm.toml"]


def test_a_changed_input_is_not_resumed(small: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    def stop(*_: Any) -> NoReturn:
        raise KeyboardInterrupt

    with monkeypatch.context() as patched:
        patched.setattr(pipeline, "run_chunk", stop)
        assert small("trace", "storm.toml").status == 3
    assert_fault(small("trace", "storm.toml"), "storm.h5.part: an interrupted run has left what it finished; --resume")
    history = Path("storm-kp.csv").read_text("utf-8")
    Path("storm-kp.csv").write_text(history + "\n", "utf-8")
    assert_fault(small("trace", "storm.toml", "--resume"), "storm.h5.part: storm-kp.csv has changed since it was begun")
    assert small("trace", "storm.toml", "--overwrite", "--quiet").status == 0
    assert files() == ["storm-kp.csv", "storm.h5", "storm.toml"]


def test_repack(small: Run) -> None:
    assert small("trace", "storm.toml", "--quiet").status == 0
    done = small("repack", "storm.h5", "-o", "small.h5", "--level", "9")
    assert (done.status, done.err) == (0, "")
    assert done.out.startswith("wrote small.h5: ")
    one, other = tracer.open("storm.h5"), tracer.open("small.h5")
    assert one.track["r_re"].tobytes() == other.track["r_re"].tobytes()
    assert_fault(small("repack", "storm.h5", "-o", "small.h5"), "small.h5: exists; another name")
