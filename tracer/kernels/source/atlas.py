"""The map of one particle: which region lies on either side of each curve, and along the outer boundary between them.

A place is looked up by going outward from it, at its local time, to the first curve. Where that may err, because a
curve bulges out between its points or two lie close together, the level curve of the place is followed instead.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import compiled

from .circles import LEVEL, PHI, SIDE
from .energy import drift_sense, energy, wrapped
from .levels import polished
from .regions import UNDECIDED, region_at_level, region_of
from .separatrices import ABOVE, BELOW, COUNT, CURVE_LEVEL, FIRST, SAME_LEVEL
from .stationary import H

ASIDE = 0.005  # how far off a curve its side is looked at, at most
SAG = 0.04  # of the distance of two points: more than a curve can bulge out between them
BUCKETS = 128  # of azimuth, to find the curves that pass a place


@compiled
def room(level: Any, way: Any, tolerance: Any, curves: Any, points: Any, circles: Any) -> Any:
    """How far the next critical level lies above (`way` +1) or below `level`."""
    gap = 1e300
    for table, column in ((curves, CURVE_LEVEL), (points, H), (circles, LEVEL)):
        for j in range(table.shape[0]):
            off = way * (table[j, column] - level)
            if off > tolerance:
                gap = min(gap, off)
    return gap


@compiled
def side_of(
    curve: Any, way: Any, track: Any, edges: Any, sector: Any, curves: Any, points: Any, circles: Any, F: Any
) -> Any:
    """Region beside a curve, where H is larger (`way` +1) or smaller.

    Looked at half way to the next critical level, so that nothing lies between.
    """
    middle = int(curve[FIRST] + curve[COUNT] // 2)
    x, phi, level = track[middle, 0], track[middle, 1], curve[CURVE_LEVEL]
    _, gx, gp, size = energy(x, phi, F)
    n2 = gx * gx + gp * gp
    off = way * min(0.5 * room(level, way, SAME_LEVEL * size, curves, points, circles), ASIDE * np.sqrt(n2))
    for _ in range(30):
        nx, nphi, there = polished(x + off * gx / n2, phi + off * gp / n2, level + off, F)
        if there and edges[0] <= nx <= edges[1]:
            return region_at_level(nx, nphi, level + off, edges, sector, circles, F)[0]
        off *= 0.5  # a boundary of the domain is nearer
    return UNDECIDED


@compiled
def label_curves(curves: Any, track: Any, edges: Any, sector: Any, points: Any, circles: Any, F: Any) -> None:
    """Fill in the regions on either side of the curves of one particle."""
    for j in range(curves.shape[0]):
        curves[j, ABOVE] = side_of(curves[j], 1.0, track, edges, sector, curves, points, circles, F)
        curves[j, BELOW] = side_of(curves[j], -1.0, track, edges, sector, curves, points, circles, F)


@compiled
def arcs_of(curves: Any, track: Any, edges: Any, sector: Any, circles: Any, F: Any) -> Any:
    """The outer boundary cut wherever its region may change: rows (azimuth where the arc begins, region), eastward."""
    cuts = np.empty(circles.shape[0] + 2 * curves.shape[0] + 3)
    n = 0
    for j in range(circles.shape[0]):
        if circles[j, SIDE] > 0.0:
            cuts[n] = wrapped(circles[j, PHI])
            n += 1
    for j in range(curves.shape[0]):
        for at in (int(curves[j, FIRST]), int(curves[j, FIRST] + curves[j, COUNT] - 1)):
            if track[at, 0] == edges[1]:
                cuts[n] = wrapped(track[at, 1])
                n += 1
    for i in range(2):
        cuts[n] = wrapped(sector[i])
        n += 1
    for j in range(1, n):  # insertion: numba's own sorting would take longer to compile than to write
        i = j
        while i > 0 and cuts[i - 1] > cuts[i]:
            cuts[i - 1], cuts[i] = cuts[i], cuts[i - 1]
            i -= 1
    arcs = np.empty((n, 2))
    for j in range(n):
        after = cuts[j + 1] if j + 1 < n else cuts[0] + 2.0 * np.pi
        arcs[j, 0] = cuts[j]
        arcs[j, 1] = region_of(edges[1], 0.5 * (cuts[j] + after), edges, sector, circles, F)[0]
    return arcs


@compiled
def bucket_segments(curves: Any, track: Any, begins: Any) -> Any:
    """The segments of all curves by azimuth, as rows (curve, point); bucket b begins at row ``begins[b]``."""
    width = 2.0 * np.pi / BUCKETS
    members = np.empty((0, 2), np.int64)
    for filling in range(2):
        for j in range(curves.shape[0]):
            for at in range(int(curves[j, FIRST]), int(curves[j, FIRST] + curves[j, COUNT] - 1)):
                one, other = track[at, 1], track[at + 1, 1]
                margin = abs(track[at + 1, 0] - track[at, 0]) + abs(other - one)
                first = int(np.floor((min(one, other) - margin) / width))
                last = int(np.floor((max(one, other) + margin) / width))
                for b in range(first, min(last, first + BUCKETS - 1) + 1):
                    if filling:
                        begins[b % BUCKETS] -= 1
                        members[begins[b % BUCKETS], 0], members[begins[b % BUCKETS], 1] = j, at
                    else:
                        begins[b % BUCKETS] += 1
        if not filling:
            for b in range(1, BUCKETS + 1):
                begins[b] += begins[b - 1]
            members = np.empty((begins[BUCKETS], 2), np.int64)
    return members


@compiled
def looked_up(x: Any, phi: Any, curves: Any, track: Any, arcs: Any, begins: Any, members: Any, sense: Any) -> Any:
    """Region of a place from the curves around it; -1 when one is too close for that."""
    b = int(np.floor(phi / (2.0 * np.pi / BUCKETS))) % BUCKETS
    # the first crossing outward, the lowest that it may be, and the lowest that any other may be
    nearest, highest, first = 1e300, 1e300, -1
    lowest, other, mine, region = 1e300, 1e300, -1, -1.0
    for m in range(begins[b], begins[b + 1]):
        j, at = members[m, 0], members[m, 1]
        dx, dp = track[at + 1, 0] - track[at, 0], track[at + 1, 1] - track[at, 1]
        sx, sp = x - track[at, 0], wrapped(phi - track[at, 1])
        v2 = dx * dx + dp * dp
        share = min(max((sx * dx + sp * dp) / v2, 0.0), 1.0)
        ax, ap = sx - share * dx, sp - share * dp
        terminal = at == curves[j, FIRST] or at == curves[j, FIRST] + curves[j, COUNT] - 2
        margin = 0.5 if terminal else SAG
        if ax * ax + ap * ap <= margin * margin * v2:
            return -1.0
        if (sp >= 0.0) != (sp - dp >= 0.0):
            above, slack = sp / dp * dx - sx, SAG * v2 / abs(dp)
            if above > 0.0:
                if above - slack < lowest:
                    lowest, other, mine = above - slack, lowest, m
                else:
                    other = min(other, above - slack)
            if 0.0 < above < nearest:
                nearest, highest, first = above, above + slack, m
                # in the order of the drift of a positive charge larger H lies on the right hand: outward when eastward
                region = curves[j, BELOW] if (dp > 0.0) == (sense > 0.0) else curves[j, ABOVE]
    if nearest < 1e300:
        return region if (other if mine == first else lowest) > highest else -1.0
    j = arcs.shape[0] - 1
    while j > 0 and arcs[j, 0] > phi:
        j -= 1
    return arcs[j, 1] if arcs[j, 0] <= phi else arcs[arcs.shape[0] - 1, 1]


@compiled
def sort_places(
    places: Any, curves: Any, track: Any, edges: Any, sector: Any, circles: Any, F: Any, kinds: Any
) -> None:
    """The region of every place into `kinds`."""
    begins = np.zeros(BUCKETS + 1, np.int64)
    members = bucket_segments(curves, track, begins)
    arcs = arcs_of(curves, track, edges, sector, circles, F)
    sense = drift_sense(F)
    for i in range(places.shape[0]):
        x, phi = places[i, 0], wrapped(places[i, 1])
        region = looked_up(x, phi, curves, track, arcs, begins, members, sense)
        kinds[i] = region if region >= 0.0 else region_of(x, phi, edges, sector, circles, F)[0]
