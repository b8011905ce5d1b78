"""Opponent: the Taylor-series integrators of heyoka, one particle at a time and in batches.

The same equations as symbols, in (r, phi) or in (x, y) with the angle as a third unknown that counts the turns. Drivers
are parameters, changed at every corner; the boundaries are terminal events. A lane of a batch whose particle has ended
takes the next, and particles of like pace ride together, so that few lanes wait.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import lru_cache
from typing import Any

import numpy as np
from bench_mirror import formula
from bench_problems import Problem
from bench_storm import CAUSE, DRIFTING, FAILED, GOOD, INNER, OUTER, TIME, TURNS, R, no_ends, particles_of, storm_of

POLAR, PLANE = "(r, phi)", "(x, y)"
DEGREES = ((1e-8, 12), (1e-11, 14), (0.0, 16))  # of the mirror field's formula, down to which tolerance
CAUSES = {-1: OUTER, -2: INNER}  # by the number of the event
FAST = {"fast_math": True}  # measured: a quarter to a half less time


def powers(n: Any, degree: int) -> list[Any]:
    """1, n, n^2 and so on, each as one product."""
    found = [1.0, n]
    for i in range(2, degree + 1):
        found.append(found[i // 2] * found[i - i // 2])
    return found


def gradient_drift(r: Any, r4: Any, top: float, tolerance: float) -> Any:
    """``g Q / sqrt(r^4 + c P r)`` of `bench_storm`, as good as the tolerance asks for."""
    import heyoka as hy

    g, c, k = hy.par[2], hy.par[3], hy.par[4]
    if top == 0.0:
        return 3.0 * g / hy.sqrt(r4 + c * r)
    degree = next(degree for least, degree in DEGREES if tolerance > least)
    scale, shift, p, q = formula(top, degree)
    s = 1.0 + k * hy.sqrt(r)
    n = powers(scale * s ** (-1.0 / 3.0) + shift, degree)
    P, Q = (hy.sum([hy.expression(float(f[0])), *(float(a) * b for a, b in zip(f[1:], n[1:]))]) for f in (p, q))
    s2 = s * s
    return g * (s2 * Q) / hy.sqrt(r4 + c * (r * (s2 * P)))


def system(state: str, top: float, tolerance: float) -> tuple[list[Any], Any, float]:
    """Equations, what the boundaries are given in, and which power of r that is. Parameters: a, w, g, c, kappa."""
    import heyoka as hy

    a, w = hy.par[0], hy.par[1]
    if state == POLAR:
        r, phi = hy.make_vars("r", "phi")
        r2 = r * r
        r4 = r2 * r2
        turn = w - gradient_drift(r, r4, top, tolerance)
        return [(r, a * (r4 * hy.cos(phi))), (phi, turn - 2.0 * (a * (r2 * r * hy.sin(phi))))], r, 1.0
    x, y, phi = hy.make_vars("x", "y", "phi")
    r2 = x * x + y * y
    turn = w - gradient_drift(hy.sqrt(r2), r2 * r2, top, tolerance)
    b = a * r2
    by = b * y
    return [(x, b * (r2 + y * y) - turn * y), (y, x * (turn - by)), (phi, turn - 2.0 * by)], r2, 2.0


@lru_cache(maxsize=256)
def integrator(state: str, batch: int, top: float, outer: float, inner: float, tolerance: float) -> Any:
    """A compiled integrator, of batches of particles or, with `batch` 0, of one."""
    import heyoka as hy

    equations, place, power = system(state, top, tolerance)
    event = hy.t_event_batch if batch else hy.t_event
    events = [
        event(place - outer**power, direction=hy.event_direction.positive),
        event(place - inner**power, direction=hy.event_direction.negative),
    ]
    shape, parameters = (batch,) if batch else (), 5 if top > 0.0 else 4
    return (hy.taylor_adaptive_batch if batch else hy.taylor_adaptive)(
        equations,
        np.full((len(equations), *shape), 5.0),
        pars=np.zeros((parameters, *shape)),
        tol=tolerance,
        t_events=events,
        **FAST,
    )


def begun(state: str, rows: np.ndarray) -> np.ndarray:
    """Unknowns at release, shape (n, 2 or 3)."""
    r, phi = rows[:, 0], rows[:, 1]
    return rows[:, :2] if state == POLAR else np.stack([r * np.cos(phi), r * np.sin(phi), phi], axis=1)


def fill(ends: np.ndarray, state: str, found: np.ndarray, rows: np.ndarray) -> None:
    """End states from columns time, cause, steps, unknowns."""
    ends[:, TIME], ends[:, CAUSE], ends[:, GOOD] = found[:, 0], found[:, 1], found[:, 2]
    ends[:, R] = found[:, 3] if state == POLAR else np.hypot(found[:, 3], found[:, 4])
    ends[:, TURNS] = (found[:, -1] - rows[:, 1]) / (2.0 * math.pi)


def one_by_one(state: str, asked: Problem, particles: np.ndarray, tolerance: float) -> np.ndarray:
    """Particle after particle."""
    import heyoka as hy

    storm, rows, ends = storm_of(asked), particles_of(asked, particles), no_ends(len(particles))
    ta = integrator(state, 0, storm.top, storm.outer, storm.inner, tolerance)
    unknowns, parameters, until = ta.state, ta.pars, ta.propagate_until
    segments = list(zip(storm.stops.tolist(), storm.convection.tolist()))
    kinds = rows[:, 2 : 2 + len(parameters) - 2]
    parameters[1] = storm.corotation
    found, limit = [], hy.taylor_outcome.time_limit
    for start, kind in zip(begun(state, rows), kinds):
        unknowns[:], parameters[2:] = start, kind
        ta.time = 0.0
        ta.reset_cooldowns()
        cause, steps = DRIFTING, 0
        for stop, convection in segments:
            parameters[0] = convection
            outcome, _, _, took, *_ = until(stop)
            steps += took
            if outcome != limit:
                cause = CAUSES.get(int(outcome), FAILED)
                break
        found.append((ta.time, cause, steps, *unknowns))
    fill(ends, state, np.array(found), rows)
    return ends


class Lanes:
    """The particles that ride in a batch, and those that wait."""

    def __init__(self, ta: Any, state: str, rows: np.ndarray, stops: list[float], convection: list[float]) -> None:
        self.ta, self.stops, self.convection = ta, stops, convection
        self.starts, self.kinds = begun(state, rows), rows[:, 2 : 2 + len(ta.pars) - 2]
        self.unknowns, self.parameters = ta.state, ta.pars
        self.found: list[Any] = [None] * len(rows)
        self.waiting = self.live = len(rows)
        self.owner, self.segment, self.steps = ([0] * ta.batch_size for _ in range(3))
        self.limit, self.time = [0.0] * ta.batch_size, np.zeros(ta.batch_size)
        for lane in range(ta.batch_size):
            self.take(lane)

    def take(self, lane: int) -> None:
        """Give `lane` the next particle; without one it stands still."""
        self.waiting -= 1
        self.owner[lane] = self.waiting
        if self.waiting < 0:
            self.limit[lane] = float(self.time[lane])
            return
        self.unknowns[:, lane], self.parameters[2:, lane] = self.starts[self.waiting], self.kinds[self.waiting]
        self.parameters[0, lane], self.time[lane] = self.convection[0], 0.0
        self.limit[lane], self.segment[lane], self.steps[lane] = self.stops[0], 0, 0

    def advance(self, limit: Any, stopped: Any) -> None:
        """To the next end of a particle, or of all lanes' segments; `limit` and `stopped` are outcomes."""
        self.ta.propagate_until(self.limit)
        ended = []
        for lane, (outcome, _, _, took) in enumerate(self.ta.propagate_res):
            self.steps[lane] += took
            if self.owner[lane] < 0 or outcome == stopped:  # at rest, or another lane has ended
                continue
            segment = self.segment[lane] + 1
            if outcome == limit and segment < len(self.stops):
                self.segment[lane], self.limit[lane] = segment, self.stops[segment]
                self.parameters[0, lane] = self.convection[segment]
            else:
                ended.append((lane, DRIFTING if outcome == limit else CAUSES.get(int(outcome), FAILED)))
        if ended:
            self.time = self.ta.time.copy()
            for lane, cause in ended:
                end = (self.time[lane], cause, self.steps[lane], *self.unknowns[:, lane])
                self.found[self.owner[lane]] = end
                self.live -= 1
                self.take(lane)
            self.ta.set_time(self.time)
            self.ta.reset_cooldowns()


