"""Full orbits of a charged particle in a dipole: the Lorentz force and nothing of drift theory. For tests only.

A magnetic field does no work, so gamma is constant and ``dv/dt = q/(gamma m) v x B``. Lengths in R_E, times in seconds, B in nT. The steps are of one
size, with the tableau of order 8 that scipy's DOP853 carries.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numba import njit
from scipy import constants as codata
from scipy.integrate import DOP853

from fields.constants import EARTH_RADIUS_M

STAGES = 12
A = np.ascontiguousarray(DOP853.A[:STAGES, :STAGES])
B = np.ascontiguousarray(DOP853.B)


@dataclass(frozen=True)
class Orbiter:
    """A particle by charge (e), mass (kg) and momentum (kg m/s)."""

    charge_e: int
    mass_kg: float
    momentum: float

    @property
    def gamma(self) -> float:
        return float(np.hypot(1.0, self.momentum / (self.mass_kg * codata.c)))

    @property
    def speed_re_per_s(self) -> float:
        return self.momentum / (self.gamma * self.mass_kg) / EARTH_RADIUS_M

    @property
    def energy_keV(self) -> float:
        pc = self.momentum * codata.c
        rest = self.mass_kg * codata.c**2
        return pc**2 / (rest + np.hypot(rest, pc)) / codata.e / 1e3

    @property
    def turning(self) -> float:
        """q / (gamma m), signed, in 1/(s nT)."""
        return self.charge_e * codata.e / (self.gamma * self.mass_kg) * 1e-9


def of_gyroradius(charge_e: int, mass_kg: float, ratio: float, r: float, b0_nT: float) -> Orbiter:
    """The particle whose ``p / (|q| B_eq)`` is `ratio` times the curvature radius r/3 of the dipole line at its equator."""
    field_tesla = b0_nT * 1e-9 / r**3
    return Orbiter(charge_e, mass_kg, ratio * r / 3.0 * EARTH_RADIUS_M * abs(charge_e) * codata.e * field_tesla)


def starts(who: Orbiter, pitch_deg: float, phases: np.ndarray, r: float, b0_nT: float) -> np.ndarray:
    """(x, v) of orbits, shape (n_phase, 6), whose guiding centres ``x + m v x B/(q B^2)`` all lie at (r, 0, 0).

    On the equator B points along z, so x lies in the equatorial plane too, at ``X - v x z / (turning B(x))``.
    """
    across, along = who.speed_re_per_s * np.sin(np.radians(pitch_deg)), who.speed_re_per_s * np.cos(np.radians(pitch_deg))
    vx, vy = across * np.cos(phases), across * np.sin(phases)
    x, y = np.full(phases.shape, r), np.zeros(phases.shape)
    for _ in range(200):
        over = (x * x + y * y) ** 1.5 / (who.turning * b0_nT)
        x, y = r - vy * over, vx * over
    centre = guiding_centre(np.stack([x, y, 0 * x, vx, vy, along + 0 * x], axis=1), who, b0_nT)
    assert np.max(np.abs(centre - [r, 0.0, 0.0])) < 1e-12 * r
    return np.stack([x, y, 0.0 * x, vx, vy, along + 0.0 * x], axis=1)


def dipole(x: np.ndarray, b0_nT: float) -> np.ndarray:
    """B in nT at points (..., 3), moment along -z."""
    square = np.sum(x * x, axis=-1, keepdims=True)
    z = x[..., 2:3]
    up = np.array([0.0, 0.0, 1.0])
    return b0_nT * (up - 3.0 * z * x / square) / square**1.5


def guiding_centre(s: np.ndarray, who: Orbiter, b0_nT: float) -> np.ndarray:
    """``x + m v x B / (q B^2)``, shape (..., 3)."""
    b = dipole(s[..., :3], b0_nT)
    return s[..., :3] + np.cross(s[..., 3:], b) / (who.turning * np.sum(b * b, axis=-1, keepdims=True))


@njit
def force(s: Any, turning: Any, b0: Any, out: Any) -> None:
    x, y, z, vx, vy, vz = s
    square = x * x + y * y + z * z
    scale = turning * b0 / (square * np.sqrt(square))
    along = -3.0 * z / square
    bx, by, bz = scale * along * x, scale * along * y, scale * (1.0 + along * z)
    out[0], out[1], out[2] = vx, vy, vz
    out[3], out[4], out[5] = vy * bz - vz * by, vz * bx - vx * bz, vx * by - vy * bx


@njit
def orbit(s: Any, turning: Any, b0: Any, step: Any, every: Any, path: Any, a: Any, b: Any) -> None:
    """Write the state before the first step and after every `every` steps into `path`, shape (n, 6)."""
    k = np.empty((12, 6))
    trial = np.empty(6)
    path[0] = s
    for i in range(1, path.shape[0]):
        for _ in range(every):
            for stage in range(12):
                for c in range(6):
                    total = 0.0
                    for j in range(stage):
                        total += a[stage, j] * k[j, c]
                    trial[c] = s[c] + step * total
                force(trial, turning, b0, k[stage])
            for c in range(6):
                total = 0.0
                for j in range(12):
                    total += b[j] * k[j, c]
                s[c] += step * total
        path[i] = s


def paths(who: Orbiter, start: np.ndarray, b0_nT: float, step_s: float, count: int, every: int) -> np.ndarray:
    """States along the orbits, shape (n_phase, count, 6)."""
    found = np.empty((start.shape[0], count, 6))
    for one, path in zip(start, found):
        orbit(one.copy(), who.turning, b0_nT, step_s, every, path, A, B)
    return found


def windowed_slope(time: np.ndarray, value: np.ndarray) -> np.ndarray:
    """Slope of the weighted least-squares line through `value`, shape (..., n); the weight sin^8 silences what oscillates."""
    weight = np.sin(np.pi * (np.arange(time.size) + 0.5) / time.size) ** 8
    centred = time - np.sum(weight * time) / np.sum(weight)
    return np.asarray(value @ (weight * centred) / np.sum(weight * centred**2))


def drift_rates(
    who: Orbiter, pitch_deg: float, phases: np.ndarray, r: float, b0_nT: float, span_s: float, per_gyration: int, every: int
) -> np.ndarray:
    """Mean eastward rate of the guiding centre in rad/s for each gyrophase, from orbits over `span_s`."""
    gyration = 2.0 * np.pi / abs(who.turning) / (b0_nT / r**3)
    step = gyration / per_gyration
    count = int(np.ceil(span_s / (step * every)))
    found = paths(who, starts(who, pitch_deg, phases, r, b0_nT), b0_nT, step, count, every)
    speeds = np.linalg.norm(found[:, :, 3:], axis=2)
    assert np.max(np.abs(speeds / who.speed_re_per_s - 1.0)) < 1e-9, "the integrator lost energy"
    centre = guiding_centre(found, who, b0_nT)
    azimuth = np.unwrap(np.arctan2(centre[..., 1], centre[..., 0]), axis=1)
    return windowed_slope(np.arange(count) * step * every, azimuth)
