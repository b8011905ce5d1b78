"""Entry points for steady fields: the boundaries of particles, and the regions of places."""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import compiled, entry_point

from .atlas import label_curves, sort_places
from .circles import circle_points
from .regions import region_of
from .separatrices import OWNER, all_starts, copy_rows, grown, trace_curves
from .stationary import stationary_points

MOST_POINTS, MOST_CIRCLE, MOST_STARTS = 64, 64, 320
WHOLE, FLAT = 1, 2  # bits of a particle's state: nothing is missing; H is the same all round


@compiled
def both_circles(edges: Any, F: Any, circles: Any) -> Any:
    """The stationary points along both boundary circles; their number, -1 if there are too many."""
    return circle_points(edges[0], -1.0, F, circles, circle_points(edges[1], 1.0, F, circles, np.int64(0)))


@compiled
def append(table: Any, n: Any, i: Any, rows: Any, count: Any) -> Any:
    """`table` with `count` rows more, particle `i` before each."""
    table = grown(table, n + count)
    for j in range(count):
        table[n + j, 0] = i
    copy_rows(rows, count, table, n, np.int64(1))
    return table


@compiled
def differs(one: Any, other: Any) -> Any:
    """Whether two particles are not the same."""
    for j in range(one.shape[0]):  # noqa: SIM110 - numba has no any()
        if one[j] != other[j]:
            return True
    return False


@entry_point
def find_boundaries(addresses: Any, C: Any, P: Any, domain: Any) -> Any:
    """Stationary points and critical level curves of particles.

    Parameters
    ----------
    addresses : tuple of 2 int
        Of the functions of ``hamiltonian.py``.
    C : (n_constant,)
        Constants of the field.
    P : (n, 6 + 2 n_driver)
        mu, k, q, 2/(m c^2), time, drivers.
    domain : tuple of 2 tuples of 2 float
        ln r of the boundaries; azimuths of the source sector, the second up to 2 pi above the first.

    Returns
    -------
    states : (n,)
        Bits WHOLE and FLAT.
    points, circles, curves, track
        Tables with the particle in the first column; but `track`, the points of all curves, has none.
    """
    (point, circle), (edges, sector) = addresses, domain
    states, out = np.zeros(P.shape[0], np.int64), np.empty(4)
    points, circles, curves, track = np.empty((8, 9)), np.empty((16, 6)), np.empty((32, 11)), np.empty((4096, 2))
    zero = np.int64(0)  # a plain 0 is of a type of its own: whatever takes it would be compiled twice
    n_point, n_circle, n_curve, n_track = zero, zero, zero, zero
    here, round_, starts = np.empty((MOST_POINTS, 8)), np.empty((MOST_CIRCLE, 5)), np.empty((MOST_STARTS, 9))
    for i in range(P.shape[0]):
        F = (point, circle, C, P[i], out)
        along = both_circles(edges, F, round_)
        count, whole = stationary_points(edges, round_, along, F, here)
        if count == -2:
            states[i] = WHOLE | FLAT
            continue
        whole = whole and along >= 0
        along = max(along, 0)
        begun, all_there = all_starts(edges, sector, here, count, round_, along, F, starts)
        before = n_curve
        curves, n_curve, track, n_track, ended = trace_curves(
            starts, begun, edges, round_[:along], F, curves, n_curve, track, n_track
        )
        label_curves(curves[before:n_curve], track, edges, sector, here[:count], round_[:along], F)
        for j in range(before, n_curve):
            curves[j, OWNER] = i
        points, circles = append(points, n_point, i, here, count), append(circles, n_circle, i, round_, along)
        n_point, n_circle = n_point + count, n_circle + along
        states[i] = WHOLE if whole and all_there and ended else 0
    return states, points[:n_point], circles[:n_circle], curves[:n_curve], track[:n_track]


@entry_point
def find_regions(addresses: Any, C: Any, P: Any, places: Any, domain: Any, kinds: Any, entries: Any) -> None:
    """The region of one place for each particle, by following its level curve backward in time.

    Parameters
    ----------
    addresses, C, P, domain
        As of `find_boundaries`.
    places : (n, 2)
        ln r and phi.
    kinds, entries : (n,)
        Take the regions and the azimuths of entry.
    """
    (point, circle), (edges, sector) = addresses, domain
    out, circles = np.empty(4), np.empty((MOST_CIRCLE, 5))
    zero = np.int64(0)
    along = zero
    for i in range(P.shape[0]):
        F = (point, circle, C, P[i], out)
        if i == 0 or differs(P[i], P[i - 1]):
            along = max(both_circles(edges, F, circles), zero)
        kinds[i], entries[i] = region_of(places[i, 0], places[i, 1], edges, sector, circles[:along], F)


@entry_point
def sort_regions(
    addresses: Any, C: Any, P: Any, places: Any, domain: Any, states: Any, circles: Any, circle_rows: Any, curves: Any,
    curve_rows: Any, track: Any, kinds: Any,
) -> None:  # fmt: skip
    """The regions of places by the curves that `find_boundaries` found.

    Parameters
    ----------
    addresses, C, P, domain, states, circles, curves, track
        What `find_boundaries` took and gave.
    places : (m, 2)
        ln r and phi.
    circle_rows, curve_rows : (n + 1,)
        Where each particle's rows begin.
    kinds : (n, m)
        Takes the regions.
    """
    (point, circle), (edges, sector) = addresses, domain
    out = np.empty(4)
    for i in range(P.shape[0]):
        F = (point, circle, C, P[i], out)
        along = circles[circle_rows[i] : circle_rows[i + 1], 1:].copy()
        if states[i] == WHOLE:
            mine = curves[curve_rows[i] : curve_rows[i + 1]]
            sort_places(places, mine, track, edges, sector, along, F, kinds[i])
        else:
            for j in range(places.shape[0]):
                kinds[i, j] = region_of(places[j, 0], places[j, 1], edges, sector, along, F)[0]
