"""Who else computes the chunks of a run: processes on this machine, a cluster, or nobody."""

from __future__ import annotations

from collections.abc import Generator, Iterable
from contextlib import AbstractContextManager, nullcontext
from typing import Protocol

from fields.errors import InputError
from tracer.cluster import Cluster
from tracer.processes import Processes
from tracer.progress import Watcher
from tracer.records import Chunk
from tracer.scenario import Scenario


class Crew(Protocol):
    """Workers that hold a run."""

    @property
    def slots(self) -> int:
        """Chunks that they compute at the same time."""
        ...

    def chunks(self, spans: Iterable[tuple[int, int]], tolerance: float, watch: Watcher) -> Generator[Chunk]:
        """The chunks of the given (first, stop), in order of completion and with the bits of `integrate.run_chunk`."""
        ...


def hired(
    scenario: Scenario, threads: int | None, workers: int | None, scheduler: str | None
) -> AbstractContextManager[Crew | None]:
    """The workers that were asked for, as a context; None when this process is to do the work itself.

    Parameters
    ----------
    threads : int, optional
        In each worker process; one by default.
    workers : int, optional
        Number of processes on this machine.
    scheduler : str, optional
        Address or scheduler file of a dask.distributed cluster.

    Raises
    ------
    InputError
        When these do not go together. On entering also: see `tracer.cluster.Cluster`.
    """
    if scheduler is not None:
        for name, value in (("workers", workers), ("threads", threads)):
            if value is not None:
                remedy = "leave it out: whoever starts the cluster sets it"
                raise InputError("does not go with scheduler", remedy, key=name, value=value)
        return Cluster(scenario, scheduler)
    if workers is None:
        return nullcontext()
    if workers < 1:
        raise InputError("not a number of processes", "a whole number of at least 1", key="workers", value=workers)
    return Processes(scenario, workers, threads or 1)
