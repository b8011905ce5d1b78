"""Worker processes on this machine: started, never forked, fed with ranges of particles, replaced when they die.

Each is a fresh interpreter at the other end of a pipe. It owns no file, and ends as soon as the pipe does, so none
outlives the run whatever becomes of it. Unlike with the pools of the standard library, a worker that is killed costs
its own chunks only, and the script that started the run is not imported again.
"""

from __future__ import annotations

import os
import pickle
import signal
import subprocess
import sys
import threading
import traceback
from collections import Counter, deque
from collections.abc import Generator, Iterable, Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager, suppress
from dataclasses import dataclass, field
from multiprocessing import Pipe
from multiprocessing.connection import Connection, wait
from types import TracebackType
from typing import Any, Self

from tracer.integrate import compile_kernel
from tracer.kernels.build import cache_root
from tracer.progress import Watcher
from tracer.records import Chunk
from tracer.scenario import Scenario
from tracer.spans import Span
from tracer.stopping import WorkersLost
from tracer.worker import enlist, packed, ready, work

COMMAND = (sys.executable, "-P", "-c", "from tracer.processes import serve; serve()")
DEATHS = 3  # workers that may die with the same chunk in hand
PATIENCE = 1.0  # seconds a worker has to end when asked
KEY = "run"


@dataclass(eq=False)
class Process:
    """A worker: its process, our end of the pipe, and the spans it was given and has not answered."""

    process: subprocess.Popen[bytes]
    pipe: Connection[Any, Any]
    spans: list[Span] = field(default_factory=list)


class Processes:
    """Context manager: worker processes that hold one run.

    Parameters
    ----------
    scenario : Scenario
    count : int
        Number of processes.
    threads : int
        Threads in each.

    Raises
    ------
    InputError
        See `tracer.worker.packed`.
    """

    def __init__(self, scenario: Scenario, count: int, threads: int = 1) -> None:
        self._scenario = scenario
        self._data = packed(scenario)
        self._count = count
        self._threads = threads
        self._deaths: Counter[Span] = Counter()
        self._crew: list[Process] = []

    @property
    def slots(self) -> int:
        """Chunks that are computed at the same time."""
        return self._count * self._threads

    def __enter__(self) -> Self:
        compile_kernel(self._scenario)  # once, and not in each of them
        try:
            for _ in range(self._count):
                self._crew.append(self._started())
        except BaseException:
            self._end(self._crew)
            raise
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._end(self._crew)

    def chunks(self, spans: Iterable[Span], tolerance: float, watch: Watcher) -> Generator[Chunk]:
        """The chunks of all spans in order of completion; no worker has more than its threads and one in hand.

        Raises
        ------
        WorkersLost
            When `DEATHS` workers have died with the same span in hand.
        """
        fresh, again = iter(spans), deque[Span]()
        while True:
            self._hand_out(fresh, again, tolerance)
            if not any(worker.spans for worker in self._crew):
                return
            ready = wait([worker.pipe for worker in self._crew])
            for worker in [worker for worker in self._crew if worker.pipe in ready]:
                try:
                    span, outcome = worker.pipe.recv()
                except (EOFError, OSError):
                    again += self._replaced(worker)
                    continue
                worker.spans.remove(span)
                if isinstance(outcome, BaseException):
                    raise outcome
                watch.advanced(span[1] - span[0])
                yield outcome

    def _hand_out(self, fresh: Iterator[Span], again: deque[Span], tolerance: float) -> None:
        """Give spans, each to the worker that has the fewest, until all have enough."""
        while True:
            worker = min(self._crew, key=lambda worker: len(worker.spans))
            if len(worker.spans) > self._threads:
                return
            span = again.popleft() if again else next(fresh, None)
            if span is None:
                return
            worker.spans.append(span)
            with suppress(OSError):  # it has died: its end of the pipe says so to the one who reads
                worker.pipe.send((span, tolerance))

    def _replaced(self, worker: Process) -> list[Span]:
        """Put a new process in the place of a dead one; the spans it has left."""
        self._end([worker])
        self._deaths.update(worker.spans)
        for (first, stop), deaths in self._deaths.items():
            if deaths >= DEATHS:
                how = ended_by(worker.process.returncode)
                raise WorkersLost(f"{deaths} worker processes died on particles {first} to {stop - 1}, the last {how}")
        self._crew[self._crew.index(worker)] = self._started()
        return worker.spans

    def _started(self) -> Process:
        ours, theirs = Pipe()
        places = os.pathsep.join(place or os.getcwd() for place in sys.path)
        with theirs, no_interrupt():
            process = subprocess.Popen(
                [*COMMAND, str(theirs.fileno())],
                stdin=subprocess.DEVNULL,
                stdout=subprocess.DEVNULL,
                pass_fds=[theirs.fileno()],
                env={**os.environ, "PYTHONPATH": places, "DRIFTROSE_CACHE_DIR": str(cache_root())},
            )
        with suppress(OSError):  # it has died already
            ours.send((self._data, self._threads))
        return Process(process, ours)

    def _end(self, workers: list[Process]) -> None:
        for worker in workers:
            worker.process.terminate()
            worker.pipe.close()
        for worker in workers:
            try:
                worker.process.wait(PATIENCE)
            except subprocess.TimeoutExpired:
                worker.process.kill()
                worker.process.wait()


def ended_by(code: int) -> str:
    """How a process ended, in words."""
    if code >= 0:
        return f"with exit status {code}"
    return f"by {signal.Signals(-code).name}"


@contextmanager
def no_interrupt() -> Iterator[None]:
    """Processes started here never see Ctrl-C: the terminal sends it to all, and it is ours to act on."""
    before = signal.pthread_sigmask(signal.SIG_BLOCK, [signal.SIGINT])
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)


def serve() -> None:
    """A worker process: answer what comes down the pipe, and end when it closes, whatever is still being computed."""
    pipe: Connection[Any, Any] = Connection(int(sys.argv[1]))
    lock = threading.Lock()

    def answer(span: Span, tolerance: float) -> None:
        outcome: Chunk | BaseException
        try:
            outcome = work(KEY, *span, tolerance)
        except BaseException as error:
            outcome = told(error)
        with lock, suppress(OSError):  # nobody may be left to hear it
            pipe.send((span, outcome))

    with suppress(EOFError, OSError):
        data, threads = pipe.recv()
        enlist(KEY, data)
        pool = ThreadPoolExecutor(threads)
        pool.submit(ready, KEY)
        while True:
            pool.submit(answer, *pipe.recv())
    os._exit(0)


def told(error: BaseException) -> BaseException:
    """An error fit to travel, with where it arose."""
    error.add_note("in a worker process:\n" + "".join(traceback.format_exception(error)))
    try:
        pickle.loads(pickle.dumps(error))
    except Exception:  # whatever the error of a foreign model does
        return RuntimeError("\n".join(error.__notes__))
    return error
