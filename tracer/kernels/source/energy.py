"""The Hamiltonian as the level curves' code asks for it: by address, and without knowing the field."""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import compiled
from tracer.kernels.pointers import call_along_circle, call_at_point

NEAR = 1e-3  # step of the differences of fourth order that give the second derivatives
CHARGE = 2  # where a particle holds its charge


@compiled
def energy(x: Any, phi: Any, F: Any) -> Any:
    """H in keV, dH/dx, dH/dphi, and the size of the terms that H is made of, at x = ln r.

    `F` is (addresses of the two functions of ``hamiltonian.py``, the field's constants, the particle, room for four
    numbers).
    """
    point, _, C, P, out = F
    call_at_point(point, x, phi, C, P, out)
    return out[0], out[1], out[2], out[3]


@compiled
def sample_circle(x: Any, n: Any, W: Any, F: Any) -> None:
    """Slopes and size of H at `n` azimuths from -pi on, into ``W[0:n]``, ``W[n:2 n]`` and ``W[2 n:3 n]``."""
    _, circle, C, P, _ = F
    call_along_circle(circle, x, n, C, P, W)


@compiled
def drift_sense(F: Any) -> Any:
    """+1 where larger H lies on the right hand of a drifting particle: the sign of its charge."""
    return 1.0 if F[3][CHARGE] > 0.0 else -1.0


@compiled
def curvature(x: Any, phi: Any, h: Any, F: Any) -> Any:
    """d2H/dx2, d2H/dx dphi, d2H/dphi2 by differences of the slopes over `h` and `2 h`; error of the order of h^4."""
    xx, xp, px, pp = 0.0, 0.0, 0.0, 0.0
    for i in range(2):
        weight = (8.0 if i == 0 else -1.0) / (12.0 * h)
        step = h * (i + 1)
        _, a, b, _ = energy(x + step, phi, F)
        _, c, d, _ = energy(x - step, phi, F)
        xx, px = xx + weight * (a - c), px + weight * (b - d)
        _, a, b, _ = energy(x, phi + step, F)
        _, c, d, _ = energy(x, phi - step, F)
        xp, pp = xp + weight * (a - c), pp + weight * (b - d)
    return xx, 0.5 * (xp + px), pp


@compiled
def wrapped(angle: Any) -> Any:
    """`angle` plus whole turns, in [-pi, pi)."""
    turns = np.floor(angle / (2.0 * np.pi) + 0.5)
    return angle - 2.0 * np.pi * turns
