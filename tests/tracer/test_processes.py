"""Worker processes: the same bits, one of them killed, none left over."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from crews import RUN, SPANS, TOLERANCE, assert_all_there, by_this_process, datasets
from storm_runs import KP

import tracer
from fields.electric.corotation import Corotation
from fields.field import compose
from fields.magnetic.dipole import Dipole
from tracer import templates
from tracer.processes import Process, Processes, ended_by, told
from tracer.progress import Silent
from tracer.stopping import WorkersLost

ROOT = Path(__file__).parent.parent.parent


def workers_of(crew: Processes) -> list[Process]:
    return list(crew._crew)


def is_running(pid: int) -> bool:
    try:
        return Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[0] != "Z"
    except FileNotFoundError:
        return False


def gone(pids: list[int], within_s: float) -> bool:
    deadline = time.monotonic() + within_s
    while any(map(is_running, pids)):
        if time.monotonic() > deadline:
            return False
        time.sleep(0.02)
    return True


class Counting(Silent):
    def __init__(self) -> None:
        self.count = 0

    def advanced(self, count: int) -> None:
        self.count += count


@pytest.mark.parametrize(("count", "threads"), [(2, 1), (1, 3)])
def test_the_same_bits_with_few_chunks_in_hand(count: int, threads: int) -> None:
    given, most = 0, 0

    def spans() -> Iterator[tuple[int, int]]:
        nonlocal given
        for span in SPANS:
            given += 1
            yield span

    watch = Counting()
    with Processes(RUN, count, threads) as crew:
        assert crew.slots == count * threads
        found = []
        for chunk in crew.chunks(spans(), TOLERANCE, watch):
            most = max(most, given - len(found))
            found.append(chunk)
        pids = [worker.process.pid for worker in workers_of(crew)]
    assert_all_there(found)
    assert watch.count == RUN.count
    assert crew.slots < most <= count * (threads + 1)
    assert os.getpid() not in pids
    assert not any(map(is_running, pids))


def test_a_killed_worker_costs_its_own_chunks_only() -> None:
    by_this_process()
    with Processes(RUN, 2) as crew:
        coming = crew.chunks(SPANS, TOLERANCE, Silent())
        found = [next(coming)]
        victim, other = workers_of(crew)
        os.kill(victim.process.pid, signal.SIGKILL)
        found += coming
        assert other in workers_of(crew)
        assert victim not in workers_of(crew)
        assert 1 <= sum(crew._deaths.values()) <= 2
    assert_all_there(found)


def test_workers_killed_again_and_again_end_the_run(monkeypatch: pytest.MonkeyPatch) -> None:
    start = Processes._started

    def killed(crew: Processes) -> Process:
        worker = start(crew)
        worker.process.kill()
        return worker

    monkeypatch.setattr(Processes, "_started", killed)
    with (
        Processes(RUN, 1) as crew,
        pytest.raises(WorkersLost, match="3 worker processes died on particles 0 to 199, the last by SIGKILL"),
    ):
        list(crew.chunks([(0, 200)], TOLERANCE, Silent()))


FATAL = """
import os
from fields.electric.volland_stern import VollandStern

class Fatal(VollandStern):
    def __setstate__(self, state):
        os._exit(7)
"""


def test_a_model_that_ends_every_worker(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "fatal_model.py").write_text(FATAL)
    monkeypatch.syspath_prepend(str(tmp_path))
    from fatal_model import Fatal

    field = compose(Dipole(b0_nT=30000.0), [Corotation(), Fatal(gamma=2.0, kp=KP)])
    with (
        Processes(replace(RUN, field=field), 1) as crew,
        pytest.raises(WorkersLost, match=r"3 worker processes died .*, the last with exit status 7"),
    ):
        list(crew.chunks(SPANS, TOLERANCE, Silent()))


def test_an_error_comes_home_with_where_it_arose() -> None:
    with Processes(RUN, 1) as crew, pytest.raises(ValueError, match="particles 0 to 999 of 200") as caught:
        list(crew.chunks([(0, 999)], TOLERANCE, Silent()))
    assert "in a worker process:" in caught.value.__notes__[0]
    assert "initial_state" in caught.value.__notes__[0]


def test_an_error_that_cannot_travel_is_told() -> None:
    class LocalError(Exception):
        pass

    assert "LocalError: with this" in str(told(LocalError("with this")))
    line = str(tracer.InputError("wrong", "right", key="a", value=3))
    sent = told(tracer.InputError("wrong", "right", key="a", value=3))
    assert isinstance(sent, tracer.InputError)
    assert str(sent) == line


def test_how_a_process_ended() -> None:
    assert ended_by(3) == "with exit status 3"
    assert ended_by(-9) == "by SIGKILL"


ABANDON = """
import os, signal, sys
sys.path[:0] = {path!r}
from crews import RUN, SPANS, TOLERANCE
from tracer import templates
from tracer.processes import Processes
from tracer.progress import Silent
from tracer.stopping import WorkersLost
with Processes(RUN, 2) as crew:
    coming = crew.chunks(SPANS, TOLERANCE, Silent())
    next(coming)
    print(*[w.process.pid for w in crew._crew], flush=True)
    os.kill(os.getpid(), signal.SIGKILL)
