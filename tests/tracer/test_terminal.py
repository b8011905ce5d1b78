"""What is said on stderr while a run goes, without waiting for it: clocks and intervals are given."""

from __future__ import annotations

import inspect
import io
import sys
import threading
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest
from small_runs import population
from storm_runs import storm

import tracer
from fields.field import Field
from tracer import cli, pipeline, preview
from tracer.kernels.build import Kernel, kernel_for
from tracer.scenario import Output
from tracer.terminal import COMPILING, Bar, Lines, pace, span, watcher

ANEW = f"driftrose: {COMPILING}\n"


class Clock:
    """A clock that moves when it is told to."""

    def __init__(self) -> None:
        self.now = 1000.0

    def __call__(self) -> float:
        return self.now


@pytest.fixture
def clock() -> Clock:
    return Clock()


@pytest.fixture
def lines(clock: Clock) -> Lines:
    return Lines((), clock=clock)


# -------------------------------------------------------------------------------------------------------- where it is


def test_a_line_tells_what_is_done_the_rate_and_the_time_left(lines: Lines, clock: Clock) -> None:
    lines.tracing(400_000)
    clock.now += 60.0
    assert lines.standing() == "0 of 400,000 particles (0%) after 1 min"
    lines.advanced(100_000)
    lines.advanced(20_000)
    clock.now += 60.0
    assert lines.standing() == "120,000 of 400,000 particles (30%) after 2 min, 1,000/s, 5 min left"


def test_the_other_phases_tell_for_how_long(lines: Lines, clock: Clock) -> None:
    lines.piloting()
    clock.now += 90.0
    assert lines.standing() == "tracing the pilot sample, 2 min so far"
    lines.tracing(10)
    lines.advanced(10)
    lines.auditing()
    clock.now += 3900.0
    assert lines.standing() == "all particles traced, measuring the error, 1 h 05 min so far"


@pytest.mark.parametrize(
    ("seconds", "text"),
    [(0.0, "1 s"), (59.4, "59 s"), (59.6, "1 min"), (3569.0, "59 min"), (3571.0, "1 h 00 min"), (1e6, "277 h 47 min")],
)
def test_times_to_wait(seconds: float, text: str) -> None:
    assert span(seconds) == text


@pytest.mark.parametrize(
    ("rate", "text"), [(43361.2, "43,361/s"), (10.0, "10/s"), (2.345, "2.3/s"), (0.0123, "0.012/s")]
)
def test_rates(rate: float, text: str) -> None:
    assert pace(rate) == text


def test_many_threads_are_counted_right(lines: Lines, clock: Clock) -> None:
    interval = sys.getswitchinterval()
    sys.setswitchinterval(1e-6)
    try:
        lines.tracing(8000)
        threads = [threading.Thread(target=lambda: [lines.advanced(1) for _ in range(1000)]) for _ in range(8)]
        for thread in threads:
            thread.start()
        for thread in threads:
            thread.join()
    finally:
        sys.setswitchinterval(interval)
    clock.now += 60.0
    assert lines.standing().startswith("8,000 of 8,000 particles (100%)")


# ------------------------------------------------------------------------------------------------------ line by line


def test_a_line_at_each_interval_whether_the_run_moves_or_not(monkeypatch: pytest.MonkeyPatch) -> None:
    enough = threading.Event()

    class Stream(io.StringIO):
        def write(self, text: str) -> int:
            written = super().write(text)
            if self.getvalue().count("\n") >= 3:
                enough.set()
            return written

    stream = Stream()
    monkeypatch.setattr(sys, "stderr", stream)
    lines = Lines((), interval_s=1e-3)
    lines.compiling(anew=False)
    lines.tracing(7)
    assert enough.wait(30.0)
    lines.done()
    said = stream.getvalue()
    assert len(said.splitlines()) >= 3
    for line in said.splitlines(keepends=True):
        assert line.startswith("driftrose: ")
        assert line.endswith("\n")
    assert "driftrose: 0 of 7 particles (0%) after 1 s" in said
    assert stream.getvalue() == said  # over is over
    enough.clear()
    stream.truncate(0)
    lines.compiling(anew=False)  # until another run begins
    assert enough.wait(30.0)
    lines.done()


def test_not_a_line_in_the_first_minute(capsys: pytest.CaptureFixture[str]) -> None:
    assert inspect.signature(Lines).parameters["interval_s"].default == 60.0
    waited: list[float | None] = []

    class Over(threading.Event):
        def wait(self, timeout: float | None = None) -> bool:
            waited.append(timeout)
            return super().wait(timeout)

    lines = Lines(())
    lines._over = Over()
    lines.compiling(anew=False)
    lines.tracing(5)
    lines.advanced(5)
    lines.auditing()
    lines.done()
    assert waited == [60.0]  # the first thing that the teller does
    assert capsys.readouterr() == ("", "")


