"""The whole access run on one screen: targets -> kernel -> pilot -> origins -> audit -> reductions -> file, tables."""

from __future__ import annotations

import hashlib
import os
import time
from contextlib import ExitStack, closing, suppress
from pathlib import Path
from typing import Any

import numpy as np

from fields.errors import InputError
from tracer import access_csv, store_access
from tracer.access_layout import few_places
from tracer.access_records import AccessResult
from tracer.analysis.access import gathered, reduce
from tracer.integrate import Interrupted
from tracer.kernels.build import kernel_for, program_of
from tracer.machine import processors
from tracer.origins import Origins, audit, compile_kernel, origins, pilot
from tracer.pipeline import threaded
from tracer.progress import Silent, Watcher
from tracer.scenario import Scenario
from tracer.spans import pieces
from tracer.stopping import Stopped
from tracer.store_identity import identity
from tracer.store_origins import ROW_BYTES, ROWS, OriginsFile, OriginsKept, all_told
from tracer.store_output import LOG, PART, check_place, check_replaced, check_room, publish
from tracer.targets import Targets, targets_of

NEW = ".new"  # under which a result is made


def access(
    scenario: Scenario,
    out: str | os.PathLike[str] | None = None,
    *,
    overwrite: bool = False,
    resume: bool = False,
    threads: int | None = None,
    watcher: Watcher | None = None,
) -> AccessResult:
    """Trace all targets of ``[access]`` back to where they came from.

    Parameters
    ----------
    scenario : Scenario
        From `tracer.load` or `tracer.build`.
    out : path, optional
        File to write, and CSV tables beside it; without it the result stays in memory.
    overwrite : bool
        Replace existing files, at the final move; and what an interrupted run has left, at once.
    resume : bool
        Go on with an interrupted run of the same scenario, to the same bits. When `out` is complete already, it is
        opened, and ``result.work`` is empty.
    threads : int, optional
        All processors by default. The result does not depend on it.
    watcher : Watcher, optional
        Told how the run goes.

    Returns
    -------
    AccessResult
        Read on demand from `out`, or in memory. ``result.work`` says what it took.

    Raises
    ------
    InputError
        When the run asks for no access; otherwise as `tracer.trace`.
    Stopped
        On Ctrl-C or a full disk. What was finished is kept beside `out`, for `resume`.
    """
    targets = targets_of(scenario)
    if resume:
        if out is None:
            raise InputError("nothing to resume in memory", "the name of the file", key="out")
        finished = _finished(Path(out), targets)
        if finished is not None:
            return finished
    began = time.perf_counter()
    watch = watcher or Silent()
    sink = OriginsKept(targets.count) if out is None else _file(Path(out), targets, overwrite, resume)
    try:
        try:
            with sink:
                watch.compiling(kernel_for(scenario.field, targets.equatorial).fresh)
                attrs, work = _traced(targets, sink, threads or processors(), watch)
                if isinstance(sink, OriginsKept):
                    result = gathered(targets, sink, attrs)
                else:
                    result = _written(targets, sink, attrs)
                result.work.update(work, wall_s=time.perf_counter() - began)
                return result
        finally:
            watch.done()
    except (KeyboardInterrupt, Interrupted):
        raise Stopped(sink.stopped()) from None


def _traced(
    targets: Targets, sink: OriginsKept | OriginsFile, threads: int, watch: Watcher
) -> tuple[dict[str, Any], dict[str, float]]:
    """Trace what is missing; the attributes of the result, and what it took."""
    kernel = compile_kernel(targets)
    if sink.begun is None:
        watch.piloting()
        sink.begin({"local_tolerance_re": pilot(targets, kernel).local_tolerance})
    assert sink.begun is not None
    tolerance = float(sink.begun["local_tolerance_re"])
    missing = sink.missing()
    work = {"traced": 0.0, "accepted": 0.0, "rejected": 0.0}
    moving = time.perf_counter()
    watch.tracing(sum(stop - first for first, stop in missing))

    def one(first: int, stop: int, stopped: Any) -> Origins:
        return origins(targets, kernel, first, stop, tolerance, watch.advanced, stopped)

    with closing(threaded(one, pieces(missing, ROWS), threads)) as coming:
        for chunk in coming:
            sink.write(chunk)
            for name in work:
                work[name] += chunk.work[name]
    traced_s = time.perf_counter() - moving
    watch.auditing()
    errors = audit(targets, kernel, tolerance)
    attrs = {
        **store_access.described(targets),
        **sink.begun,
        **errors.attrs(),
    }
    return attrs, {**work, "traced_s": traced_s, "targets_per_s": work["traced"] / traced_s}