"""


def test_no_worker_outlives_a_killed_run() -> None:
    # the script starts nothing anew in its workers: it has no guard for that
    script = ABANDON.format(path=[str(ROOT), str(ROOT / "tests")])
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=False)
    assert done.returncode == -signal.SIGKILL, done.stderr
    pids = list(map(int, done.stdout.split()))
    assert len(pids) == 2
    assert gone(pids, 2.0)
    assert done.stderr == ""


# ------------------------------------------------------------------------------------------------------ the whole run


def children(pid: int) -> list[int]:
    found = []
    for status in Path("/proc").glob("[0-9]*/stat"):
        try:
            parent = int(status.read_text().rpartition(")")[2].split()[1])
        except (FileNotFoundError, ProcessLookupError):
            continue
        if parent == pid:
            found.append(int(status.parent.name))
    return found


def test_a_file_made_by_workers_is_the_same(tmp_path: Path) -> None:
    tracer.trace(RUN, tmp_path / "alone.h5", threads=1)
    result = tracer.trace(RUN, tmp_path / "shared.h5", workers=2)
    assert result.work["particles_per_s"] > 0
    alone = datasets(tmp_path / "alone.h5")
    assert len(alone) >= 25
    assert datasets(tmp_path / "shared.h5") == alone


@pytest.mark.parametrize("signals", [signal.SIGINT, signal.SIGTERM])
def test_a_signal_ends_the_run_and_its_workers_soon(tmp_path: Path, signals: signal.Signals) -> None:
    by_this_process()  # so that the kernel stands on disk
    templates.new_runfile(str(tmp_path / "storm.toml"))
    text = (tmp_path / "storm.toml").read_text("utf-8")
    for old, new in (("count = 20000", "count = 1000000"), ("every_min = 5.0", "every_min = 0.0")):
        assert old in text
        text = text.replace(old, new)
    (tmp_path / "storm.toml").write_text(text.replace("tolerance_re = 1e-6", "tolerance_re = 1e-8"))
    command = [sys.executable, "-m", "tracer", "trace", "storm.toml", "--workers", "2"]
    run = subprocess.Popen(
        command,
        cwd=tmp_path,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )
    try:
        deadline = time.monotonic() + 60.0
        while len(pids := children(run.pid)) < 2 or not busy(pids):
            assert run.poll() is None
            assert time.monotonic() < deadline
            time.sleep(0.05)
        began = time.monotonic()
        os.killpg(run.pid, signals) if signals == signal.SIGINT else run.send_signal(signals)
        _, said = run.communicate(timeout=20.0)
        assert run.returncode == 3
        assert time.monotonic() - began < 2.0
        assert gone(pids, 0.5)
        assert said.count("\n") == 1
        assert said.startswith("driftrose: stopped ")
    finally:
        run.kill()


def busy(pids: list[int]) -> bool:
    """Whether each has had the processor for longer than its start takes."""
    ticks = [Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[11] for pid in pids]
    return min(map(int, ticks)) > 2 * os.sysconf("SC_CLK_TCK")


@pytest.mark.parametrize(
    ("given", "line"),
    [
        ({"workers": 0}, "workers = 0: not a number of processes; a whole number of at least 1"),
        ({"workers": 1, "scheduler": "a"}, "workers = 1: does not go with scheduler; leave it out"),
        ({"threads": 1, "scheduler": "a"}, "threads = 1: does not go with scheduler; leave it out"),
    ],
)
def test_what_does_not_go_together(tmp_path: Path, given: dict[str, Any], line: str) -> None:
    with pytest.raises(tracer.InputError, match=line):
        tracer.trace(RUN, tmp_path / "out.h5", **given)
    assert os.listdir(tmp_path) == []
