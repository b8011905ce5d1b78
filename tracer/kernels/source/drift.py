"""The bounce-averaged drift, and what stands in the way of a particle.

At fixed mu and K the equatorial crossing point moves as a Hamiltonian system: ``d(x)/dt = zhat x grad H / (q
B_eq)`` with ``H = W(mu, B_m(K; r, phi)) + q Phi`` (Northrop 1963, The Adiabatic Motion of Charged Particles;
Roederer 1970, Dynamics of Geomagnetically Trapped Radiation).
"""

from __future__ import annotations

from typing import Any

import numpy as np

from fields.constants import KV_PER_NT_RE2_TO_PER_H
from tracer.kernels.arith import arc_tangent, compiled, inlined, inverse_root, sincos, stand_apart

from .field import drift_factor, foot, mirror, potential


@inlined
def motion(t: Any, r: Any, phi: Any, p: Any, C: Any, D: Any) -> Any:
    """dr/dt and dphi/dt per hour for the particle `p` = (mu, k, 1/q, 2/(m c^2)), its mirror field and the rate of
    that.

    `C` are the constants of the field, `D` its drivers in this segment.
    """
    mu, k, inverse_charge, inverse_half_rest = p
    s, c = sincos(phi)
    bm, bm_r, bm_phi, _ = mirror(k, r, s, c, C)
    _, e_r, e_phi = potential(r, s, c, t, C, D)
    # dW/dB_m = mu / gamma, gamma^2 = 1 + 2 mu B_m / (m c^2)
    w = mu * inverse_charge * inverse_root(1.0 + mu * bm * inverse_half_rest)
    f = KV_PER_NT_RE2_TO_PER_H * drift_factor(r, s, c, C)
    by_r, by_phi = -f * (w * bm_phi + e_phi), f * (w * bm_r + e_r)
    return by_r, by_phi, bm, bm_r * by_r + bm_phi * by_phi


@inlined
def slope(t: Any, r: Any, phi: Any, p: Any, C: Any, D: Any) -> Any:
    """dr/dt and dphi/dt alone."""
    by_r, by_phi, _, _ = motion(t, r, phi, p, C, D)
    return by_r, by_phi


@compiled
def slope_at(t: Any, r: Any, phi: Any, p: Any, C: Any, D: Any) -> Any:
    """`slope`, for scalar code."""
    stand_apart()
    return slope(t, r, phi, p, C, D)


@compiled
def depth_in_cone(r: Any, phi: Any, p: Any, foot_re: Any, C: Any) -> Any:
    """B_m / B_foot - 1: positive inside the loss cone."""
    stand_apart()
    s, c = sincos(phi)
    return mirror(p[1], r, s, c, C)[0] / foot(r, s, c, foot_re, C) - 1.0


@inlined
def observed(r: Any, phi: Any, p: Any, C: Any) -> Any:
    """Local time in hours, kinetic energy in keV and equatorial pitch angle in degrees."""
    s, c = sincos(phi)
    bm, _, _, cot2 = mirror(p[1], r, s, c, C)
    # p^2 c^2 = 2 m c^2 mu B_m; the form without a difference of roots keeps the digits of an eV ion
    energy = 2.0 * p[0] * bm / (1.0 + np.sqrt(1.0 + p[0] * bm * p[3]))
    mlt = 12.0 + phi * (12.0 / np.pi)
    mlt = mlt - 24.0 * np.floor(mlt * (1.0 / 24.0))
    cot = np.sqrt(cot2)
    # below 45 degrees from the angle to the line, above it from the angle to the equator: small ones keep their digits
    small = arc_tangent(1.0 / cot if cot > 1.0 else cot) * (180.0 / np.pi)
    return (0.0 if mlt >= 24.0 else mlt), energy, (small if cot > 1.0 else 90.0 - small)
