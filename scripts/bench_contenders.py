"""Who takes part. To add one: write a function of (problem, state, tolerance) that gives end states; list it below."""

from __future__ import annotations

import importlib
from concurrent.futures import ThreadPoolExecutor
from typing import Any

import numpy as np
from bench_problems import Contender, Problem
from scipy.integrate import solve_ivp

from tracer.integrate import advance
from tracer.pipeline import processors
from tracer.status import Cause

STAGES = 13  # of a step: twelve, and one at its end


def one_thread(asked: Problem, state: np.ndarray, tolerance: float) -> np.ndarray:
    """The project's kernel."""
    return advance(asked.scenario, asked.kernel, state, tolerance, np.empty(0))[0]


def all_threads(asked: Problem, state: np.ndarray, tolerance: float) -> np.ndarray:
    """The project's kernel, on all processors."""
    parts = np.array_split(state, 4 * processors())
    with ThreadPoolExecutor(processors()) as pool:
        return np.concatenate(list(pool.map(lambda part: one_thread(asked, part, tolerance), parts)))


def by_scipy(asked: Problem, state: np.ndarray, tolerance: float) -> np.ndarray:
    """scipy.integrate.solve_ivp, DOP853, on the compiled right-hand side; restarted at each corner."""
    kernel, domain, end_h = asked.kernel, asked.scenario.domain, asked.scenario.end_h
    slope = importlib.import_module(f"{kernel.module.__name__.rpartition('.')[0]}.drift").slope_at
    causes = (Cause.OUTER, Cause.INNER)

    def outer(t: float, y: np.ndarray) -> Any:
        return y[0] - domain.outer_re

    def inner(t: float, y: np.ndarray) -> Any:
        return domain.inner_re - y[0]

    for event in (outer, inner):
        event.terminal, event.direction = True, 1.0  # type: ignore[attr-defined]
    ends = np.full((len(state), 10), np.nan)
    for row, end in zip(state, ends):
        p, y = tuple(map(float, row[3:7])), row[:2]
        cause = Cause.DRIFTING
        for begin, stop, segment in zip(kernel.edges[:-1], kernel.edges[1:], kernel.segments):
            if begin >= end_h or cause != Cause.DRIFTING:
                break
            drivers = tuple(map(float, segment))
            with np.errstate(invalid="ignore"):  # a trial step may reach infinity; it is rejected
                done = solve_ivp(
                    lambda t, y, D=drivers, p=p: slope(t, y[0], y[1], p, kernel.constants, D),
                    (begin, min(stop, end_h)), y, "DOP853", rtol=tolerance, atol=tolerance, events=(outer, inner),
                )  # fmt: skip
            y = done.y[:, -1]
            if done.status == 1:
                cause = causes[int(done.t_events[0].size == 0)]
                y = done.y_events[causes.index(cause)][0]
        end[1], end[5], end[6] = y[0], cause, (y[1] - row[1]) / (2.0 * np.pi)
    return ends


CONTENDERS = [
    Contender("driftrose, 1 thread", one_thread, 20000, STAGES),
    Contender(f"driftrose, {processors()} threads", all_threads, 40000, STAGES),
    Contender("scipy solve_ivp, DOP853", by_scipy, 100),
]
