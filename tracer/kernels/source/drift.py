"""The bounce-averaged drift, and what stands in the way of a particle.

At fixed mu and K the equatorial crossing point moves as a Hamiltonian system: ``d(x)/dt = zhat x grad H / (q
B_eq)`` with ``H = W(mu, B_m(K; r, phi)) + q Phi`` (Northrop 1963, The Adiabatic Motion of Charged Particles;
Roederer 1970, Dynamics of Geomagnetically Trapped Radiation).
"""

from __future__ import annotations

from typing import Any

import numpy as np

from fields.constants import KV_PER_NT_RE2_TO_PER_H
from tracer.kernels.arith import compiled, sincos

from .field import equator, foot, mirror, potential


@compiled
def slope(t: Any, r: Any, phi: Any, p: Any, C: Any, D: Any) -> Any:
    """dr/dt and dphi/dt per hour for the particle `p` = (mu, k, 1/q, 2/(m c^2))."""
    mu, k, inverse_charge, inverse_half_rest = p
    s, c = sincos(phi)
    b = equator(r, s, c, C)
    bm, bm_r, bm_phi, _ = mirror(k, r, s, c, C)
    _, e_r, e_phi = potential(r, s, c, t, C, D)
    # dW/dB_m = mu / gamma, gamma^2 = 1 + 2 mu B_m / (m c^2)
    w = mu * inverse_charge / np.sqrt(1.0 + mu * bm * inverse_half_rest)
    f = KV_PER_NT_RE2_TO_PER_H / (b * r)
    return -f * (w * bm_phi + e_phi), f * (w * bm_r + e_r)


@compiled
def depth_in_cone(r: Any, phi: Any, p: Any, foot_re: Any, C: Any) -> Any:
    """B_m / B_foot - 1: positive inside the loss cone."""
    s, c = sincos(phi)
    return mirror(p[1], r, s, c, C)[0] / foot(r, s, c, foot_re, C) - 1.0


@compiled
def state(r: Any, phi: Any, p: Any, C: Any) -> Any:
    """Kinetic energy in keV and cot^2 of the equatorial pitch angle."""
    s, c = sincos(phi)
    bm, _, _, cot2 = mirror(p[1], r, s, c, C)
    # p^2 c^2 = 2 m c^2 mu B_m; the form without a difference of roots keeps the digits of an eV ion
    return 2.0 * p[0] * bm / (1.0 + np.sqrt(1.0 + p[0] * bm * p[3])), cot2