def test_a_run_that_nobody_listens_to_goes_on(monkeypatch: pytest.MonkeyPatch) -> None:
    closed = io.StringIO()
    closed.close()
    monkeypatch.setattr(sys, "stderr", closed)
    lines = Lines(("something",))
    lines.compiling(anew=True)
    lines.done()


def test_done_before_it_began(lines: Lines) -> None:
    lines.done()


# ------------------------------------------------------------------------------------------- compiled or only loaded


def told(anew: bool, quiet: bool, capsys: pytest.CaptureFixture[str]) -> str:
    watch = watcher(quiet, ("look out",))
    watch.compiling(anew)
    watch.piloting()
    watch.tracing(1)
    watch.advanced(1)
    watch.auditing()
    watch.done()
    out, err = capsys.readouterr()
    assert out == ""
    return err


def test_compiling_is_told_at_once_and_loading_is_not(capsys: pytest.CaptureFixture[str]) -> None:
    warning = "driftrose: warning: look out\n"
    assert told(anew=True, quiet=False, capsys=capsys) == warning + ANEW
    assert told(anew=False, quiet=False, capsys=capsys) == warning
    assert told(anew=True, quiet=True, capsys=capsys) == warning


@pytest.mark.parametrize(("anew", "text"), [(True, "compiling the kernel"), (False, "loading the kernel")])
def test_the_bar_tells_compiling_from_loading(anew: bool, text: str, capsys: pytest.CaptureFixture[str]) -> None:
    bar = Bar(())
    bar.compiling(anew)
    described = [bar._progress.tasks[0].description]
    bar.piloting()
    bar.tracing(3)
    described.append(bar._progress.tasks[0].description)
    bar.advanced(3)
    assert bar._progress.tasks[0].finished
    bar.auditing()
    described.append(bar._progress.tasks[0].description)
    bar.done()
    assert described == [text, "tracing", "measuring the error"]
    assert (COMPILING in capsys.readouterr().err) == anew


def test_a_terminal_gets_the_bar(monkeypatch: pytest.MonkeyPatch) -> None:
    assert isinstance(watcher(quiet=False), Lines)
    monkeypatch.setattr(sys.stderr, "isatty", lambda: True)
    assert isinstance(watcher(quiet=False), Bar)
    assert not isinstance(watcher(quiet=True), Bar)


@pytest.fixture
def command(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Callable[..., int]:
    """The command on a small run whose kernel is said to be new here."""
    monkeypatch.chdir(tmp_path)
    assert cli.main(["new", "storm.toml"]) == 0
    text = Path("storm.toml").read_text("utf-8")
    Path("storm.toml").write_text(text.replace("count = 20000", "count = 4").replace("hours = 24.0", "hours = 1.0"))

    def anew(field: Field, equatorial: bool) -> Kernel:
        return replace(kernel_for(field, equatorial), fresh=True)

    for module in (pipeline, preview):
        monkeypatch.setattr(module, "kernel_for", anew)
    return lambda *arguments: cli.main(arguments)


def test_the_commands_say_that_they_compile(command: Callable[..., int], capsys: pytest.CaptureFixture[str]) -> None:
    capsys.readouterr()
    assert command("trace", "storm.toml") == 0
    assert capsys.readouterr().err == ANEW
    assert command("trace", "storm.toml", "--overwrite", "--quiet") == 0
    assert capsys.readouterr() == ("", "")
    assert command("check", "storm.toml") == 0
    assert capsys.readouterr().err == ANEW


def test_a_fault_is_still_the_only_line(command: Callable[..., int], capsys: pytest.CaptureFixture[str]) -> None:
    Path("storm.h5").write_bytes(b"")
    capsys.readouterr()
    assert command("trace", "storm.toml") == 2
    assert capsys.readouterr().err.count("\n") == 1


def test_the_run_tells_its_phases_in_order() -> None:
    heard: list[str] = []

    class Listener:
        def __getattr__(self, name: str) -> Callable[..., None]:
            return lambda *_: heard.append(name)

    run = storm(population(count=3), output=Output(every_min=0.0))
    tracer.trace(run, threads=1, watcher=Listener())
    assert [name for name in heard if name != "advanced"] == ["compiling", "piloting", "tracing", "auditing", "done"]
    heard.clear()
    tracer.check(run, watcher=Listener())
    assert heard == ["compiling", "piloting", "done"]
