"""The level curves that bound regions, each from the node that makes it critical.

From a saddle leave four branches, along the directions in which its second derivative vanishes; from a degenerate
point as many as its level cuts a small circle in. A level that touches a boundary from inside leaves both ways. And
from each end of the source sector runs the level curve that enters there.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import compiled

from .circles import BEND, LEVEL, PHI, RISE, SIDE
from .energy import NEAR, curvature, drift_sense, energy, wrapped
from .levels import FAILED, FINE, JOINED, MOST, OUTER, polished, walk
from .stationary import DEGENERATE, H, KIND, X, XX, XP, NEARBY, P, PP, RADIUS, SADDLE, principal

SEPARATRIX, OUTER_TOUCH, INNER_TOUCH, SOURCE_EDGE = 0.0, 1.0, 2.0, 3.0  # kinds of curves
NOWHERE = -1.0  # in place of a node
SAME_LEVEL = 1e-13  # of the terms of H
# columns of the curves, in the order of the drift; those of a start, where way is +1 if larger H lies on the right
CURVE_KIND, CURVE_LEVEL, FIRST, COUNT, BEGIN, END, BEGIN_NODE, END_NODE, ABOVE, BELOW, OWNER = range(11)
AT_X, AT_PHI, WAY, START_KIND, START_LEVEL, START_NODE, FROM_X, FROM_PHI, START_RADIUS = range(9)
RING = 64  # places on the circle round a degenerate point


@compiled
def add_start(x: Any, phi: Any, way: Any, kind: Any, level: Any, node: Any, of: Any, starts: Any, count: Any) -> Any:
    """Append a start: the place, which way, and the node ``of`` (x, phi, radius); -1 when there are too many."""
    if count < 0 or count >= starts.shape[0]:
        return -1
    values = (x, phi, way, kind, level, node, of[0], of[1], of[2])
    for i in range(len(values)):
        starts[count, i] = values[i]
    return count + 1


@compiled
def outward(x: Any, phi: Any, ex: Any, ey: Any, F: Any) -> Any:
    """Which way a level curve is walked from (x, phi) to go in the direction (ex, ey)."""
    _, gx, gp, _ = energy(x, phi, F)
    return 1.0 if gx * ey - gp * ex > 0.0 else -1.0


@compiled
def starts_of_saddle(point: Any, node: Any, F: Any, starts: Any, count: Any) -> Any:
    """Four starts, a little along the directions in which the second derivative vanishes."""
    small, big, ex, ey = principal(point[XX], point[XP], point[PP])
    n = np.sqrt(abs(small) + abs(big))
    along, across = (
        np.sqrt(abs(big)) / n,
        np.sqrt(abs(small)) / n,
    )  # of the soft direction (ex, ey), of the stiff (-ey, ex)
    x0, phi0, radius = point[X], point[P], point[NEARBY]
    for i in range(4):
        a, b = along * (1.0 if i < 2 else -1.0), across * (1.0 if i % 2 == 0 else -1.0)
        u, v = a * ex - b * ey, a * ey + b * ex
        x, phi, there = polished(x0 + radius * u, phi0 + radius * v, point[H], F)
        if not there:
            return -1
        count = add_start(
            x, phi, outward(x, phi, u, v, F), SEPARATRIX, point[H], node, (x0, phi0, radius), starts, count
        )
    return count


@compiled
def starts_of_degenerate(point: Any, node: Any, F: Any, starts: Any, count: Any) -> Any:
    """A start wherever the level cuts the circle round a degenerate point."""
    x0, phi0, radius = point[X], point[P], point[NEARBY]
    before = 0.0
    for j in range(RING + 1):
        angle = 2.0 * np.pi * (j + 0.123) / RING  # no direction of symmetry
        u, v = np.cos(angle), np.sin(angle)
        value = energy(x0 + radius * u, phi0 + radius * v, F)[0] - point[H]
        if j > 0 and (value < 0.0) != (before < 0.0):
            angle -= np.pi / RING
            u, v = np.cos(angle), np.sin(angle)
            x, phi, there = polished(x0 + radius * u, phi0 + radius * v, point[H], F)
            if not there:
                return -1
            way = outward(x, phi, u, v, F)
            count = add_start(x, phi, way, SEPARATRIX, point[H], node, (x0, phi0, radius), starts, count)
        before = value
    return count


@compiled
def starts_of_touch(circle: Any, node: Any, edges: Any, F: Any, starts: Any, count: Any) -> Any:
    """Two starts where a level touches a boundary from inside; none where it touches from outside."""
    if circle[SIDE] * circle[BEND] * circle[RISE] <= 0.0:
        return count
    edge = edges[1] if circle[SIDE] > 0.0 else edges[0]
    kind = OUTER_TOUCH if circle[SIDE] > 0.0 else INNER_TOUCH
    xx, xp, pp = curvature(edge, circle[PHI], NEAR, F)
    # near a stationary point all is as small as the way to it
    reach = min(2.0 * RADIUS, 0.2 * abs(circle[RISE]) / (abs(xx) + abs(xp) + abs(pp)))
    for way in (1.0, -1.0):
        # x - edge = -pp s^2 / (2 dH/dx); where that is nothing, the place is corrected anyway
        inside = min(abs(0.5 * pp * reach * reach / circle[RISE]), reach)
        x, phi, there = polished(edge - circle[SIDE] * inside, circle[PHI] + way * reach, circle[LEVEL], F)
        if not there or abs(phi - circle[PHI]) < 0.5 * reach:
            return -1
        x = min(max(x, edges[0]), edges[1])
        go = outward(x, phi, 0.0, way, F)
        of = (edge, circle[PHI], reach)
        count = add_start(x, phi, go, kind, circle[LEVEL], node, of, starts, count)
    return count


@compiled
def start_of_source_edge(phi: Any, edges: Any, F: Any, starts: Any, count: Any) -> Any:
    """The level curve that enters at an end of the source sector; none where the drift leaves there."""
    level, _, gp, size = energy(edges[1], phi, F)
    forward = drift_sense(F)
    if forward * gp <= SAME_LEVEL * size:
        return count
    return add_start(edges[1], phi, forward, SOURCE_EDGE, level, NOWHERE, (edges[1], phi, 0.0), starts, count)


@compiled
def all_starts(
    edges: Any, sector: Any, points: Any, n_point: Any, circles: Any, n_circle: Any, F: Any, starts: Any
) -> Any:
    """The starts of all curves; their number, and whether none is missing."""
    count, missing = np.int64(0), 0  # a plain 0 would be a type of its own, and all compiled twice
    for j in range(n_point):
        more = count
        if points[j, KIND] == SADDLE:
            more = starts_of_saddle(points[j], float(j), F, starts, count)
        elif points[j, KIND] == DEGENERATE:
            more = starts_of_degenerate(points[j], float(j), F, starts, count)
        missing += int(more < 0)
        count = max(more, count)
    for j in range(n_circle):
        more = starts_of_touch(circles[j], float(n_point + j), edges, F, starts, count)
        missing += int(more < 0)
        count = max(more, count)
    if sector[1] - sector[0] < 2.0 * np.pi:
        for i in range(2):
            more = start_of_source_edge(wrapped(sector[i]), edges, F, starts, count)
            missing += int(more < 0)
            count = max(more, count)
    return count, missing == 0


@compiled
def anchors_of(level: Any, size: Any, starts: Any, count: Any, anchors: Any) -> Any:
    """The nodes of one level, each once, as (x, phi, radius, node); their number. A source edge is no node."""
    n, last = 0, NOWHERE
    for j in range(count):
        node = starts[j, START_NODE]
        if node != NOWHERE and node != last and abs(starts[j, START_LEVEL] - level) <= SAME_LEVEL * size:
            anchors[n, 0], anchors[n, 1] = starts[j, FROM_X], starts[j, FROM_PHI]
            anchors[n, 2], anchors[n, 3] = starts[j, START_RADIUS], node
            n, last = n + 1, node
    return n


@compiled
def trace_curve(start: Any, edges: Any, circles: Any, anchors: Any, F: Any, kept: Any) -> Any:
    """Points of one curve into `kept`, its node first, in the order of the drift; how it ended, their number, and the
    anchor joined."""
    x, phi, way = start[AT_X], start[AT_PHI], start[WAY]
    lead = 0
    if start[START_NODE] != NOWHERE:
        kept[0, 0], kept[0, 1] = start[FROM_X], start[FROM_PHI]
        lead = 1
    h = max(start[START_RADIUS], 1e-4)
    end, _, _, count, node = walk(x, phi, start[START_LEVEL], way, h, F, edges, FINE, circles, anchors, kept[lead:])
    count += lead
    if way != drift_sense(F):
        for i in range(count // 2):
            j = count - 1 - i
            a, b = kept[i, 0], kept[i, 1]
            kept[i, 0], kept[i, 1] = kept[j, 0], kept[j, 1]
            kept[j, 0], kept[j, 1] = a, b
    return end, count, node


@compiled
def grown(table: Any, rows: Any) -> Any:
    """`table` with room for `rows` rows at least."""
    if rows <= table.shape[0]:
        return table
    wider = np.empty((max(rows, 2 * table.shape[0]), table.shape[1]))
    copy_rows(table, table.shape[0], wider, np.int64(0), np.int64(0))
    return wider


@compiled
def copy_rows(source: Any, count: Any, target: Any, first: Any, column: Any) -> None:
    """Copy rows; by loops, since an assignment of slices compiles the text of its error message for seconds."""
    for i in range(count):
        for j in range(source.shape[1]):
            target[first + i, column + j] = source[i, j]


@compiled
def other_end(starts: Any, count: Any, node: Any, x: Any, phi: Any) -> Any:
    """The start at `node` that lies nearest to where a curve came in."""
    best, nearest = -1, 1e300
    for j in range(count):
        if starts[j, START_NODE] == node:
            dx, dp = starts[j, AT_X] - x, wrapped(starts[j, AT_PHI] - phi)
            if dx * dx + dp * dp < nearest:
                best, nearest = j, dx * dx + dp * dp
    return best


@compiled
def trace_curves(
    starts: Any, count: Any, edges: Any, circles: Any, F: Any, curves: Any, n_curve: Any, track: Any, n_track: Any
) -> Any:
    """Append all curves of one particle to the tables; returns these, their lengths, and whether every curve ended.

    A curve that joins a node arrives there along another start, which is then done with.
    """
    anchors, kept, whole = np.empty((count, 4)), np.empty((MOST + 4, 2)), True
    done = np.zeros(count, np.uint8)
    for m in range(count):
        if done[m]:
            continue
        start = starts[m]
        size = energy(start[AT_X], start[AT_PHI], F)[3]
        n = anchors_of(start[START_LEVEL], size, starts, count, anchors) if start[START_NODE] != NOWHERE else 0
        end, length, node = trace_curve(start, edges, circles, anchors[:n], F, kept)
        joined = NOWHERE
        if end == JOINED:
            joined = anchors[node, 3]
            last = length - 2 if start[WAY] == drift_sense(F) else 1
            done[other_end(starts, count, joined, kept[last, 0], kept[last, 1])] = 1
        whole = whole and end != FAILED
        curves, track = grown(curves, n_curve + 1), grown(track, n_track + length)
        row = curves[n_curve]
        row[CURVE_KIND], row[CURVE_LEVEL] = start[START_KIND], start[START_LEVEL]
        row[FIRST], row[COUNT] = n_track, length
        i, j = (BEGIN, END) if start[WAY] == drift_sense(F) else (END, BEGIN)
        row[i], row[i + 2] = (JOINED if start[START_NODE] != NOWHERE else OUTER), start[START_NODE]
        row[j], row[j + 2] = end, joined
        copy_rows(kept, length, track, n_track, np.int64(0))
        n_curve, n_track = n_curve + 1, n_track + length
    return curves, n_curve, track, n_track, whole
