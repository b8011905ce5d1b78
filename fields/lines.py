"""Averages along the field lines of any magnetic model, by tracing the lines: slow, general, the reference.

Nothing here assumes a dipole. Measured in a dipole against its closed form, pitch angles from 0.1 to 90 degrees:
relative error of `mirror_slopes` 2e-12, of all else 4e-12 and less.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike

from fields import arguments
from fields.errors import InputError
from fields.traced_line import ATOL_PER_R, LONGEST, RTOL, FieldLine, strength
from fields.units import Floats

if TYPE_CHECKING:
    from fields.contract import MagneticModel

LINES_KEPT = 512

# Central differences of eighth order (Fornberg 1988, Math. Comp. 51, 699): offsets in steps, weights.
STENCIL = ((1, 4 / 5), (2, -1 / 5), (3, 4 / 105), (4, -1 / 280))
STENCIL_STEP = 0.02  # of r, and in radians of phi


class TracedLines:
    """LineAverages of any magnetic model by tracing. See `fields.contract.LineAverages`.

    Parameters
    ----------
    model : MagneticModel

    Notes
    -----
    Each distinct (r, phi) is traced once and kept, at some milliseconds a line. `mirror_slopes` differences 16
    neighbouring lines.
    """

    def __init__(self, model: MagneticModel) -> None:
        self.model = model
        self._line: Callable[[float, float], FieldLine] = lru_cache(maxsize=LINES_KEPT)(
            lambda r, phi: FieldLine(model, r, phi)
        )

    def second_invariant(self, cot2: ArrayLike, r: ArrayLike, phi: ArrayLike) -> Floats:
        """k in R_E nT^(1/2); arguments broadcast."""
        return _each(
            lambda c, r_, p: self._line(r_, p).second_invariant(c),
            arguments.pitch(cot2),
            arguments.distance(r),
            arguments.angle(phi),
        )

    def cot2_at(self, k: ArrayLike, r: ArrayLike, phi: ArrayLike) -> Floats:
        """cot^2 of the equatorial pitch angle of the particle with second invariant `k`."""
        return _each(
            lambda k_, r_, p: self._line(r_, p).excess_at(k_),
            arguments.invariant(k),
            arguments.distance(r),
            arguments.angle(phi),
        )

    def bounce_path(self, cot2: ArrayLike, r: ArrayLike, phi: ArrayLike) -> Floats:
        """Speed times full bounce period, R_E; at cot2 = 0 its limit."""
        return _each(
            lambda c, r_, p: self._line(r_, p).bounce_path(c),
            arguments.pitch(cot2),
            arguments.distance(r),
            arguments.angle(phi),
        )

    def mirror_slopes(self, cot2: ArrayLike, r: ArrayLike, phi: ArrayLike) -> tuple[Floats, Floats]:
        """d ln B_m / dr (1/R_E) and d ln B_m / dphi (1/rad), both at fixed k, by eighth-order central differences."""

        def log_mirror_field(k: float, r_: float, phi_: float) -> float:
            line = self._line(r_, phi_)
            return float(np.log(line.b_eq) + np.log1p(line.excess_at(k)))

        def along(cot2_: float, r_: float, phi_: float, dr: float, dphi: float) -> float:
            k = self._line(r_, phi_).second_invariant(cot2_)
            return sum(
                weight
                * (
                    log_mirror_field(k, r_ + n * dr, phi_ + n * dphi)
                    - log_mirror_field(k, r_ - n * dr, phi_ - n * dphi)
                )
                for n, weight in STENCIL
            )

        c, radius, azimuth = arguments.pitch(cot2), arguments.distance(r), arguments.angle(phi)
        by_r = _each(
            lambda c_, r_, p: along(c_, r_, p, STENCIL_STEP * r_, 0.0) / (STENCIL_STEP * r_), c, radius, azimuth
        )
        by_phi = _each(lambda c_, r_, p: along(c_, r_, p, 0.0, STENCIL_STEP) / STENCIL_STEP, c, radius, azimuth)
        return by_r, by_phi

    def foot_field(self, r: ArrayLike, phi: ArrayLike, foot_re: float) -> Floats:
        """B in nT where the line meets the sphere of radius `foot_re`."""
        return _each(
            lambda r_, p: float(strength(self.model, self._foot(r_, p, foot_re))),
            arguments.distance(r),
            arguments.angle(phi),
        )

    def tube_volume(self, r: ArrayLike, phi: ArrayLike, foot_re: float) -> Floats:
        """Integral of ds/B from foot to foot, R_E/nT."""
        return _each(
            lambda r_, p: 2.0 * float(self._foot(r_, p, foot_re)[3]), arguments.distance(r), arguments.angle(phi)
        )

    def equatorial_point(self, x: ArrayLike, y: ArrayLike, z: ArrayLike) -> tuple[Floats, Floats]:
        """(r, phi) where the line through the SM point (x, y, z) in R_E crosses the equator."""
        broad = np.broadcast_arrays(*(np.asarray(c, dtype=float) for c in (x, y, z)))
        points = np.stack([c.ravel() for c in broad], axis=1)
        at_equator = np.array([self._crossing(point) for point in points]).reshape(-1, 2)
        r, phi = np.hypot(*at_equator.T), np.arctan2(at_equator[:, 1], at_equator[:, 0])
        return r.reshape(broad[0].shape), phi.reshape(broad[0].shape)

    def bounce_average(
        self, density: Callable[[Floats, Floats, Floats], Floats], cot2: ArrayLike, r: ArrayLike, phi: ArrayLike
    ) -> Floats:
        """Average of ``density(x, y, z)`` over a bounce, both hemispheres, weighted with ds / sqrt(1 - B/B_m)."""

        def one(cot2_: float, r_: float, phi_: float) -> float:
            line = self._line(r_, phi_)
            bounce = line.bounce(cot2_)
            x, y, z = line.path(bounce.s)
            both = 0.5 * (np.asarray(density(x, y, z)) + np.asarray(density(x, y, -z)))
            weight = bounce.cos / bounce.root
            return bounce.integral(weight * both) / bounce.integral(weight)

        return _each(one, arguments.pitch(cot2), arguments.distance(r), arguments.angle(phi))

    def _crossing(self, point: Floats) -> Floats:
        """(x, y) where the line through `point` crosses the equator."""
        if not 0 < np.linalg.norm(point) < np.inf:
            raise InputError("not a place on a field line", "a point away from the Earth's centre", key="x, y, z")
        if point[2] == 0.0:
            return point[:2]
        return self._follow(point, lambda state: float(state[2]), -np.sign(point[2]), "reach the equator")[:2]

    def _foot(self, r: float, phi: float, foot_re: float) -> Floats:
        """(x, y, z, integral of ds/B from the equator) where the line meets the foot sphere."""
        if not 0 < foot_re <= r:
            raise InputError("no field line from there to the foot", f"r of at least {foot_re:g} R_E", key="r", value=r)
        start = (r * np.cos(phi), r * np.sin(phi), 0.0)
        if r == foot_re:
            return np.array([*start, 0.0])
        return self._follow(start, lambda state: float(np.linalg.norm(state[:3])) - foot_re, 1.0, "reach the foot")

    def _follow(self, start: Any, until: Callable[[Floats], float], sign: float, aim: str) -> Floats:
        """Follow the line from `start`, along B times `sign`, until ``until(state)`` is 0.

        Returns
        -------
        ndarray, shape (4,)
            x, y, z, and the integral of ds/B on the way.
        """
        from scipy.integrate import solve_ivp

        b_start = float(strength(self.model, np.array(start)))

        def rates(_: float, state: Floats) -> Floats:
            b = np.array(self.model.field_nT(state[0], state[1], state[2]))
            size_b = np.sqrt(b @ b)
            return np.append(sign * b / size_b, b_start / size_b)

        def event(_: float, state: Floats) -> float:
            return until(state)

        event.terminal = True  # type: ignore[attr-defined]
        size = float(np.linalg.norm(start))
        span = (0.0, LONGEST * size)
        solved = solve_ivp(rates, span, [*start, 0.0], method="DOP853", events=event, rtol=RTOL, atol=ATOL_PER_R * size)
        if solved.status != 1 or solved.y_events is None:
            place = ", ".join(f"{float(c):g}" for c in start)
            raise InputError(f"the field line through ({place}) R_E does not {aim}", "a closed line")
        state = np.array(solved.y_events[0][-1])
        state[3] /= b_start
        return state


def _each(function: Callable[..., float], *arrays: ArrayLike) -> Floats:
    """Call `function` on every element of the broadcast arrays."""
    broad = np.broadcast_arrays(*(np.asarray(a, dtype=float) for a in arrays))
    flat = [function(*(float(a.flat[i]) for a in broad)) for i in range(broad[0].size)]
    return np.array(flat, dtype=float).reshape(broad[0].shape)