def _file(path: Path, targets: Targets, overwrite: bool, resume: bool) -> OriginsFile:
    """The unfinished file, once everything that is to be written has been seen to be possible."""
    check_place(path, overwrite, resume)
    for name in _tables(path, targets).values():
        check_replaced(Path(name), overwrite or resume)
    needed = store_access.expected_bytes(targets) + targets.count * ROW_BYTES
    check_room(path, needed, "or fewer targets")
    return OriginsFile(path, targets.count, _identity(targets), overwrite, resume)


def _tables(path: Path, targets: Targets) -> dict[str, str]:
    return access_csv.names(str(path), targets.request.has_map, few_places(targets), bool(targets.orbits))


def _identity(targets: Targets) -> dict[str, Any]:
    """What must be the same for a run to be resumed: that of any run, and all numbers that the targets begin with."""
    found = identity(targets.run, program_of(targets.run.field, targets.equatorial))
    asked = targets.request
    digest = hashlib.sha256(found["run"].encode())
    told = (asked.species, asked.back_hours, asked.source, targets.record_h, [block.shape for block in targets.blocks])
    digest.update(repr(told).encode("utf-8", "surrogatepass"))
    arrays: list[np.ndarray] = [asked.energy_keV, asked.pitch_deg, asked.r_re, asked.mlt_h]
    for block in targets.blocks:
        arrays += [block.time_h, block.r, block.phi, block.mirror, block.k, block.answered]
    for values in arrays:
        digest.update(values.tobytes())
    return {**found, "run": digest.hexdigest()}


def _written(targets: Targets, sink: OriginsFile, attrs: dict[str, Any]) -> AccessResult:
    """Make the file and its tables under other names, and move them into place when all are whole."""
    new = Path(f"{sink.path}{NEW}")
    tables = _tables(sink.path, targets)
    with ExitStack() as cleared:
        for made in (new, *(Path(name + NEW) for name in tables.values())):
            cleared.callback(_gone, made)
            _gone(made)
        with sink.room():
            handle = os.open(new, os.O_RDWR | os.O_CREAT | os.O_EXCL | os.O_CLOEXEC, 0o666)
            try:
                store_access.write(handle, targets, attrs, lambda put: reduce(targets, sink, put))
                os.fsync(handle)
            finally:
                os.close(handle)
            for table, header, rows in access_csv.tables(store_access.open(new)):
                with open(tables[table] + NEW, "x", encoding="utf-8") as stream:
                    access_csv.write(stream, header, rows)

        def move(replaces: bool) -> None:
            if not replaces:
                check_replaced(sink.path, allowed=False)
            for name in tables.values():
                os.replace(name + NEW, name)
            publish(new, sink.path, replaces)

        sink.publish(move)
    return store_access.open(sink.path)


def _finished(path: Path, targets: Targets) -> AccessResult | None:
    """The result when it is complete, so that there is nothing to resume; what a kill at the last step left goes."""
    part, log = Path(f"{path}{PART}"), Path(f"{path}{LOG}")
    waits = log.exists()
    if waits and not all_told(log):
        return None
    try:
        result = store_access.finished(path, Path(f"{path}{NEW}"), targets)
    except InputError:
        if waits:  # it was about to replace what stands there
            return None
        raise
    if result is not None:
        _gone(part)
        _gone(log)
    return result


def _gone(path: Path) -> None:
    with suppress(FileNotFoundError):
        path.unlink()
