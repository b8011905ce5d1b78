"""An independent solution of the bounce-averaged drift in a dipole with corotation and Kp-driven convection. For tests.

Equations, constants and units are written out here again and share nothing with the packages; the bounce integrals are
quadratures of the textbook formulas, tabulated by local Chebyshev polynomials. The integrator is scipy's DOP853
(Hairer, Norsett & Wanner 1993, Solving Ordinary Differential Equations I).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numba import njit
from scipy import constants as codata
from scipy.integrate import ode
from scipy.optimize import brentq
from scipy.optimize.elementwise import find_root

R_E_M = 6371.2e3
TURN_H = 24.0
OUTER, INNER = 1, 2

NODES = 160  # of the quadrature
CELL = 0.125  # in ln(1 + kappa)
CELLS = 72  # up to kappa = e^9: 0.02 degrees at 10 R_E
DEGREE = 14


# ------------------------------------------------------------------------------------------------- bounce integrals


def integrals(lift: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """(T, Y, ln(B_m/B_eq)) of a dipole for mirror latitudes given by ``lift = -ln(cos^2)``, shape (n,).

    T = int dx sqrt(1 + 3 x^2) / sqrt(1 - B/B_m), Y = 2 int dx sqrt(1 + 3 x^2) sqrt(1 - B/B_m), x = sin(latitude) from 0
    to the mirror point (Schulz & Lanzerotti 1974). With x = x_m sin(theta) both are smooth; B goes as
    sqrt(4 - 3 c) / c^3, c = 1 - x^2.
    """
    node, weight = np.polynomial.legendre.leggauss(NODES)
    theta, weight = np.pi / 4 * (node + 1.0), np.pi / 4 * weight
    cm, x2m = np.exp(-lift)[:, None], -np.expm1(-lift)[:, None]
    above = x2m * np.cos(theta) ** 2
    log_ratio = 0.5 * np.log1p(-3.0 * above / (4.0 - 3.0 * cm)) - 3.0 * np.log1p(above / cm)
    root = np.sqrt(-np.expm1(log_ratio))
    path = np.sqrt(x2m) * np.cos(theta) * np.sqrt(4.0 - 3.0 * (cm + above))
    return (path / root) @ weight, 2.0 * (path * root) @ weight, 0.5 * np.log1p(3.0 * x2m[:, 0]) + 3.0 * lift


def lift_of_pitch(pitch_deg: np.ndarray) -> np.ndarray:
    """-ln(cos^2) of the mirror latitude."""
    wanted = np.log1p(np.tan(np.radians(90.0 - pitch_deg)) ** 2)

    def excess(lift: np.ndarray, wanted: np.ndarray) -> np.ndarray:
        return 3.0 * lift + 0.5 * np.log1p(-3.0 * np.expm1(-lift)) - wanted

    return np.asarray(find_root(excess, (np.zeros_like(wanted), wanted), args=(wanted,)).x)


def kappa_of_lift(lift: np.ndarray) -> np.ndarray:
    """Y/y, which goes as sqrt(r) along a drift path."""
    _, y_integral, log_mirror = integrals(lift)
    return np.asarray(y_integral * np.exp(0.5 * log_mirror))


@lru_cache
def table() -> np.ndarray:
    """Chebyshev coefficients of ln(B_m/B_eq) and of d ln B_m / d ln r at fixed K, cell by cell in ln(1 + kappa).

    Shape (CELLS, 2, DEGREE + 1).
    """
    node = np.cos(np.pi * (np.arange(DEGREE + 1) + 0.5) / (DEGREE + 1))
    u = CELL * (np.arange(CELLS)[:, None] + 0.5 * (1.0 + node))
    kappa = np.expm1(u.ravel())

    def excess(lift: np.ndarray, kappa: np.ndarray) -> np.ndarray:
        return kappa_of_lift(np.ravel(lift)).reshape(lift.shape) / kappa - 1.0

    found = find_root(excess, (1e-3 * np.minimum(kappa, 1.0), 3.0 * np.log1p(kappa)), args=(kappa,))
    assert np.all(found.success)
    t_integral, y_integral, log_mirror = integrals(found.x)
    values = np.stack([log_mirror, -(6.0 * t_integral - y_integral) / (2.0 * t_integral)], axis=1)
    basis = np.polynomial.chebyshev.chebvander(node, DEGREE)
    return np.ascontiguousarray(np.linalg.solve(basis, values.reshape(CELLS, DEGREE + 1, 2)).transpose(0, 2, 1))


@njit
def chebyshev(coefficients: Any, x: Any) -> Any:
    one, two = 0.0, 0.0
    for i in range(coefficients.size - 1, 0, -1):
        one, two = coefficients[i] + 2.0 * x * one - two, one
    return coefficients[0] + x * one - two


@njit
def mirror(kappa: Any, coefficients: Any) -> Any:
    """ln(B_m/B_eq) and d ln B_m / d ln r at fixed K."""
    place = np.log1p(kappa) / CELL
    cell = min(int(place), CELLS - 1)
    x = 2.0 * (place - cell) - 1.0
    return chebyshev(coefficients[cell, 0], x), chebyshev(coefficients[cell, 1], x)


# ------------------------------------------------------------------------------------------------------------- drift


@njit
def slopes(t: Any, y: Any, p: Any, coefficients: Any, out: Any) -> Any:
    """dr/dt, dphi/dt per hour; `p` is (kappa at 1 R_E, p^2/2m over B_m, rest energy, charge, B0, C, A)."""
    r, phi = y
    kappa1, mu, rest, charge, b0, corotation, convection = p
    log_mirror, slope = mirror(kappa1 * np.sqrt(r), coefficients)
    bm = b0 / r**3 * np.exp(log_mirror)
    gamma = np.sqrt(1.0 + 2.0 * mu * bm / rest)
    energy_slope = mu * bm / gamma * slope / r
    potential_r = corotation / r**2 - 2.0 * convection * r * np.sin(phi)
    potential_phi = -convection * r**2 * np.cos(phi)
    factor = 3600.0 * 1e12 / R_E_M**2 * r**2 / b0
    out[0] = -factor * potential_phi
    out[1] = factor * (energy_slope / charge + potential_r)
    return out


@dataclass(frozen=True)
class Storm:
    """B0 in nT, three-hourly Kp, the outer and inner limit in R_E."""

    b0_nT: float
    kp: tuple[float, ...]
    outer: float
    inner: float
    interval_h: float = 3.0

    @property
    def corotation_kV(self) -> float:
        return 2.0 * np.pi / (TURN_H * 3600.0) * self.b0_nT * 1e-9 * R_E_M**2 * 1e-3

    def amplitude_kV(self, kp: float) -> float:
        """Maynard & Chen (1975), constants from memory."""
        return 0.045 / (1.0 - 0.159 * kp + 0.0093 * kp**2) ** 3


@dataclass(frozen=True)
class Ends:
    """Times in h, r in R_E, phi unwrapped in rad, causes."""

    time: np.ndarray
    r: np.ndarray
    phi: np.ndarray
    cause: np.ndarray


def follow(storm: Storm, y: np.ndarray, p: np.ndarray, hours: float, rtol: float) -> tuple[float, float, float, int]:
    """One particle to its end: restarted at every corner, phi wrapped there."""
    coefficients, out = table(), np.empty(2)
    turned = 0.0

    def solver(begin: float, state: np.ndarray, watch: Any = None) -> ode:
        made = ode(lambda t, y: slopes(t, y, p, coefficients, out))
        made.set_integrator("dop853", rtol=rtol, atol=rtol, nsteps=10**6)
        if watch is not None:
            made.set_solout(watch)
        return made.set_initial_value(state, begin)

    last: list[Any] = [0.0, y.copy()]

    def watch(t: float, state: np.ndarray) -> int:
        if state[0] > storm.outer or state[0] < storm.inner:
            return -1
        last[:] = [t, state.copy()]
        return 0

    def after(t: float) -> np.ndarray:
        """The state at a time after the last point inside."""
        return np.asarray(solver(*last).integrate(t) if t > last[0] else last[1])

    for i in range(int(np.ceil(hours / storm.interval_h))):
        p[6] = storm.amplitude_kV(storm.kp[i])
        begin, end = i * storm.interval_h, min((i + 1) * storm.interval_h, hours)
        run = solver(begin, y, watch)
        y = run.integrate(end).copy()
        assert run.successful()
        if not storm.inner <= y[0] <= storm.outer:
            limit = storm.outer if y[0] > storm.outer else storm.inner
            t = brentq(
                lambda t, limit: float(after(t)[0]) - limit, last[0], run.t, args=(limit,), xtol=1e-14, rtol=1e-15
            )
            return t, limit, turned + after(t)[1], OUTER if limit == storm.outer else INNER
        shift = 2.0 * np.pi * np.rint(y[1] / (2.0 * np.pi))
        y[1] -= shift
        turned += shift
    return hours, y[0], turned + y[1], 0


def solve(
    storm: Storm,
    hours: float,
    rtol: float,
    *,
    r: np.ndarray,
    phi: np.ndarray,
    energy_keV: np.ndarray,
    pitch_deg: np.ndarray,
    charge: np.ndarray,
    mass_kg: np.ndarray,
) -> Ends:
    """All particles, from 0 to `hours`."""
    lift = lift_of_pitch(pitch_deg)
    kappa1 = kappa_of_lift(lift) / np.sqrt(r)
    rest = mass_kg * codata.c**2 / codata.e / 1e3
    mirror_field = storm.b0_nT / r**3 * np.exp(integrals(lift)[2])
    mu = energy_keV * (energy_keV + 2.0 * rest) / (2.0 * rest) / mirror_field
    ends = []
    for i in range(r.size):
        p = np.array([kappa1[i], mu[i], rest[i], charge[i], storm.b0_nT, storm.corotation_kV, 0.0])
        ends.append(follow(storm, np.array([r[i], phi[i]]), p, hours, rtol))
    return Ends(*(np.array(column) for column in zip(*ends)))
