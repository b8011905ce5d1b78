"""What a run would compute and cost, and whether drift theory holds in it. Nothing is written."""

from __future__ import annotations

import time
from typing import Any

import numpy as np

from fields.field import Field
from tracer.accuracy import PILOT_SEED, run_pilot, sample, states_of
from tracer.adiabatic import periods
from tracer.integrate import advance, compile_kernel
from tracer.pipeline import chunk_size, processors
from tracer.population import initial_state_at
from tracer.scenario import Population, Scenario, Species
from tracer.store import expected_bytes, most_rows
from tracer.validity import ratios

LOOKED_AT = 256  # particles of each population
TIMED = 256
STAGES = 12  # right-hand sides of a step
RESIDENT_BYTES = 260 * 2**20  # of the interpreter and its libraries, measured


def check(scenario: Scenario, threads: int | None = None) -> dict[str, Any]:
    """What tracing `scenario` would take.

    Parameters
    ----------
    scenario : Scenario
    threads : int, optional
        As for `tracer.trace`.

    Returns
    -------
    dict
        Plain values: ``particles``, ``populations`` (periods in seconds and validity ratios), ``work``,
        ``memory_bytes``, ``disk_bytes``, ``warnings``.
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
        "work": _work(scenario, many),
        "memory_bytes": _memory(scenario, many),
        "disk_bytes": expected_bytes(scenario),
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


def _work(scenario: Scenario, threads: int) -> dict[str, float]:
    """Time a sample with its tracks, at the tolerance that the pilot found."""
    kernel = compile_kernel(scenario)
    began = time.perf_counter()
    pilot = run_pilot(scenario, kernel)
    pilot_s = time.perf_counter() - began
    state = states_of(scenario, sample(scenario, TIMED, PILOT_SEED))
    began = time.perf_counter()
    advance(scenario, kernel, state, pilot.local_tolerance, scenario.save_times_h)
    each_s = (time.perf_counter() - began) / state.shape[0]
    return {
        "local_tolerance_re": pilot.local_tolerance,
        "steps_per_particle": pilot.steps,
        "right_hand_sides": pilot.steps * STAGES * scenario.count,
        "threads": threads,
        "seconds": each_s * scenario.count / threads + 3.0 * pilot_s,
    }


def _memory(scenario: Scenario, threads: int) -> int:
    """The interpreter, and for each thread and one more a chunk of tracks before and after it is arranged."""
    size = min(chunk_size(scenario.count, threads), most_rows(scenario))
    chunk = size * (40.0 + 4.0 * scenario.save_times_h.size) * 8.0
    return int(RESIDENT_BYTES + (threads + 2) * 1.5 * chunk)
