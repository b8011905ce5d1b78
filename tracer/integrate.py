"""Consecutive particles of a run through the compiled kernel: initial state in, columns in file units out. No
files."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fields.units import Floats, cot2_of_pitch, k_to_re_sqrtG, mu_to_MeV_per_G, phi_from_mlt, rest_energy_keV
from tracer.adiabatic import momentum_term
from tracer.kernels.build import Kernel, kernel_for
from tracer.population import initial_state, initial_state_at
from tracer.records import END, PARTICLE, TRACK, Chunk
from tracer.scenario import Scenario

# Particles between two looks at the stop signal: as many as take the time below, which depends on what they are.
FIRST_BATCH, LARGEST_BATCH = 64, 16384
BATCH_S = 0.2
CONE_MODES = {"off": 0, "flag": 1, "stop": 2}
END_ORDER = ("time_h", "r_re", "mlt_h", "energy_keV", "pitch_deg", "cause", "turns", "loss_cone_h")
ACCEPTED, REJECTED = 8, 9
DTYPES = {(c.group, c.name): c.dtype for c in (*PARTICLE, *TRACK, *END)}

Tick = Callable[[int], None]


class Interrupted(Exception):  # noqa: N818 - nothing went wrong
    """The caller asked to stop between two batches."""


@dataclass(frozen=True, eq=False)
class Prepared:
    """Particles as the kernel takes them.

    Attributes
    ----------
    columns : dict of ndarray
        The ``/particle`` columns, invariants included.
    state : ndarray, shape (n, 8)
        r, phi, release, mu, k, 1/q, 2/(m c^2), end of tracing; internal units.
    """

    columns: dict[str, np.ndarray]
    state: Floats


def prepare(scenario: Scenario, first: int, stop: int) -> Prepared:
    """Initial states and invariants of particles `first` to `stop` - 1."""
    return _prepared(scenario, initial_state(scenario, first, stop))


def prepare_at(scenario: Scenario, index: NDArray[np.int64]) -> Prepared:
    """Initial states and invariants of scattered particles."""
    return _prepared(scenario, initial_state_at(scenario, index))


def _prepared(scenario: Scenario, columns: dict[str, np.ndarray]) -> Prepared:
    r, phi = columns["r_re"], phi_from_mlt(columns["mlt_h"])
    cot2 = cot2_of_pitch(columns["pitch_deg"])
    rest = rest_energy_keV(columns["mass_kg"])
    mirror = scenario.field.equatorial_field(r, phi) * (1.0 + cot2)
    mu = momentum_term(columns["energy_keV"], rest) / mirror
    k = scenario.field.lines.second_invariant(cot2, r, phi)
    columns["mu_MeV_per_G"] = mu_to_MeV_per_G(mu)
    columns["K_re_sqrtG"] = k_to_re_sqrtG(k)
    end = np.full_like(r, scenario.end_h)
    state = np.stack([r, phi, columns["release_h"], mu, k, 1.0 / columns["charge_e"], 2.0 / rest, end], axis=1)
    return Prepared(columns, state)


def advance(
    scenario: Scenario,
    kernel: Kernel,
    state: Floats,
    tolerance: float,
    times: Floats,
    tick: Tick | None = None,
    stopped: Callable[[], bool] | None = None,
) -> tuple[Floats, Floats]:
    """Run the kernel over `state`, batch by batch.

    Parameters
    ----------
    tolerance : float
        Local error per step, R_E.
    times : ndarray
        Run times to save.
    tick : callable, optional
        Called with the number of particles done, after each batch.
    stopped : callable, optional
        Asked before each batch.

    Returns
    -------
    end : ndarray, shape (n, 10)
    track : ndarray, shape (n, 4, n_time)

    Raises
    ------
    Interrupted
        When `stopped` says so.
    """
    domain = scenario.domain
    rules = (
        scenario.direction,
        domain.outer_re,
        domain.inner_re,
        domain.foot_re,
        CONE_MODES[scenario.loss_cone],
        tolerance,
    )
    end = np.full((state.shape[0], 10), np.nan)
    track = np.full((state.shape[0], 4, times.size), np.nan)
    low, size = 0, FIRST_BATCH
    while low < state.shape[0]:
        if stopped is not None and stopped():
            raise Interrupted
        began = time.perf_counter()
        batch = slice(low, low + size)
        kernel.module.advance(
            state[batch], kernel.constants, kernel.edges, kernel.segments, rules, times, end[batch], track[batch]
        )
        if tick is not None:
            tick(state[batch].shape[0])
        low += size
        size = int(np.clip(size * BATCH_S / max(time.perf_counter() - began, 1e-4), FIRST_BATCH, LARGEST_BATCH))
    return end, track


def run_chunk(
    scenario: Scenario,
    kernel: Kernel,
    first: int,
    stop: int,
    tolerance: float,
    tick: Tick | None = None,
    stopped: Callable[[], bool] | None = None,
) -> Chunk:
    """Trace particles `first` to `stop` - 1: a pure function of the scenario, the tolerance and the indices."""
    began = time.perf_counter()
    prepared = prepare(scenario, first, stop)
    end, track = advance(scenario, kernel, prepared.state, tolerance, scenario.save_times_h, tick, stopped)
    ends = {name: end[:, i].astype(DTYPES["end", name]) for i, name in enumerate(END_ORDER)}
    tracks = {column.name: track[:, i] for i, column in enumerate(TRACK)} if scenario.save_times_h.size else {}
    work = {
        "accepted": float(end[:, ACCEPTED].sum()),
        "rejected": float(end[:, REJECTED].sum()),
        "seconds": time.perf_counter() - began,
    }
    return Chunk(first, prepared.columns, tracks, ends, work)


def compile_kernel(scenario: Scenario) -> Kernel:
    """The scenario's kernel, ready to run."""
    return warmed(kernel_for(scenario.field, scenario.equatorial), scenario.direction)


def warmed(kernel: Kernel, direction: float) -> Kernel:
    """A kernel ready to run: compiled, or loaded from the disk, by a run over no particle."""
    rules = (direction, 2.0, 1.0, 1.0, 0, 1.0)
    state, times, end, track = np.zeros((0, 8)), np.empty(0), np.zeros((0, 10)), np.zeros((0, 4, 0))
    kernel.module.advance(state, kernel.constants, kernel.edges, kernel.segments, rules, times, end, track)
    return kernel
