"""Opponent: a plain numba kernel. One particle after another in a `prange`, state (x, y), DOP853, adaptive.

Compiled and inlined right-hand sides, one for the equator and one for all pitch angles; first-same-as-last, steps that
end on every corner, a controller whose constants were measured. No lanes, no vectors.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import lru_cache
from typing import Any

import numba
import numpy as np
from bench_mirror import lookup
from bench_problems import Problem
from bench_storm import (
    BAD,
    CAUSE,
    DRIFTING,
    FAILED,
    GOOD,
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
from numba import njit, prange
from scipy.integrate._ivp import dop853_coefficients as tableau

STAGES = 12
# An error along the circle becomes one across it: weighed so, a tenth fewer steps at equal error of the end point.
ALONG = 9.0  # square of the weight
SAFETY, SHRINK, GROW = 0.75, 0.2, 4.0
SHORTEST = 1e-12  # step, hours
NEWTON_STEPS, SHRINKS = 12, 30


def combination(weights: np.ndarray, name: str, count: int) -> str:
    return " + ".join(f"{float(weights[j])!r} * {name}{j + 1}" for j in range(count) if weights[j])


def step_source() -> str:
    """One step of DOP853, straight-line: the new point and the error's estimate; `u`, `v` are slopes of x and y."""
    lines = ["def trial(x, y, h, u1, v1, p):"]
    for i in range(1, STAGES):
        at = ", ".join(f"{z} + h * ({combination(tableau.A[i], w, i)})" for z, w in (("x", "u"), ("y", "v")))
        lines.append(f"    u{i + 1}, v{i + 1} = rate({at}, p)")
    for z, w in (("x", "u"), ("y", "v")):
        lines.append(f"    {z}n = {z} + h * ({combination(tableau.B, w, STAGES)})")
    for name, weights in (("five", tableau.E5), ("three", tableau.E3)):
        lines.append(f"    a, b = {combination(weights, 'u', STAGES)}, {combination(weights, 'v', STAGES)}")
        lines.append("    across, along = a * x + b * y, a * y - b * x")
        lines.append(f"    {name} = (across * across + {ALONG} * along * along) / (x * x + y * y)")
    return "\n".join([*lines, "    return xn, yn, h * five / math.sqrt(five + 0.01 * three + 1e-300)"])


def equatorial(x: Any, y: Any, p: Any) -> Any:
    """dx/dt and dy/dt of a particle that mirrors at the equator; see `bench_storm`."""
    g, c, _, w, a = p
    r2 = x * x + y * y
    turn = w - 3.0 * g / math.sqrt(r2 * r2 + c * math.sqrt(r2))
    b = a * r2
    return b * (r2 + y * y) - turn * y, x * (turn - b * y)


def bounce_averaged(top: float) -> Callable[..., Any]:
    """dx/dt and dy/dt at any pitch angle."""
    mirror = lookup(top)

    def rate(x: Any, y: Any, p: Any) -> Any:
        g, c, k, w, a = p
        r2 = x * x + y * y
        r = math.sqrt(r2)
        P, Q = mirror(k * math.sqrt(r))
        turn = w - g * Q / math.sqrt(r2 * r2 + c * P * r)
        b = a * r2
        return b * (r2 + y * y) - turn * y, x * (turn - b * y)

    return rate


