"""Opponent: LSODA and DOP853 of numbalsoda, called inside a numba loop over particles; state (r, phi).

Neither knows events when called so. The right-hand side therefore notes whether it was ever asked beyond a boundary,
and the solver gives a few points between the corners, which cost it next to nothing. Where they show that the particle
has left, a second call over the stretch between two of them gives points so dense that a polynomial finds the crossing.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import lru_cache
from typing import Any

import numpy as np
from bench_polar import compiled_rates
from bench_problems import Problem
from bench_storm import (
    CAUSE,
    DRIFTING,
    FAILED,
    INNER,
    OPTIONS,
    OUTER,
    TIME,
    TURNS,
    R,
    no_ends,
    particles_of,
    storm_of,
)
from numba import carray, cfunc, njit

COARSE, FINE = 9, 65  # points of a segment, and of a stretch of it
AROUND = 4  # points on each side of the crossing that the polynomial takes
MOST_STEPS = 100_000
RELATIVE = 0.1  # tolerance, of the absolute one; measured: the fastest of 0, 0.1 and 1
WIDEST = 1.2  # of the outer boundary: farther out the right-hand side stands still, so that nothing grows without end
# the data of the right-hand side
G, C, K, W, A, FROM, TO, MARK = range(8)


KEPT: list[Any] = []  # compiled right-hand sides live as long as their address is used


def right_hand_side(top: float) -> int:
    """Address of the compiled equations."""
    import numbalsoda

    rates = compiled_rates(top)

    @cfunc(numbalsoda.lsoda_sig, **OPTIONS)
    def slopes(t, u, du, data):  # type: ignore[no-untyped-def]
        d = carray(data, (8,))
        r = u[0]
        if r >= d[TO] or r <= d[FROM]:
            d[MARK] = 1.0
            r = max(d[FROM] / WIDEST, min(r, d[TO] * WIDEST))
        du[0], du[1] = rates(r, u[1], d[G], d[C], d[K], d[W], d[A])

    KEPT.append(slopes)
    return int(slopes.address)


@lru_cache(maxsize=8)
def compiled(method: str, top: float) -> Callable[..., None]:
    """The loop over particles around the solver `method`."""
    import numbalsoda

    solve, address = getattr(numbalsoda, method), right_hand_side(top)

    @njit(**OPTIONS)
    def passed(path, outer, inner):  # type: ignore[no-untyped-def]
        """Index of the first point beyond a boundary; 0 if none."""
        for i in range(1, len(path)):
            if path[i, 0] >= outer or path[i, 0] <= inner:
                return i
        return 0

    @njit(**OPTIONS)
    def along(x, y, at):  # type: ignore[no-untyped-def]
        """Lagrange's polynomial through (x, y)."""
        total = 0.0
        for i in range(x.size):
            weight = y[i]
            for j in range(x.size):
                if j != i:
                    weight *= (at - x[j]) / (x[i] - x[j])
            total += weight
        return total

    @njit(**OPTIONS)
    def crossing(times, path, i, limit):  # type: ignore[no-untyped-def]
        """Time and angle at which r meets `limit` between points i - 1 and i."""
        first = min(max(i - AROUND, 0), times.size - 2 * AROUND)
        around = slice(first, first + 2 * AROUND)
        x, r, phi = times[around], path[around, 0], path[around, 1]
        low, high = times[i - 1], times[i]
        beyond = path[i, 0] > path[i - 1, 0]
        for _ in range(60):
            middle = 0.5 * (low + high)
            if (along(x, r, middle) >= limit) == beyond:
                high = middle
            else:
                low = middle
        return high, along(x, phi, high)

    @njit(**OPTIONS)
    def follow(row, storm, tolerance, end):  # type: ignore[no-untyped-def]
        stops, convection, corotation, outer, inner = storm
        data = np.array([row[2], row[3], row[4], corotation, 0.0, inner, outer, 0.0])
        u, t, turned = row[:2].copy(), 0.0, 0.0
        for segment in range(stops.size):
            data[A], data[MARK] = convection[segment], 0.0
            times = np.linspace(t, stops[segment], COARSE)
            path, fine = solve(address, u, times, data, RELATIVE * tolerance, tolerance, MOST_STEPS)
            if fine and data[MARK] > 0.0:
                i = passed(path, outer, inner)
                first, last = (i - 1, i) if i > 0 else (0, COARSE - 1)
                times, start = np.linspace(times[first], times[last], FINE), path[first].copy()
                dense, fine = solve(address, start, times, data, RELATIVE * tolerance, tolerance, MOST_STEPS)
                i = passed(dense, outer, inner)
                if fine and i > 0:
                    out = dense[i, 0] >= outer
                    end[R], end[CAUSE] = outer if out else inner, OUTER if out else INNER
                    end[TIME], angle = crossing(times, dense, i, end[R])
                    end[TURNS] = (turned + angle - row[1]) / (2.0 * math.pi)
                    return
            if not fine:
                end[CAUSE] = FAILED
                return
            t = stops[segment]
            whole = 2.0 * math.pi * np.rint(path[-1, 1] / (2.0 * math.pi))  # a small angle has a small error
            turned += whole
            u[0], u[1] = path[-1, 0], path[-1, 1] - whole
        end[TIME], end[R], end[CAUSE], end[TURNS] = t, u[0], DRIFTING, (turned + u[1] - row[1]) / (2.0 * math.pi)

    @njit(**OPTIONS)
    def advance(rows, storm, tolerance, ends):  # type: ignore[no-untyped-def]
        for i in range(len(rows)):
            follow(rows[i], storm, tolerance, ends[i])

    return advance


def contender(method: str) -> Callable[[Problem, np.ndarray, float], np.ndarray]:
    """`lsoda` or `dop853`, as `bench_problems.Run` has it."""

    def run(asked: Problem, state: np.ndarray, tolerance: float) -> np.ndarray:
        storm, ends = storm_of(asked), no_ends(len(state))
        compiled(method, storm.top)(particles_of(asked, state), storm[:5], tolerance, ends)
        return ends

    return run
