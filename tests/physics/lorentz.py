"""Full orbits of a charged particle in a dipole: the Lorentz force and nothing of drift theory. For tests only.

A magnetic field does no work, so gamma is constant and ``dv/dt = q/(gamma m) v x B``. Lengths in R_E, times in seconds,
B in nT. The steps are of one size, with the tableau of order 8 that scipy's DOP853 carries.
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
LANES = 8  # gyrophases, followed together
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
    """The particle whose ``p / (|q| B_eq)`` is `ratio` times r/3, the curvature radius of the line at its equator."""
    field_tesla = b0_nT * 1e-9 / r**3
    return Orbiter(charge_e, mass_kg, ratio * r / 3.0 * EARTH_RADIUS_M * abs(charge_e) * codata.e * field_tesla)


def starts(who: Orbiter, pitch_deg: float, phases: np.ndarray, r: float, b0_nT: float) -> np.ndarray:
    """(x, v) of orbits, shape (n_phase, 6), whose guiding centres all lie at (r, 0, 0).

    The centre is ``X = x + m v x B/(q B^2)`` with B taken at X: with B at the particle the mean distance of all phases
    is off by 3/2 rho^2 / r, and so is the rate. On the equator B points along z, so x lies in that plane too.
    """
    across = who.speed_re_per_s * np.sin(np.radians(pitch_deg))
    along = who.speed_re_per_s * np.cos(np.radians(pitch_deg))
    vx, vy = across * np.cos(phases), across * np.sin(phases)
    over = r**3 / (who.turning * b0_nT)
    return np.stack([r - vy * over, vx * over, 0.0 * vx, vx, vy, along + 0.0 * vx], axis=1)


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


@njit(fastmath=True)
def force(s: Any, turning: Any, b0: Any, out: Any) -> None:
    for n in range(LANES):
        x, y, z = s[n], s[LANES + n], s[2 * LANES + n]
        vx, vy, vz = s[3 * LANES + n], s[4 * LANES + n], s[5 * LANES + n]
        square = x * x + y * y + z * z
        scale = turning * b0 / (square * np.sqrt(square))
        along = -3.0 * z / square
        bx, by, bz = scale * along * x, scale * along * y, scale * (1.0 + along * z)
        out[n], out[LANES + n], out[2 * LANES + n] = vx, vy, vz
        out[3 * LANES + n] = vy * bz - vz * by
        out[4 * LANES + n] = vz * bx - vx * bz
        out[5 * LANES + n] = vx * by - vy * bx


@njit(fastmath=True)
def combine(s: Any, step: Any, weights: Any, k: Any, count: Any, out: Any) -> None:
    for i in range(s.size):
        out[i] = s[i]
    for j in range(count):
        if weights[j] != 0.0:
            w = step * weights[j]
            for i in range(s.size):
                out[i] += w * k[j, i]


@njit(fastmath=True)
def orbits(s: Any, turning: Any, b0: Any, step: Any, every: Any, path: Any, a: Any, b: Any) -> None:
    """Write the states `s`, shape (6 LANES,), now and after every `every` steps into `path`, shape (n, 6 LANES)."""
    k = np.empty((STAGES, s.size))
    trial = np.empty(s.size)
    path[0] = s
    for i in range(1, path.shape[0]):
        for _ in range(every):
            for stage in range(STAGES):
                combine(s, step, a[stage], k, stage, trial)
                force(trial, turning, b0, k[stage])
            combine(s, step, b, k, STAGES, trial)
            s[:] = trial
        path[i] = s


def windowed_slope(time: np.ndarray, value: np.ndarray) -> np.ndarray:
    """Slope of the least-squares line through `value`, shape (..., n); its weight sin^8 silences what oscillates."""
    weight = np.sin(np.pi * (np.arange(time.size) + 0.5) / time.size) ** 8
    centred = time - np.sum(weight * time) / np.sum(weight)
    return np.asarray(value @ (weight * centred) / np.sum(weight * centred**2))


def drift_rates(
    who: Orbiter, pitch_deg: float, r: float, b0_nT: float, span_s: float, per_gyration: int, energy_error: float
) -> np.ndarray:
    """Mean eastward rate of the guiding centre in rad/s over `span_s`, for LANES gyrophases.

    `per_gyration` steps are taken in an equatorial gyration; the integrator may change the energy by `energy_error`.
    """
    gyration = 2.0 * np.pi / abs(who.turning) / (b0_nT / r**3)
    step, every = gyration / per_gyration, per_gyration // 6
    count = int(np.ceil(span_s / (step * every)))
    phases = 2.0 * np.pi * np.arange(LANES) / LANES
    start = starts(who, pitch_deg, phases, r, b0_nT)
    path = np.empty((count, 6 * LANES))
    orbits(start.T.ravel(), who.turning, b0_nT, step, every, path, A, B)
    found = path.reshape(count, 6, LANES).transpose(2, 0, 1)
    speeds = np.linalg.norm(found[:, -1, 3:], axis=1)
    assert np.max(np.abs(speeds / who.speed_re_per_s - 1.0)) < energy_error, "the integrator lost energy"
    centre = guiding_centre(found, who, b0_nT)
    azimuth = np.unwrap(np.arctan2(centre[..., 1], centre[..., 0]), axis=1)
    return windowed_slope(np.arange(count) * step * every, azimuth)
