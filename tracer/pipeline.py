"""The whole run on one screen: scenario -> kernel -> pilot -> chunks -> store -> audit."""

from __future__ import annotations

import os
import threading
import time
from collections.abc import Callable, Generator, Iterable, Iterator
from concurrent.futures import FIRST_COMPLETED, Future, ThreadPoolExecutor, wait
from contextlib import closing
from typing import TypeVar

import numpy as np

from fields.errors import InputError
from tracer import store
from tracer.accuracy import audit, run_pilot
from tracer.collect import Collector
from tracer.crew import Crew, hired
from tracer.integrate import Interrupted, compile_kernel, run_chunk
from tracer.kernels.build import Kernel, kernel_for, program_of
from tracer.machine import processors
from tracer.progress import Silent, Watcher
from tracer.records import Chunk, Result
from tracer.scenario import Scenario
from tracer.spans import Span, pieces
from tracer.stopping import Stopped, WorkersLost

CHUNK = 4096  # particles
Done = TypeVar("Done")
Sink = store.TrajectoryWriter | Collector


def trace(
    scenario: Scenario,
    out: str | os.PathLike[str] | None = None,
    *,
    overwrite: bool = False,
    resume: bool = False,
    threads: int | None = None,
    workers: int | None = None,
    scheduler: str | None = None,
    watcher: Watcher | None = None,
) -> Result:
    """Trace all particles of a scenario.

    Parameters
    ----------
    scenario : Scenario
        From `tracer.load` or `tracer.build`.
    out : path, optional
        Trajectory file to stream to; without it the result stays in memory.
    overwrite : bool
        Replace an existing file, at the final move; and what an interrupted run has left, at once.
    resume : bool
        Go on with an interrupted run of the same scenario, to the same bits. When `out` is complete already, it is
        opened, and ``result.work`` is empty.
    threads : int, optional
        All processors by default; of each worker process, one. The result does not depend on it.
    workers : int, optional
        So many processes on this machine do the work. The result does not depend on them either.
    scheduler : str, optional
        The workers of a dask.distributed cluster do the work: the address of its scheduler, or its scheduler file.
    watcher : Watcher, optional
        Told how the run goes.

    Returns
    -------
    Result
        Read on demand from `out`, or in memory. ``result.work`` says what it took.

    Raises
    ------
    InputError
        When the run has no population; when `out` cannot be written or exists; with `resume`, when there is nothing to
        resume, or when the input, the versions or the processor are not those of the interrupted run; when a cluster
        cannot be reached, or has workers of other versions or processors.
    Stopped
        On Ctrl-C, a full disk, or when the cluster is lost. What was finished is kept beside `out`, for `resume`.
    """
    if not scenario.populations:
        remedy = "at least one [[population]]"
        raise InputError("nothing to trace", remedy, key="population", file=scenario.origin.file)
    if resume:
        if out is None:
            raise InputError("nothing to resume in memory", "the name of the file", key="out")
        finished = store.finished(out, scenario)
        if finished is not None:
            return finished
    began = time.perf_counter()
    watch = watcher or Silent()
    crew = hired(scenario, threads, workers, scheduler)
    sink = _sink(scenario, out, overwrite, resume)
    try:
        try:
            with sink:
                watch.compiling(kernel_for(scenario.field, scenario.equatorial).fresh)
                with crew as helpers:
                    return _traced(scenario, sink, helpers, threads or processors(), watch, began)
        finally:
            watch.done()
    except (KeyboardInterrupt, Interrupted):
        raise Stopped(sink.stopped()) from None
    except WorkersLost as lost:
        raise Stopped(f"{lost}; {sink.stopped()}") from None


def _traced(scenario: Scenario, sink: Sink, crew: Crew | None, threads: int, watch: Watcher, began: float) -> Result:
    kernel = compile_kernel(scenario)
    if sink.begun is None:
        watch.piloting()
        sink.begin({"local_tolerance_re": run_pilot(scenario, kernel).local_tolerance})
    assert sink.begun is not None
    tolerance = float(sink.begun["local_tolerance_re"])
    missing = sink.missing()
    work = {"accepted": 0.0, "rejected": 0.0, "particles": float(sum(stop - first for first, stop in missing))}
    moving = time.perf_counter()
    watch.tracing(int(work["particles"]))
    slots = crew.slots if crew else threads
    spans = pieces(missing, min(chunk_size(scenario.count, slots), store.most_rows(scenario)))
    source = (
        crew.chunks(spans, tolerance, watch) if crew else chunks(scenario, kernel, spans, tolerance, threads, watch)
    )
    with closing(source) as coming:
        for chunk in coming:
            sink.write(chunk)
            for name in ("accepted", "rejected"):
                work[name] += chunk.work[name]
    traced_s = time.perf_counter() - moving
    watch.auditing()
    errors = audit(scenario, kernel, tolerance)
    sink.finish(errors.attrs())
    result = sink.result()
    rate = work["particles"] / traced_s
    result.work.update(work, traced_s=traced_s, wall_s=time.perf_counter() - began, particles_per_s=rate)
    return result


def chunks(
    scenario: Scenario, kernel: Kernel, spans: Iterable[Span], tolerance: float, threads: int, watch: Watcher
) -> Generator[Chunk]:
    """The chunks of all spans in order of completion; see `threaded`."""

    def one(first: int, stop: int, stopped: Callable[[], bool]) -> Chunk:
        return run_chunk(scenario, kernel, first, stop, tolerance, watch.advanced, stopped)

    return threaded(one, spans, threads)


def threaded(
    work: Callable[[int, int, Callable[[], bool]], Done], spans: Iterable[Span], threads: int
) -> Generator[Done]:
    """What `work` makes of all spans, in order of completion; never more in memory than there are threads and one.

    Whatever ends it early, closing included, the threads have ended by then too: the third argument of `work` tells
    when to stop.
    """
    halt = threading.Event()
    with ThreadPoolExecutor(threads) as pool:
        running: set[Future[Done]] = set()
        try:
            for first, stop in spans:
                running.add(pool.submit(work, first, stop, halt.is_set))
                if len(running) > threads:
                    yield from _completed(running)
            while running:
                yield from _completed(running)
        finally:
            halt.set()  # those still at work, if any, stop at their next batch; leaving the pool waits for them


def chunk_size(count: int, threads: int) -> int:
    """Particles of a chunk: as many as a stripe of the file has at most, or less when there would not be enough for
    all threads."""
    share = -(-count // (4 * threads))
    return int(np.clip(share, 1, CHUNK))


def _completed(running: set[Future[Done]]) -> Iterator[Done]:
    done, _ = wait(running, return_when=FIRST_COMPLETED)
    running -= done
    for future in done:
        yield future.result()


def _sink(scenario: Scenario, out: str | os.PathLike[str] | None, overwrite: bool, resume: bool) -> Sink:
    if out is None:
        return Collector(scenario)
    program = program_of(scenario.field, scenario.equatorial)
    return store.TrajectoryWriter(out, scenario, overwrite=overwrite, resume=resume, program=program)
