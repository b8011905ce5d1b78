"""The motion of an equatorial particle in a steady field, integrated in time by scipy: for the tests of boundaries.

Cartesian, with the gradient of H by complex steps. Nothing is shared with the packages.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.integrate import solve_ivp

DRIFT = 3600.0 * 1e12 / 6371.2e3**2  # R_E^2 nT / (kV h)
TINY = 1e-30  # of a complex step
CLOSED_RE = 1e-4  # a path that comes back so near has closed: its error grows a thousandfold beside a saddle


@dataclass(frozen=True)
class Motion:
    """An equatorial particle: mu in keV/nT, charge, rest energy in keV, and the fields as functions of (x, y)."""

    mu: float
    charge: float
    rest: float
    b: Callable[[Any, Any], Any]
    potential: Callable[[Any, Any], Any]

    def total(self, x: Any, y: Any) -> Any:
        """H, keV."""
        w = self.mu * self.b(x, y)
        return 2.0 * w / (1.0 + np.sqrt(1.0 + 2.0 * w / self.rest)) + self.charge * self.potential(x, y)

    def velocity(self, _: float, place: np.ndarray) -> list[float]:
        """``zhat x grad H / (q B)``, R_E/h."""
        x, y = place
        scale = DRIFT / (self.charge * self.b(x, y))
        by_x = self.total(x + 1j * TINY, y + 0j).imag / TINY
        by_y = self.total(x + 0j, y + 1j * TINY).imag / TINY
        return [-scale * by_y, scale * by_x]


@dataclass(frozen=True)
class Followed:
    """How a path ended: "outer", "inner" or "round", and where."""

    end: str
    x: float
    y: float
    turns: float


def followed(motion: Motion, x: float, y: float, inner: float, outer: float, hours: float) -> Followed:
    """Follow a path for so many hours, negative for backward in time, or until it has closed or met a boundary."""
    start = np.array([x, y])
    across = np.array(motion.velocity(0.0, start))

    def leaves(_: float, place: np.ndarray) -> float:
        return float(outer - np.hypot(*place))

    def falls(_: float, place: np.ndarray) -> float:
        return float(np.hypot(*place) - inner)

    def closes(t: float, place: np.ndarray) -> float:
        """Sign change in the sense of the first passage, through the line across the path at its start."""
        return float((place - start) @ across) + (np.sign(hours) if t == 0.0 else 0.0)

    leaves.terminal = falls.terminal = True  # type: ignore[attr-defined]
    closes.direction = float(np.sign(hours))  # type: ignore[attr-defined]
    done = solve_ivp(
        motion.velocity,
        (0.0, hours),
        start,
        "DOP853",
        rtol=1e-10,
        atol=1e-11,
        events=(leaves, falls, closes),
        max_step=2.0,
    )
    for name, places in (("outer", done.y_events[0]), ("inner", done.y_events[1])):
        if len(places):
            return Followed(name, *places[0], turns=np.nan)
    near = [i for i, place in enumerate(done.y_events[2]) if np.hypot(*(place - start)) < CLOSED_RE]
    assert near, f"neither closed nor gone after {hours} h"
    track = done.y[:, done.t * np.sign(hours) <= abs(done.t_events[2][near[0]])]
    angle = np.unwrap(np.arctan2([*track[1], y], [*track[0], x]))
    return Followed("round", x, y, float(angle[-1] - angle[0]) / (2.0 * np.pi))
