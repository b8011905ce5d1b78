"""The Hamiltonian of a particle at fixed mu and K, called by address (see tracer/kernels/pointers.py).

A place is (x, phi) with x = ln r. That map of the plane keeps angles, a circle round the Earth becomes a straight
line, and a step of 0.05 is 5 % of r anywhere. Slopes are (dH/dx, dH/dphi).
"""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import exponential, inlined, inverse_root, sincos
from tracer.kernels.pointers import ALONG_CIRCLE, AT_POINT, by_address

from .field import drivers, mirror, potential

MU, K, CHARGE, INVERSE_HALF_REST, TIME, DRIVERS_FROM = range(6)  # what a particle is given by


@inlined
def energy(x: Any, phi: Any, p: Any, C: Any, D: Any) -> Any:
    """H in keV, dH/dx, dH/dphi, and the size of the terms that H is made of."""
    mu, k, q, inverse_half_rest, t = p
    r = exponential(x)
    s, c = sincos(phi)
    bm, bm_r, bm_phi, _ = mirror(k, r, s, c, C)
    v, v_r, v_phi = potential(r, s, c, t, C, D)
    w = mu * bm
    # W = 2 w / (1 + gamma) and dW/dB_m = mu / gamma, gamma^2 = 1 + 2 mu B_m / (m c^2)
    inverse_gamma = inverse_root(1.0 + w * inverse_half_rest)
    kinetic = 2.0 * w * inverse_gamma / (1.0 + inverse_gamma)
    rise = mu * inverse_gamma
    return kinetic + q * v, r * (rise * bm_r + q * v_r), rise * bm_phi + q * v_phi, kinetic + abs(q * v)


@inlined
def particle(P: Any) -> Any:
    """A particle and its drivers as tuples, so that no store can seem to change them."""
    return (P[MU], P[K], P[CHARGE], P[INVERSE_HALF_REST], P[TIME]), drivers(P, DRIVERS_FROM, 1)


@by_address(AT_POINT)
def at_point(x: Any, phi: Any, C: Any, P: Any, out: Any) -> None:
    """`energy` into ``out[0]`` to ``out[3]``."""
    p, D = particle(P)
    out[0], out[1], out[2], out[3] = energy(x, phi, p, C, D)


@by_address(ALONG_CIRCLE)
def along_circle(x: Any, n: Any, C: Any, P: Any, out: Any) -> None:
    """At `n` azimuths from -pi on: the slopes into ``out[0:n]`` and ``out[n:2 n]``, the size into ``out[2 n:3 n]``."""
    p, D = particle(P)
    step = 2.0 * np.pi / n
    for j in range(n):
        _, out[j], out[n + j], out[2 * n + j] = energy(x, step * j - np.pi, p, C, D)
