"""Opponent: scipy.integrate.solve_ivp, DOP853, on a compiled right-hand side in (r, phi), restarted at each corner."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from bench_polar import compiled_rates
from bench_problems import Problem
from bench_storm import CAUSE, DRIFTING, INNER, OUTER, TIME, TURNS, R, no_ends, particles_of, storm_of
from scipy.integrate import solve_ivp


def by_scipy(asked: Problem, state: np.ndarray, tolerance: float) -> np.ndarray:
    """One particle after another."""
    storm, ends = storm_of(asked), no_ends(len(state))
    rates = compiled_rates(storm.top)

    def outer(t: float, y: np.ndarray, *_: float) -> Any:
        return y[0] - storm.outer

    def inner(t: float, y: np.ndarray, *_: float) -> Any:
        return storm.inner - y[0]

    for event in (outer, inner):
        event.terminal, event.direction = True, 1.0  # type: ignore[attr-defined]
    for row, end in zip(particles_of(asked, state).tolist(), ends):
        y, t, cause, which = np.array(row[:2]), 0.0, DRIFTING, (OUTER, INNER)
        for stop, convection in zip(storm.stops.tolist(), storm.convection.tolist()):
            with np.errstate(invalid="ignore"):  # a trial step may reach infinity; it is rejected
                done = solve_ivp(
                    lambda t, y, *p: rates(y[0], y[1], *p), (t, stop), y, "DOP853", rtol=tolerance, atol=tolerance,
                    events=(outer, inner), args=(*row[2:], storm.corotation, convection),
                )  # fmt: skip
            y, t = done.y[:, -1], float(done.t[-1])
            if done.status == 1:
                met = int(done.t_events[0].size == 0)
                cause, y, t = which[met], done.y_events[met][0], float(done.t_events[met][0])
                break
        end[TIME], end[R], end[CAUSE], end[TURNS] = t, y[0], cause, (y[1] - row[1]) / (2.0 * math.pi)
    return ends
