"""Runs that share one compiled kernel: a dipole, corotation, and convection by a Kp that varies in time. All invented.

And the same motion by scipy: the compiled right-hand side, which has tests of its own, under an integrator that is not
ours.
"""

from __future__ import annotations

import importlib
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import small_runs
from scipy.integrate import OdeSolution, solve_ivp
from scipy.optimize import brentq, minimize_scalar

from fields.drivers import Driver
from fields.electric.corotation import Corotation
from fields.electric.volland_stern import VollandStern
from fields.field import Field, compose
from fields.magnetic.dipole import Dipole
from tracer.kernels.build import Kernel
from tracer.scenario import Population, Scenario

FINE = 1e-12  # local tolerance, R_E: the error of a day's path is far below that of any comparison here
NEAREST, FARTHEST = 0.9, 15.0  # R_E
STRICT = 3e-14  # relative tolerance of scipy's integrator, near the finest that it takes

KP = Driver(  # three-hourly steps, and a ramp in each fourth interval
    "series:kp",
    np.arange(-24.0, 24.0, 3.0),
    np.array([3.0, 2.0, 1.0, 2.0, 5.0, 6.0, 4.0, 3.0, 2.0, 4.0, 6.0, 7.0, 6.0, 4.0, 3.0, 2.0]),
    np.array([0.0, 0.0, 0.0, 0.5] * 4),
    24.0,
)


def steady(kp: float) -> Driver:
    """A history without events."""
    return Driver("series:kp", np.array([-100.0]), np.array([kp]), np.array([0.0]), 100.0)


def storm_field(kp: Driver = KP) -> Field:
    return compose(Dipole(b0_nT=30000.0), [Corotation(), VollandStern(gamma=2.0, kp=kp)])


STORM = storm_field()


def storm(*populations: Population, **given: Any) -> Scenario:
    """A scenario in the storm's field; arguments as of `small_runs.scenario`."""
    return small_runs.scenario(*populations, **{"field": STORM, **given})


def part(kernel: Kernel, name: str) -> Any:
    """A module of the kernel's package: ``drift``, ``step``, ``crossing``."""
    return importlib.import_module(f"{kernel.module.__name__.rpartition('.')[0]}.{name}")


def particle(row: np.ndarray) -> tuple[float, float, float, float]:
    """(mu, k, 1/q, 2/(m c^2)) of a row of the kernel's state."""
    return tuple(map(float, row[3:7]))  # type: ignore[return-value]


Excess = Callable[[Any, Any], Any]  # of r and phi, elementwise


def drivers_at(kernel: Kernel, time_h: float) -> tuple[float, ...]:
    """Start, value and slope of the drivers in the segment that holds a time."""
    i = int(np.searchsorted(kernel.edges, time_h, side="right")) - 1
    return tuple(map(float, kernel.segments[min(max(i, 0), len(kernel.segments) - 1)]))


@dataclass(frozen=True)
class Path:
    """Where one particle goes, by scipy: pieces of dense output between corners of the drivers, in order of tracing."""

    pieces: tuple[OdeSolution, ...]

    def at(self, time_h: Any) -> np.ndarray:
        """(r, phi), phi unwrapped, at one time or many."""
        times = np.atleast_1d(time_h)
        found = np.empty((2, times.size))
        for piece in reversed(self.pieces):
            inside = (times >= piece.t_min) & (times <= piece.t_max)
            if np.any(inside):
                found[:, inside] = piece(times[inside])
        return found if np.ndim(time_h) else found[:, 0]

    @property
    def nodes(self) -> np.ndarray:
        """Times along the path: scipy's steps, each divided by five."""
        steps = np.concatenate([[p.ts[0] for p in self.pieces[:1]], *(p.ts[1:] for p in self.pieces)])
        return np.interp(np.arange(5 * (steps.size - 1) + 1) / 5, np.arange(steps.size), steps)

    def first(self, excess: Excess, until: float | None = None) -> float:
        """The first time at which the excess turns positive, NaN if it does not; `until` is known to lie beyond."""
        nodes = self.nodes
        if until is not None:
            nodes = np.append(nodes[np.abs(nodes) < abs(until)], until)
        values = excess(*self.at(nodes))
        found = np.flatnonzero((values[:-1] < 0) & (values[1:] >= 0))
        if found.size == 0:
            return float("nan")
        i = found[0]
        return float(brentq(lambda t: excess(*self.at(t)), nodes[i], nodes[i + 1], xtol=1e-15, rtol=1e-15))

    def first_top(self, excess: Excess) -> tuple[float, float] | None:
        """Time and value of the first largest excess inside the path, when it exceeds that of the start."""
        nodes = self.nodes
        values = excess(*self.at(nodes))
        tops = np.flatnonzero((values[1:-1] > values[:-2]) & (values[1:-1] >= values[2:])) + 1
        if tops.size == 0 or values[tops[0]] <= values[0]:
            return None
        bounds = sorted((nodes[tops[0] - 1], nodes[tops[0] + 1]))
        best = minimize_scalar(
            lambda t: -excess(*self.at(t)), bounds=bounds, method="bounded", options={"xatol": 1e-10}
        )
        return float(best.x), -float(best.fun)


def far(t: float, y: np.ndarray) -> float:
    """A path that leaves may reach infinity in a finite time."""
    return float((y[0] - NEAREST) * (FARTHEST - y[0]))


far.terminal = True  # type: ignore[attr-defined]


def path_by_scipy(run: Scenario, kernel: Kernel, row: np.ndarray) -> Path:
    """The path from release to the end of the run, through any boundary, or until it is far beyond all of them."""
    slope, p = part(kernel, "drift").slope_at, particle(row)
    t, state = float(row[2]), row[:2].copy()
    inner = kernel.edges[(kernel.edges - t) * run.direction > 0]
    corners = [c for c in inner[:: int(run.direction)] if (run.end_h - c) * run.direction > 0]
    pieces = []
    for corner in (*corners, run.end_h):
        middle = 0.5 * (t + corner)
        D = drivers_at(kernel, middle)
        done = solve_ivp(
            lambda t, y, D=D: slope(t, y[0], y[1], p, kernel.constants, D),
            (t, corner), state, "DOP853", rtol=STRICT, atol=STRICT, dense_output=True,
            events=far,
        )  # fmt: skip
        assert done.success, done.message
        pieces.append(done.sol)
        if done.status == 1:
            break
        t, state = corner, done.y[:, -1]
    return Path(tuple(pieces))
