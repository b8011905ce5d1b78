"""The benchmark's storm in plain numbers, as its opponents take it: a right-hand side written out by hand.

In a dipole with corotation and the shielded power law (gamma 2), for a particle of charge q and first invariant mu:

    dr/dt   = a r^4 cos(phi)
    dphi/dt = w - g Q / sqrt(r^4 + c P r) - 2 a r^3 sin(phi)

a = F A / b0 is the convection, w = F C / b0 the corotation, g = F mu / q the gradient drift, c = 2 mu b0 / (m c^2) its
relativistic part, F = KV_PER_NT_RE2_TO_PER_H. P = B_m / B_eq and Q = -(r / B_eq) dB_m/dr at fixed second invariant
are functions of kappa = k sqrt(r) / sqrt(b0) alone (`bench_mirror`); at 90 degrees they are 1 and 3.
"""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np
from bench_problems import Problem

from fields.constants import KV_PER_NT_RE2_TO_PER_H
from fields.electric.corotation import corotation_potential_kV
from fields.electric.volland_stern import maynard_chen_amplitude

# How the opponents' own code is compiled; `fastmath=True` gains nothing more.
OPTIONS: dict[str, Any] = {"error_model": "numpy", "fastmath": {"contract", "arcp", "nsz"}}
TIME, R, CAUSE, TURNS, GOOD, BAD = 0, 1, 5, 6, 8, 9  # columns of the end states
DRIFTING, OUTER, INNER, FAILED = 0, 1, 2, 6


class Storm(NamedTuple):
    """What all particles share.

    Attributes
    ----------
    stops : ndarray, shape (n_segment,)
        End of each segment of constant drivers, hours; the first begins at 0.
    convection : ndarray, shape (n_segment,)
        `a` of the equations above.
    corotation : float
        `w`.
    outer, inner : float
        Boundaries of the domain, R_E.
    top : float
        Bound of kappa within the domain; 0 where all particles mirror at the equator.
    """

    stops: np.ndarray
    convection: np.ndarray
    corotation: float
    outer: float
    inner: float
    top: float


def storm_of(asked: Problem) -> Storm:
    """The storm of a problem; its drivers are steps."""
    b0 = asked.scenario.field.magnetic.reference_b0_nT()
    edges, segments, domain = asked.kernel.edges, asked.kernel.segments, asked.scenario.domain
    assert (edges[0], edges[-1]) == (0.0, asked.scenario.end_h)
    assert not np.any(segments[:, 2])
    scale = KV_PER_NT_RE2_TO_PER_H / b0
    top = float(np.max(asked.state[:, 4])) * math.sqrt(domain.outer_re / b0)
    convection = scale * maynard_chen_amplitude(segments[:, 1])
    return Storm(edges[1:], convection, scale * corotation_potential_kV(b0), domain.outer_re, domain.inner_re, top)


def particles_of(asked: Problem, state: np.ndarray) -> np.ndarray:
    """r, phi, `g`, `c` and kappa / sqrt(r) of each particle, shape (n, 5)."""
    b0 = asked.scenario.field.magnetic.reference_b0_nT()
    r, phi, release, mu, k, inverse_charge, inverse_half_rest = state[:, :7].T
    assert not np.any(release)
    return np.stack([r, phi, KV_PER_NT_RE2_TO_PER_H * mu * inverse_charge, mu * inverse_half_rest * b0, k / b0**0.5], 1)


def no_ends(count: int) -> np.ndarray:
    """End states to be filled in."""
    return np.full((count, 10), np.nan)
