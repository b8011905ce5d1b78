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

import pytest
from crews import RUN, SPANS, TOLERANCE, assert_all_there, by_this_process
from storm_runs import KP

import tracer
from fields.electric.corotation import Corotation
from fields.field import compose
from fields.magnetic.dipole import Dipole
from tracer.processes import Process, Processes, ended_by, told
from tracer.progress import Silent

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
        pytest.raises(tracer.Stopped, match="3 worker processes died on particles 0 to 199, the last by SIGKILL"),
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
        pytest.raises(tracer.Stopped, match="3 worker processes died .*, the last with exit status 7"),
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
from tracer.processes import Processes
from tracer.progress import Silent
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