@lru_cache(maxsize=8)
def compiled(top: float) -> Callable[..., None]:
    """The kernel for particles with kappa up to `top`."""
    rate = njit(forceinline=True, **OPTIONS)(bounce_averaged(top) if top > 0.0 else equatorial)
    names: dict[str, Any] = {"rate": rate, "math": math}
    exec(step_source(), names)
    trial = njit(forceinline=True, **OPTIONS)(names["trial"])

    @njit(**OPTIONS)
    def place(x, y, u, v, h, p):  # type: ignore[no-untyped-def]
        """Where a step of `h` ends, and r there."""
        xn, yn, _ = trial(x, y, h, u, v, p)
        return xn, yn, math.sqrt(xn * xn + yn * yn)

    @njit(**OPTIONS)
    def highest(x, y, u, v, h, p, outer):  # type: ignore[no-untyped-def]
        """Length of a step that ends beyond `outer` although one of `h` does not; 0 if there is none."""
        low, high = 0.0, h
        for _ in range(SHRINKS):
            left, right = low + 0.382 * (high - low), low + 0.618 * (high - low)
            by_left, by_right = place(x, y, u, v, left, p)[2], place(x, y, u, v, right, p)[2]
            if max(by_left, by_right) >= outer:
                return left if by_left >= outer else right
            if by_left < by_right:
                low = left
            else:
                high = right
        return 0.0

    @njit(**OPTIONS)
    def meet(x, y, u, v, h, p, limit):  # type: ignore[no-untyped-def]
        """Length of the step that ends on r = `limit`, which one of `h` passes, and its end: Newton's method."""
        before = math.sqrt(x * x + y * y)
        low, high = 0.0, h
        step = h * (limit - before) / (place(x, y, u, v, h, p)[2] - before)
        for _ in range(NEWTON_STEPS):
            xn, yn, rn = place(x, y, u, v, step, p)
            un, vn = rate(xn, yn, p)
            shift = (limit - rn) * rn / (xn * un + yn * vn)
            if abs(shift) < 1e-7 * h:
                return step + shift, xn + shift * un, yn + shift * vn
            if (rn >= limit) == (limit > before):
                high = step
            else:
                low = step
            step = step + shift if low < step + shift < high else 0.5 * (low + high)
        return step, xn, yn

    @njit(**OPTIONS)
    def follow(row, storm, tolerance, end):  # type: ignore[no-untyped-def]
        """One particle."""
        stops, convection, corotation, outer, inner = storm
        x, y = row[0] * math.cos(row[1]), row[0] * math.sin(row[1])
        t, h, turns, cause, good, bad = 0.0, 0.0, 0.0, DRIFTING, 0, 0
        for segment in range(stops.size):
            stop, p = stops[segment], (row[2], row[3], row[4], corotation, convection[segment])
            u, v = rate(x, y, p)
            if segment == 0:
                h = 0.3 * (1e4 * tolerance) ** 0.25 * math.sqrt((x * x + y * y) / (u * u + v * v))
            while t < stop and cause == DRIFTING:
                left = stop - t
                step = left if h >= left else (0.5 * left if h > 0.5 * left else h)
                xn, yn, error = trial(x, y, step, u, v, p)
                q = error / tolerance
                factor = min(GROW, max(SHRINK, SAFETY / math.sqrt(math.sqrt(math.sqrt(q + 1e-30)))))
                if not q <= 1.0:
                    bad += 1
                    h = step * (factor if factor < 1.0 else SHRINK)
                    cause = FAILED if h < SHORTEST else DRIFTING
                    continue
                good += 1
                un, vn = rate(xn, yn, p)
                before, after = x * x + y * y, xn * xn + yn * yn
                out, took = after >= outer * outer, step
                rising, falling = x * u + y * v, -(xn * un + yn * vn)
                # r^2 stays below the larger end plus the step times the steeper half slope
                near = max(before, after) + step * max(rising, falling) >= outer * outer
                if near and not out and rising > 0.0 and falling > 0.0:
                    beyond = highest(x, y, u, v, step, p, outer)
                    if beyond > 0.0:
                        out, took = True, beyond
                if out or after <= inner * inner:
                    cause = OUTER if out else INNER
                    took, xn, yn = meet(x, y, u, v, took, p, outer if out else inner)
                if (y < 0.0) != (yn < 0.0) and (x * yn - xn * y) * (yn - y) < 0.0:  # over the half-line of midnight
                    turns += 1.0 if yn < 0.0 else -1.0
                t = stop if step == left and cause == DRIFTING else t + took
                x, y, u, v = xn, yn, un, vn
                h = max(h, step * factor) if h > 0.5 * left else step * factor
            if cause != DRIFTING:
                break
        end[TIME], end[R], end[CAUSE], end[GOOD], end[BAD] = t, math.sqrt(x * x + y * y), cause, good, bad
        end[TURNS] = turns + (math.atan2(y, x) - math.atan2(math.sin(row[1]), math.cos(row[1]))) / (2.0 * math.pi)

    @njit(parallel=True, **OPTIONS)
    def advance(rows, storm, tolerance, ends):  # type: ignore[no-untyped-def]
        for i in prange(len(rows)):
            follow(rows[i], storm, tolerance, ends[i])

    return advance


def plain(asked: Problem, state: np.ndarray, tolerance: float) -> np.ndarray:
    """On one core."""
    storm, ends = storm_of(asked), no_ends(len(state))
    numba.set_num_threads(1)
    compiled(storm.top)(particles_of(asked, state), storm[:5], tolerance, ends)
    return ends
