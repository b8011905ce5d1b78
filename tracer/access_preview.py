"""What a run would ask about access, and what it would cost. Nothing is written."""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import Any

import numpy as np

from fields.clock import hours_later, micros, utc_text
from fields.units import Floats
from tracer.access_layout import scales
from tracer.accuracy import COARSE, PILOT_SEED, Pilot
from tracer.integrate import Tick, advance
from tracer.kernels.build import Kernel, kernel_for
from tracer.orbit import Orbit
from tracer.origins import compile_kernel, pilot, sample_states
from tracer.pace import measured
from tracer.progress import Watcher
from tracer.scenario import Scenario
from tracer.store_access import expected_bytes
from tracer.store_origins import ROW_BYTES, ROWS
from tracer.targets import Targets, targets_of, traced_count

LOADING_S = 0.3  # of a kernel on the disk; measured on one server, as what follows
OPENING_S, WRITING_S = 0.2, 6e-9  # making the files; for a byte of them


def foretold(scenario: Scenario, threads: int, watch: Watcher) -> dict[str, Any]:
    """What `tracer.access` would do.

    Parameters
    ----------
    scenario : Scenario
        With ``[access]``.
    threads : int
    watch : Watcher
        Told when the kernel is compiled and the pilot sample traced.

    Returns
    -------
    dict
        Plain values: ``targets``, ``traced`` (those whose outcome is not known beforehand), ``map`` (its sizes by
        axis), ``back_hours``, ``record_begin_h``, ``source``, ``orbits``, ``seconds``, ``disk_bytes`` (at the most, the
        unfinished file included).

    Raises
    ------
    InputError
        When an orbit cannot be computed.
    """
    targets = targets_of(scenario)
    asked = targets.request
    traced = sum(traced_count(block) for block in targets.blocks)
    disk = expected_bytes(targets) + targets.count * ROW_BYTES
    sizes = {axis: values.size for axis, values in scales(targets).items() if axis != "spacecraft"}
    return {
        "targets": targets.count,
        "traced": traced,
        "map": sizes if asked.has_map else {},
        "back_hours": asked.back_hours,
        "record_begin_h": targets.record_h,
        "source": {"r_re": asked.source.r_re, "from_mlt_h": asked.source.from_h, "to_mlt_h": asked.source.to_h},
        "orbits": [_orbit(targets, orbit) for orbit in targets.orbits],
        **_work(targets, traced, threads, watch, disk),
        "disk_bytes": disk,
    }


def _orbit(targets: Targets, orbit: Orbit) -> dict[str, Any]:
    start = micros(targets.run.start)
    inside = orbit.inside
    in_reach = inside & ~orbit.out_of_reach(targets.request.pitch_deg)
    return {
        "name": orbit.name,
        "times": orbit.time_h.size,
        "every_min": orbit.every_min,
        "from": utc_text(hours_later(start, float(orbit.time_h[0]))),
        "to": utc_text(hours_later(start, float(orbit.time_h[-1]))),
        "r_re": [float(orbit.r_re[inside].min()), float(orbit.r_re[inside].max())] if inside.any() else None,
        "share_inside": float(np.mean(inside)),
        "share_in_reach": {
            f"{pitch:.4g}": float(np.mean(row)) for pitch, row in zip(targets.request.pitch_deg, in_reach)
        },
    }


def _work(targets: Targets, traced: int, threads: int, watch: Watcher, disk_bytes: int) -> dict[str, Any]:
    """The run's steps in turn, each timed on a sample or taken from what was measured."""
    try:
        began = time.perf_counter()
        fresh = kernel_for(targets.scenario.field, targets.equatorial).fresh
        watch.compiling(fresh)
        kernel = compile_kernel(targets)
        loading_s = LOADING_S if fresh else time.perf_counter() - began
        watch.piloting()
        began = time.perf_counter()
        found = pilot(targets, kernel)
        pilot_s = time.perf_counter() - began
        audit_s = pilot_s * (COARSE * targets.scenario.output.tolerance_re / found.local_tolerance) ** 0.125
        rate = _rate(targets, kernel, found, threads)
    finally:
        watch.done()
    tracing_s = traced / rate if rate else 0.0
    return {
        "local_tolerance_re": found.local_tolerance,
        "steps_per_target": found.steps,
        "threads": threads,
        "seconds": loading_s + pilot_s + tracing_s + audit_s + OPENING_S + WRITING_S * disk_bytes,
    }


def _rate(targets: Targets, kernel: Kernel, found: Pilot, threads: int) -> float:
    """Targets traced per second of all threads together."""

    def work(part: Floats, tick: Tick, enough: Callable[[], bool]) -> None:
        advance(targets.scenario, kernel, part, found.local_tolerance, np.empty(0), tick, enough)

    return measured(work, lambda seed: sample_states(targets, seed, threads * ROWS), PILOT_SEED, threads)
