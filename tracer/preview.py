"""What a run would compute and cost, and whether drift theory holds in it. Nothing is written."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fields.field import Field
from tracer.access_preview import foretold
from tracer.accuracy import COARSE, PILOT_SEED, run_pilot, sample, states_of
from tracer.adiabatic import periods
from tracer.integrate import Tick, advance, compile_kernel
from tracer.kernels.build import Kernel, kernel_for
from tracer.machine import processors
from tracer.memory import resident_bytes
from tracer.pace import measured
from tracer.pipeline import chunk_size
from tracer.population import initial_state_at
from tracer.progress import Silent, Watcher
from tracer.scenario import Population, Scenario, Species
from tracer.store import expected_bytes, most_rows
from tracer.store_checksum import fletcher32
from tracer.validity import ratios

LOOKED_AT = 256  # particles of each population
STAGES = 12  # right-hand sides of a step
# Measured on one server. Of a kernel on the disk: what loading it takes.
LOADING_S, LOADED_BYTES = 0.2, 44 * 2**20
OPENING_S = 0.25  # making the file, and closing it
WRITING_S, FLUSHING_S = 1.5e-9, 0.8e-9  # for a byte: the processor's part, and the wait for the disk at the end
ROW_BYTES, TIME_BYTES = 8 * 40, 8 * 4  # of a particle in a chunk in memory, and of each of its saved times
WORKING_BYTES = 10 * 2**20  # whatever else a run holds


def check(scenario: Scenario, threads: int | None = None, watcher: Watcher | None = None) -> dict[str, Any]:
    """What tracing `scenario` would take.

    Parameters
    ----------
    scenario : Scenario
    threads : int, optional
        As for `tracer.trace`.
    watcher : Watcher, optional
        Told when the kernel is compiled and the pilot sample traced.

    Returns
    -------
    dict
        Plain values: ``particles``, ``populations`` (periods in seconds and validity ratios), ``work`` (empty where
        there is no particle), ``memory_bytes``, ``disk_bytes``, ``access`` (see `tracer.access_preview`; empty where
        none is asked for), ``warnings``. ``work["seconds"]``, ``memory_bytes``
        and ``disk_bytes`` are what a process of its own would tell of a trace into a file, see
        `tracer.tables.closing`.
    """
    many = threads or processors()
    offset, described = 0, []
    for population in scenario.populations:
        described.append(_population(scenario, population, offset))
        offset += population.count
    return {
        "title": scenario.title,
        "start": scenario.start.isoformat().replace("+00:00", "Z"),
        "end_h": scenario.end_h,
        "field": scenario.field.described(),
        "particles": scenario.count,
        "saved_times": int(scenario.save_times_h.size),
        "populations": described,
        **_costs(scenario, many, watcher or Silent()),
        "access": foretold(scenario, many, watcher or Silent()) if scenario.access else {},
        "warnings": [*scenario.field.warnings(), *scenario.origin.remarks],
    }


def _population(scenario: Scenario, population: Population, offset: int) -> dict[str, Any]:
    index = offset + _spread(population.count)
    columns = initial_state_at(scenario, index)
    return {
        "name": population.name,
        "species": population.species.name,
        "count": population.count,
        "draw": population.draw,
        "seed": population.seed,
        "periods_s": _periods(scenario.field, population.species, columns),
        "validity": [vars(ratio) for ratio in ratios(scenario.field, population.species, columns)],
    }


def _spread(count: int) -> np.ndarray:
    if count <= LOOKED_AT:
        return np.arange(count)
    return np.sort(np.random.default_rng(PILOT_SEED).choice(count, LOOKED_AT, replace=False))


def _periods(field: Field, species: Species, columns: dict[str, np.ndarray]) -> dict[str, list[float] | None]:
    """Smallest, median and largest of each period; None where nothing moves."""
    moving = columns["energy_keV"] > 0
    if not np.any(moving):
        return {"gyro": None, "bounce": None, "drift": None}
    chosen = (columns[name][moving] for name in ("energy_keV", "pitch_deg", "r_re", "mlt_h"))
    found = periods(field, species, *chosen)
    return {
        name: [float(np.quantile(values, q)) for q in (0.0, 0.5, 1.0)]
        for name, values in (("gyro", found.gyro_s), ("bounce", found.bounce_s), ("drift", found.drift_s))
    }


def _costs(scenario: Scenario, threads: int, watch: Watcher) -> dict[str, Any]:
    """Time, memory and disk."""
    if not scenario.count:
        return {"work": {}, "memory_bytes": resident_bytes(), "disk_bytes": 0}
    try:
        loaded = _loaded(scenario, watch)
        disk = expected_bytes(scenario)
        watch.piloting()
        work = _work(scenario, loaded, threads, disk)
    finally:
        watch.done()
    return {"work": work, "memory_bytes": _memory(scenario, loaded, threads), "disk_bytes": disk}


@dataclass(frozen=True)
class Loaded:
    """A kernel, and what a process takes to have it: seconds, and bytes of memory with all that it had before."""

    kernel: Kernel
    seconds: float
    memory_bytes: int


def _loaded(scenario: Scenario, watch: Watcher) -> Loaded:
    before, began = resident_bytes(), time.perf_counter()
    fresh = kernel_for(scenario.field, scenario.equatorial).fresh
    watch.compiling(fresh)
    kernel = compile_kernel(scenario)
    fletcher32(np.zeros(1))  # compiled too, and of no field
    if fresh:  # the trace will find it on the disk
        return Loaded(kernel, LOADING_S, before + LOADED_BYTES)
    return Loaded(kernel, time.perf_counter() - began, resident_bytes())


def _work(scenario: Scenario, loaded: Loaded, threads: int, disk_bytes: int) -> dict[str, float]:
    """The run's steps in turn, each timed on a sample or taken from what was measured."""
    began = time.perf_counter()
    pilot = run_pilot(scenario, loaded.kernel)
    pilot_s = time.perf_counter() - began
    audit_s = pilot_s * (COARSE * scenario.output.tolerance_re / pilot.local_tolerance) ** 0.125  # as steps go
    traced_s = scenario.count / _rate(scenario, loaded.kernel, pilot.local_tolerance, threads)
    # whoever writes needs a processor too
    busy_s = (traced_s * min(threads, processors()) + WRITING_S * disk_bytes) / processors()
    return {
        "local_tolerance_re": pilot.local_tolerance,
        "steps_per_particle": pilot.steps,
        "right_hand_sides": pilot.steps * STAGES * scenario.count,
        "threads": threads,
        "seconds": loaded.seconds
        + pilot_s
        + max(traced_s, busy_s, WRITING_S * disk_bytes)
        + audit_s
        + OPENING_S
        + FLUSHING_S * disk_bytes,
    }


def _rate(scenario: Scenario, kernel: Kernel, tolerance: float, threads: int) -> float:
    """Particles per second of all threads together."""

    def work(index: NDArray[np.int64], tick: Tick, enough: Callable[[], bool]) -> None:
        advance(scenario, kernel, states_of(scenario, index), tolerance, scenario.save_times_h, tick, enough)

    def chosen(seed: int) -> NDArray[np.int64]:
        return sample(scenario, threads * _rows(scenario, threads), seed)

    return measured(work, chosen, PILOT_SEED, threads)


def _rows(scenario: Scenario, threads: int) -> int:
    """Particles of a chunk in memory."""
    return min(chunk_size(scenario.count, threads), most_rows(scenario))


def _memory(scenario: Scenario, loaded: Loaded, threads: int) -> int:
    """A process with its kernel, a chunk for each thread and two more, finished and being written, and the rest."""
    chunk = _rows(scenario, threads) * (ROW_BYTES + TIME_BYTES * scenario.save_times_h.size)
    return loaded.memory_bytes + (threads + 2) * chunk + WORKING_BYTES
