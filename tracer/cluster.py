"""A dask.distributed cluster that is already running: the chunks of a run are computed by its workers, kept by none.

The only place that knows dask. Each worker is looked at and given the run before it gets a chunk, so that the chunks
themselves carry two numbers only and no worker of another kind can change a bit.
"""

from __future__ import annotations

import logging
import threading
import time
import uuid
from collections import deque
from collections.abc import Generator, Iterable, Iterator
from concurrent.futures import CancelledError
from contextlib import ExitStack, contextmanager, suppress
from dataclasses import dataclass
from pathlib import Path
from queue import Empty, SimpleQueue
from types import TracebackType
from typing import TYPE_CHECKING, Self

from fields.errors import InputError
from tracer.integrate import Interrupted
from tracer.progress import Watcher
from tracer.records import Chunk
from tracer.scenario import Scenario
from tracer.spans import Span
from tracer.stopping import WorkersLost
from tracer.worker import NotHeld, differences, dismiss, enlist, identity, packed, work

if TYPE_CHECKING:
    from dask.distributed import Client, Future

log = logging.getLogger(__name__)

CONNECT_S = 10.0  # to reach the scheduler
GATHERING_S = 60.0  # to wait for a first worker, or for another when none is left
FETCH_S = 2.0, 120.0  # for one result to arrive: at first, and at most
SURVEY_S = 2.0  # between two looks at who has come and gone
TICK_S = 0.5
PARTING_S = 1.0


@dataclass(frozen=True)
class Task:
    """A span on its way, and the workers that may compute it."""

    span: Span
    workers: frozenset[str]


class Cluster:
    """Context manager: the workers of an existing cluster, holding one run.

    Parameters
    ----------
    scenario : Scenario
    address : str
        Of the scheduler, as ``tcp://host:8786``; or the path of its scheduler file, which ends in ``.json``.

    Raises
    ------
    InputError
        When dask is not installed, no scheduler answers, no worker comes, or one is of another kind: named by its
        address and by what differs. See also `tracer.worker.packed`.
    """

    def __init__(self, scenario: Scenario, address: str) -> None:
        self._address = address
        self._data = packed(scenario)
        self._identity = identity(scenario)
        self._key = f"driftrose-{uuid.uuid4().hex}"
        self._threads: dict[str, int] = {}  # of each worker that holds the run
        self._refused: dict[str, str] = {}  # worker -> what differs
        self._surveyed = 0.0
        self._again: deque[Span] = deque()
        self._flying: dict[Future, Task] = {}
        self._landed: SimpleQueue[Future] = SimpleQueue()

    @property
    def slots(self) -> int:
        """Chunks that the workers of this moment compute at the same time."""
        return sum(self._threads.values())

    def __enter__(self) -> Self:
        with ExitStack() as stack:
            self._client = stack.enter_context(connected(self._address))
            stack.callback(self._part)
            self._gather(starting=True)
            if self._refused:
                named = ", ".join(f"{address} ({wrong})" for address, wrong in sorted(self._refused.items()))
                remedy = "workers with the same versions, sources and kind of processor, or a cluster without these"
                raise fault(self._address, f"has workers unlike this process: {named}", remedy)
            if not self._threads:
                remedy = f"start some: dask worker {self._address}"
                raise fault(self._address, f"has no workers after {GATHERING_S:g} s", remedy)
            self._leave = stack.pop_all()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._leave.close()

    def chunks(self, spans: Iterable[Span], tolerance: float, watch: Watcher) -> Generator[Chunk]:
        """The chunks of all spans in order of completion; no worker has more than its threads and one in hand.

        Workers that join meanwhile are used when they are of the right kind. The scheduler gives the chunks of a lost
        worker to others, a few times.

        Raises
        ------
        WorkersLost
            When the scheduler or all workers are lost, or a chunk ends every worker that tries it.
        """
        fresh = iter(spans)
        while True:
            if not self._threads or time.monotonic() - self._surveyed > SURVEY_S:
                self._gather()
                if not self._threads:
                    raise WorkersLost(f"no worker was left at {self._address} for {GATHERING_S:g} s")
            self._submit(fresh, tolerance)
            if not self._flying:  # and nothing is left to give, for there are workers
                return
            try:
                future = self._landed.get(timeout=TICK_S)
            except Empty:
                continue
            task = self._flying.pop(future, None)
            if task is None:  # called back meanwhile
                continue
            chunk = self._fetched(future, task)
            if chunk is None:
                self._again.append(task.span)
                continue
            watch.advanced(task.span[1] - task.span[0])
            yield chunk

    def _submit(self, fresh: Iterator[Span], tolerance: float) -> None:
        """Give spans until every worker has its threads and one more in hand."""
        workers = frozenset(self._threads)
        while len(self._flying) < self.slots + len(workers):
            span = self._again.popleft() if self._again else next(fresh, None)
            if span is None:
                return
            name = f"{self._key}-{span[0]}-{uuid.uuid4().hex[:8]}"
            future = self._client.submit(work, self._key, *span, tolerance, key=name, workers=sorted(workers))
            self._flying[future] = Task(span, workers)
            future.add_done_callback(self._landed.put)

    def _fetched(self, future: Future, task: Task) -> Chunk | None:
        """The chunk; None when it must be computed again."""
        from dask.distributed import KilledWorker

        patience, most = FETCH_S
        while future.status == "finished" and patience <= most:
            with suppress(OSError, CancelledError):  # else the worker that kept it is slow, or gone
                chunk: Chunk = future.result(timeout=patience)
                return chunk
            time.sleep(TICK_S)  # for the loss of the scheduler to show
            self._survey()
            if not task.workers & self._threads.keys():
                return None
            patience *= 2
        if future.status != "error":
            self._see_scheduler()
            return None
        error = future.exception()
        if isinstance(error, (NotHeld, Interrupted)):  # it was started anew, or held too many runs
            self._threads.clear()
            return None
        if isinstance(error, KilledWorker):
            raise WorkersLost(
                f"several workers of {self._address} died on one chunk, the last of them {error.last_worker}"
            )
        raise error

    def _gather(self, starting: bool = False) -> None:
        """Look at who has come and gone, for some time when there is nobody; call back what waits for the gone."""
        deadline = time.monotonic() + GATHERING_S
        known = set(self._refused)
        self._survey()
        while not self._threads and not (starting and self._refused) and time.monotonic() < deadline:
            time.sleep(TICK_S)
            self._survey()
        for future, task in list(self._flying.items()):
            if not task.workers & self._threads.keys():
                del self._flying[future]
                self._again.append(task.span)
                future.cancel()
        if not starting:  # else they are the fault of the run
            for address in self._refused.keys() - known:
                log.warning("%s is given no work: %s", address, self._refused[address])
        self._surveyed = time.monotonic()

    def _survey(self) -> None:
        """Give the run to workers that are new here, and see what they are."""
        self._see_scheduler()
        try:
            here = self._client.nthreads()
            self._threads = {address: threads for address, threads in self._threads.items() if address in here}
            new = [address for address in here if address not in self._threads and address not in self._refused]
            if not new:
                return
            answers = self._client.run(introduced, self._key, self._data, workers=new, on_error="return")
        except OSError:
            raise self._lost() from None
        for address, answer in answers.items():
            wrong = unlike(answer, self._identity)
            if wrong:
                self._refused[address] = wrong
            elif not isinstance(answer, OSError):  # one that has died meanwhile
                self._threads[address] = here[address]

    def _see_scheduler(self) -> None:
        if self._client.status != "running":
            raise self._lost()

    def _lost(self) -> WorkersLost:
        return WorkersLost(f"the scheduler at {self._address} was lost")

    def _part(self) -> None:
        """Have the workers forget the run, without waiting for what does not answer."""
        self._flying.clear()
        if self._client.status == "running":
            parting = threading.Thread(target=self._dismiss, daemon=True)
            parting.start()
            parting.join(PARTING_S)

    def _dismiss(self) -> None:
        with suppress(Exception):  # who does not answer will not have to forget
            self._client.run(dismiss, self._key, workers=list(self._threads), on_error="ignore")


