"""The whole run on one screen: scenario -> kernel -> pilot -> chunks -> store -> audit."""

from __future__ import annotations

import os
import threading
import time
from collections.abc import Generator, Iterator
from concurrent.futures import FIRST_COMPLETED, Future, ThreadPoolExecutor, wait
from contextlib import closing
from pathlib import Path
from typing import Any

import numpy as np

from tracer import store
from tracer.accuracy import audit, run_pilot
from tracer.collect import Collector
from tracer.integrate import Interrupted, compile_kernel, run_chunk
from tracer.kernels.build import Kernel
from tracer.progress import Silent, Watcher
from tracer.records import Chunk, Result
from tracer.scenario import Scenario
from tracer.stopping import Stopped

CHUNK = 4096  # particles: one row of chunks in the file


def trace(
    scenario: Scenario,
    out: str | os.PathLike[str] | None = None,
    *,
    overwrite: bool = False,
    threads: int | None = None,
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
        Replace an existing file, at the final move.
    threads : int, optional
        All processors by default. The result does not depend on it.
    watcher : Watcher, optional
        Told how the run goes.

    Returns
    -------
    Result
        Read on demand from `out`, or in memory. ``result.work`` says what it took.

    Raises
    ------
    InputError
        When `out` cannot be written or exists.
    Stopped
        On Ctrl-C; nothing is left behind.
    """
    try:
        return _trace(scenario, out, overwrite, threads or processors(), watcher or Silent())
    except (KeyboardInterrupt, Interrupted):
        raise Stopped("stopped before the end; nothing was kept") from None


def _trace(
    scenario: Scenario, out: str | os.PathLike[str] | None, overwrite: bool, threads: int, watch: Watcher
) -> Result:
    began = time.perf_counter()
    if out is not None:
        store.check_output(out, scenario, overwrite)
    watch.compiling()
    kernel = compile_kernel(scenario)
    watch.piloting()
    pilot = run_pilot(scenario, kernel)
    extra: dict[str, Any] = {"local_tolerance_re": pilot.local_tolerance}
    work = {"accepted": 0.0, "rejected": 0.0}
    moving = time.perf_counter()
    with _sink(scenario, out, extra, overwrite) as sink:
        with closing(chunks(scenario, kernel, pilot.local_tolerance, threads, watch)) as coming:
            for chunk in coming:
                sink.write(chunk)
                work = {name: work[name] + chunk.work[name] for name in work}
        traced_s = time.perf_counter() - moving
        errors = audit(scenario, kernel, pilot.local_tolerance)
        measured = {
            "end_error_50_re": errors.median,
            "end_error_99_re": errors.most,
            "end_error_100_re": errors.worst,
            "end_error_sample": errors.count,
        }
        sink.finish(measured)
    watch.done()
    work |= {"traced_s": traced_s, "wall_s": time.perf_counter() - began}
    result = sink.result() if isinstance(sink, Collector) else store.open(sink.path)
    result.work.update(work, particles_per_s=scenario.count / traced_s)
    return result


def processors() -> int:
    """Processors that this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def chunks(scenario: Scenario, kernel: Kernel, tolerance: float, threads: int, watch: Watcher) -> Generator[Chunk]:
    """All chunks in order of completion; never more in memory than there are threads and one.

    Whatever ends it early, closing included, the threads have ended by then too.
    """
    halt = threading.Event()
    size = chunk_size(scenario.count, threads)
    watch.tracing(scenario.count)

    def one(first: int) -> Chunk:
        return run_chunk(
            scenario, kernel, first, min(first + size, scenario.count), tolerance, watch.advanced, halt.is_set
        )

    with ThreadPoolExecutor(threads) as pool:
        running: set[Future[Chunk]] = set()
        try:
            for first in range(0, scenario.count, size):
                running.add(pool.submit(one, first))
                if len(running) > threads:
                    yield from _finished(running)
            while running:
                yield from _finished(running)
        finally:
            halt.set()  # those still at work, if any, stop at their next batch; leaving the pool waits for them


def chunk_size(count: int, threads: int) -> int:
    """Particles of a chunk: whole rows of the file's chunks, or less when there would not be enough for all
    threads."""
    share = -(-count // (4 * threads))
    return int(np.clip(share, 1, CHUNK))


def _finished(running: set[Future[Chunk]]) -> Iterator[Chunk]:
    done, _ = wait(running, return_when=FIRST_COMPLETED)
    running -= done
    for future in done:
        yield future.result()


def _sink(
    scenario: Scenario, out: str | os.PathLike[str] | None, extra: dict[str, Any], overwrite: bool
) -> store.TrajectoryWriter | Collector:
    if out is None:
        return Collector(scenario, {**store.provenance(scenario), **extra})
    return store.TrajectoryWriter(Path(out), scenario, extra, overwrite)