def in_batches(state: str, size: int, asked: Problem, particles: np.ndarray, tolerance: float) -> np.ndarray:
    """`size` particles at once."""
    import heyoka as hy

    storm, rows, ends = storm_of(asked), particles_of(asked, particles), no_ends(len(particles))
    ta = integrator(state, size, storm.top, storm.outer, storm.inner, tolerance)
    ta.pars[1] = storm.corotation
    ta.set_time(0.0)
    r, g, c = rows[:, 0], rows[:, 2], rows[:, 3]
    order = np.argsort(np.abs(storm.corotation - 3.0 * g / np.sqrt(r**4 + c * r)))
    lanes = Lanes(ta, state, rows[order], storm.stops.tolist(), storm.convection.tolist())
    ta.set_time(lanes.time)
    ta.reset_cooldowns()
    outcomes = hy.taylor_outcome.time_limit, hy.taylor_outcome.success
    while lanes.live:
        lanes.advance(*outcomes)
    fill(ends, state, np.array(lanes.found)[np.argsort(order)], rows)
    return ends


def recommended() -> int:
    """The batch size that the library recommends for this processor."""
    import heyoka as hy

    return int(hy.recommended_simd_size())


def contender(state: str, size: int) -> Callable[[Problem, np.ndarray, float], np.ndarray]:
    """A way to run as `bench_problems.Run` has it; size 0: one by one."""
    if size:
        return lambda asked, particles, tolerance: in_batches(state, size, asked, particles, tolerance)
    return lambda asked, particles, tolerance: one_by_one(state, asked, particles, tolerance)