def introduced(key: str, data: bytes) -> dict[str, str] | str:
    """On a worker: take a run, and say what this worker is; or why it cannot."""
    try:
        return enlist(key, data)
    except Exception as error:  # errors do not always survive the journey
        return f"{type(error).__name__}: {error}"


def unlike(answer: object, ours: dict[str, str]) -> str:
    """What is wrong with a worker that `introduced` itself so; nothing when that is open or all is well."""
    if isinstance(answer, OSError):
        return ""
    if isinstance(answer, dict):
        return ", ".join(differences(answer, ours))
    return f"cannot load the run: {str(answer) or repr(answer)}"


@contextmanager
def connected(address: str) -> Iterator[Client]:
    """A client of the scheduler at an address or of a scheduler file.

    Meanwhile dask does not log its own account of what is lost, page by page: the run has a line for it.
    """
    try:
        from dask.distributed import Client
    except ImportError:
        remedy = "pip install 'driftrose[cluster]'"
        raise fault(address, "takes dask.distributed, which is not installed", remedy) from None
    remedy = "the address that dask scheduler printed, or the path of its scheduler file"
    if not address:
        raise fault(address, "is empty", remedy)
    by_file = address.endswith(".json")
    if by_file and not Path(address).is_file():
        raise fault(address, "no such file", remedy)
    with silent("distributed"):
        place = {"scheduler_file": address} if by_file else {"address": address}
        try:
            client = Client(**place, timeout=CONNECT_S, set_as_default=False, name="driftrose")
        except (OSError, ValueError) as error:
            reason = str(error).partition("\n")[0]
            raise fault(address, f"no scheduler answers: {reason}", remedy) from None
        try:
            yield client
        finally:
            with suppress(TimeoutError):
                client.close(timeout=PARTING_S)


@contextmanager
def silent(name: str) -> Iterator[None]:
    """Without what the loggers below a name have to say."""
    known = logging.root.manager.loggerDict.items()
    loggers = [logger for key, logger in known if key.startswith(name) and isinstance(logger, logging.Logger)]
    loud = [logger for logger in loggers if not logger.disabled]
    for logger in loud:
        logger.disabled = True
    try:
        yield
    finally:
        for logger in loud:
            logger.disabled = False


def fault(address: str, problem: str, remedy: str) -> InputError:
    """What is wrong with a cluster."""
    return InputError(problem, remedy, key="scheduler", value=address)
