"""One field line of any magnetic model, traced, and the bounce of a particle on it.

What a model promises is used: symmetry about the equator, and one minimum of B on each line, at the equator. So only
the northern half of a line is traced, ``dX/ds = B/|B|`` with DOP853.

Along the line the excess ``E(s) = B(s)/B_eq - 1``, which at the mirror point is cot^2 of the equatorial pitch
angle, is written as ``s^2 g(s^2)``; near the equator g is a short Chebyshev series in s^2, so that nothing cancels
however near the pitch angle is to 90 degrees. The substitution ``s = s_m sin(theta)`` takes the square-root
singularity out of the bounce integrals and leaves a smooth, even, periodic integrand, for which the midpoint rule
in theta (Gauss-Chebyshev in s) converges geometrically.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from fields.errors import InputError
from fields.units import Floats

if TYPE_CHECKING:
    from fields.contract import MagneticModel

RTOL = 1e-13  # of the tracing; scipy allows no less than 2.2e-14
ATOL_PER_R = 1e-15  # of the tracing, per R_E of the distance at the start
LONGEST = 1000.0  # a line longer than this many times the distance at its start is taken as open
NODES = 96  # of the midpoint rule on a quarter bounce
EXCESS_FITTED = 0.3  # E up to which the Chebyshev series stands in for the field
FIT_DEGREE = 12
MARGIN = 1e-12  # by which a root is bracketed: more than the rounding of B


def strength(model: MagneticModel, state: Floats) -> Floats:
    """|B| at ``state[:3]``, nT."""
    bx, by, bz = model.field_nT(state[0], state[1], state[2])
    return np.asarray(np.sqrt(bx * bx + by * by + bz * bz))


def unit_field(model: MagneticModel) -> Callable[[float, Floats], Floats]:
    """Right-hand side of the tracing."""

    def direction(_: float, state: Floats) -> Floats:
        b = np.array(model.field_nT(state[0], state[1], state[2]))
        return np.asarray(b / np.sqrt(b @ b))

    return direction


@dataclass(frozen=True)
class Bounce:
    """One particle's quarter bounce on one line, sampled at the nodes of the midpoint rule.

    Attributes
    ----------
    mirror_s : float
        Distance along the line from the equator to the mirror point, R_E.
    s : ndarray, shape (NODES,)
        Distances of the nodes, R_E.
    root : ndarray, shape (NODES,)
        ``sqrt((B_m - B) / (B_eq s_m^2))``, 1/R_E; stays finite when s_m goes to 0.
    cos : ndarray, shape (NODES,)
        ``(1/s_m) ds/dtheta``.
    """

    mirror_s: float
    s: Floats
    root: Floats
    cos: Floats

    def integral(self, integrand: Floats) -> float:
        """Integral over theta from 0 to pi/2."""
        return float(np.sum(integrand)) * np.pi / (2 * NODES)


class FieldLine:
    """The northern half of the line through (r, phi), grown as far as it is asked for."""

    def __init__(self, model: MagneticModel, r: float, phi: float) -> None:
        from scipy.integrate import DOP853

        self.model = model
        self.start = np.array([r * np.cos(phi), r * np.sin(phi), 0.0])
        self.b_eq = float(strength(model, self.start))
        self.where = f"the field line through r = {r:g} R_E, phi = {phi:g} rad"
        self.solver = DOP853(
            unit_field(model), 0.0, self.start, LONGEST * r, rtol=RTOL, atol=ATOL_PER_R * r, first_step=0.01 * r
        )
        self.knots = [0.0]
        self.pieces: list[Any] = []
        self.excesses = [0.0]  # at the knots
        self._fit_near_equator()

    def grow(self, excess: float) -> None:
        """Trace on until E reaches `excess`."""
        from scipy.integrate import OdeSolution

        grown = False
        while self.excesses[-1] < excess * (1.0 + MARGIN):
            if self.solver.status == "running":
                self.solver.step()
            if self.solver.status != "running":
                raise InputError(f"{self.where} does not reach B = {self.b_eq * (1 + excess):g} nT", "a closed line")
            self.knots.append(float(self.solver.t))
            self.pieces.append(self.solver.dense_output())
            self.excesses.append(float(strength(self.model, self.solver.y)) / self.b_eq - 1.0)
            grown = True
        if grown:
            self.path = OdeSolution(self.knots, self.pieces)

    def _fit_near_equator(self) -> None:
        from numpy.polynomial import Chebyshev

        self.grow(EXCESS_FITTED)
        self.fitted_s = self._distance(EXCESS_FITTED)
        self.g = Chebyshev.interpolate(
            lambda u: self.excess(np.sqrt(u)) / u, FIT_DEGREE, domain=[0.0, self.fitted_s**2]
        )
        if not np.all(self.g(np.linspace(0.0, self.fitted_s**2, 17)) > 0):
            raise InputError(f"{self.where} has no minimum of B at the equator", "a place nearer the Earth")

    def excess(self, s: Any) -> Any:
        """E at distances `s`, straight from the field."""
        return strength(self.model, self.path(s)) / self.b_eq - 1.0

    def _distance(self, excess: float) -> float:
        """Distance at which E reaches `excess`, found between the knots about it."""
        from scipy.optimize import brentq

        low, high = np.searchsorted(self.excesses, [excess * (1.0 - MARGIN), excess * (1.0 + MARGIN)])
        ends = self.knots[low - 1], self.knots[high]
        return float(brentq(lambda s: self.excess(s) - excess, *ends, xtol=1e-300, rtol=1e-15))

    def mirror_distance(self, excess: float) -> float:
        """Distance from the equator to the mirror point of the particle with ``B_m = B_eq (1 + excess)``."""
        from scipy.optimize import brentq

        if excess > EXCESS_FITTED:
            self.grow(excess)
            return self._distance(excess)
        top = 1.001 * self.fitted_s**2  # the fit ends at EXCESS_FITTED only to rounding
        return float(np.sqrt(brentq(lambda u: u * self.g(u) - excess, 0.0, top, xtol=1e-300, rtol=1e-15)))

    def bounce(self, excess: float) -> Bounce:
        """The quarter bounce of the particle with ``B_m = B_eq (1 + excess)``."""
        mirror_s = self.mirror_distance(excess)
        theta = (np.arange(NODES) + 0.5) * np.pi / (2 * NODES)
        sin, cos = np.sin(theta), np.cos(theta)
        s = mirror_s * sin
        if excess <= EXCESS_FITTED:
            g, g_mirror = self.g(s**2), self.g(mirror_s**2)
        else:
            g, g_mirror = self.excess(s) / s**2, self.excess(mirror_s) / mirror_s**2
        return Bounce(mirror_s, s, np.sqrt(g_mirror - sin**2 * g), cos)

    def second_invariant(self, excess: float) -> float:
        """k in R_E nT^(1/2)."""
        bounce = self.bounce(excess)
        return 2.0 * float(np.sqrt(self.b_eq)) * bounce.mirror_s**2 * bounce.integral(bounce.root * bounce.cos)

    def bounce_path(self, excess: float) -> float:
        """Closed integral of ds / sqrt(1 - B/B_m), R_E."""
        bounce = self.bounce(excess)
        return 4.0 * float(np.sqrt(1.0 + excess)) * bounce.integral(bounce.cos / bounce.root)

    def excess_at(self, k: float) -> float:
        """Inverse of `second_invariant`: Newton in ln E, ln k, with dk/dB_m = path / (4 sqrt(B_m))."""
        if k == 0.0:
            return 0.0
        # k grows like E near the equator and like sqrt(E) far along the line; take the start that holds near it.
        excess = k * 2.0 * float(np.sqrt(self.g(0.0))) / (np.pi * float(np.sqrt(self.b_eq)))
        for _ in range(60):
            here = self.second_invariant(excess)
            rate = self.b_eq * self.bounce_path(excess) / (4.0 * np.sqrt(self.b_eq * (1.0 + excess)))
            step = np.log(k / here) * here / (rate * excess)
            excess *= float(np.exp(np.clip(step, -3.0, 3.0)))
            if abs(step) < 1e-9:  # Newton is quadratic: the next step would be lost in rounding
                return excess
        raise InputError(f"{self.where} holds no particle with k = {k:g} R_E nT^(1/2)", "a smaller second invariant")
