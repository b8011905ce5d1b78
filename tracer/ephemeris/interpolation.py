"""Polynomials through neighbouring states: Lagrange through places, Hermite through places and velocities.

Times are differences from the first node of the stencil, in units of its length, so that nothing is lost to the size of
an instant in microseconds.
"""

from __future__ import annotations

import numpy as np

from fields.clock import Micros
from fields.units import Floats


def interpolated(stamps: Micros, nodes: Micros, places: Floats, velocities: Floats | None, points: int) -> Floats:
    """Places between the nodes, each from the `points` nodes around it.

    Parameters
    ----------
    stamps : ndarray of int64, shape (m,)
        Instants wanted, microseconds, within the nodes.
    nodes : ndarray of int64, shape (n,)
        Rising; n of at least `points`.
    places, velocities : ndarray, shape (n, 3)
        km and km/s. With velocities the polynomial is Hermite's, of degree 2 points - 1; without, Lagrange's of degree
        points - 1.
    points : int

    Returns
    -------
    ndarray, shape (m, 3)
    """
    interval = np.clip(np.searchsorted(nodes, stamps, side="right") - 1, 0, max(nodes.size - 2, 0))
    first = np.clip(interval - (points - 1) // 2, 0, nodes.size - points)
    stencil = first[:, None] + np.arange(points)
    length = np.maximum(nodes[stencil[:, -1]] - nodes[stencil[:, 0]], 1)
    at = (nodes[stencil] - nodes[first][:, None]) / length[:, None]
    t = (stamps - nodes[first]) / length
    basis, slopes = lagrange_basis(t, at)
    if velocities is None:
        return np.asarray(np.einsum("mk,mkj->mj", basis, places[stencil]))
    square = basis * basis
    reach = t[:, None] - at
    seconds = length[:, None] * 1e-6
    by_place = np.einsum("mk,mkj->mj", (1.0 - 2.0 * reach * slopes) * square, places[stencil])
    return np.asarray(by_place + np.einsum("mk,mkj->mj", reach * square * seconds, velocities[stencil]))


def lagrange_basis(t: Floats, at: Floats) -> tuple[Floats, Floats]:
    """The basis polynomials of the nodes `at`, shape (m, k), taken at `t`, shape (m,), and the slope of each at its own
    node."""
    points = at.shape[1]
    basis, slopes = np.ones_like(at), np.zeros_like(at)
    for i in range(points):
        for j in range(points):
            if i != j:
                gap = at[:, i] - at[:, j]
                basis[:, i] *= (t - at[:, j]) / gap
                slopes[:, i] += 1.0 / gap
    return basis, slopes
