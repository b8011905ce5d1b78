"""The tables of the kernel, piece by piece, to one record in user units."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from fields.units import Floats, mlt_from_phi
from tracer.steady.kinds import CurveEnd, PointKind
from tracer.steady.records import Annulus, Boundaries, Codes, Curves, Ints, Particles, StagnationPoints

WHOLE, FLAT = 1, 2  # bits of a particle's state, see source/contours.py
JOINED = 3  # how a walk ends, see source/levels.py
POINT_WIDTH, CIRCLE_WIDTH, CURVE_WIDTH = 9, 6, 11


def boundaries_of(
    asked: Particles, domain: Annulus, parts: Sequence[slice], found: Sequence[tuple[Floats, ...]]
) -> Boundaries:
    """Join what the kernel found of each part of the particles."""
    states, points, circles, curves, tracks = ([piece[i] for piece in found] for i in range(5))
    offset = 0
    for part, point, circle, curve, track in zip(parts, points, circles, curves, tracks, strict=True):
        point[:, 0] += part.start
        circle[:, 0] += part.start
        curve[:, 10] += part.start
        curve[:, 2] += offset
        offset += len(track)
    state = np.concatenate([np.zeros(0, np.int64), *states])
    stagnation = _points(_joined(points, POINT_WIDTH))
    return Boundaries(
        asked,
        domain,
        (state & WHOLE) > 0,
        (state & FLAT) > 0,
        stagnation,
        _curves(_joined(curves, CURVE_WIDTH), _joined(tracks, 2), stagnation.particle),
        _joined(circles, CIRCLE_WIDTH),
    )


def _joined(tables: Sequence[Floats], width: int) -> Floats:
    return np.concatenate([np.zeros((0, width)), *tables])


def _points(table: Floats) -> StagnationPoints:
    particle, x, phi, level, kind, _, xx, xp, pp = table.T
    r = np.exp(x)
    hessian = np.stack([xx, xp, xp, pp], axis=-1).reshape(-1, 2, 2) / (r * r)[:, None, None]
    return StagnationPoints(
        particle.astype(np.int64),
        r,
        mlt_from_phi(phi),
        kind.astype(np.uint8),
        level,
        hessian,
        np.where(kind[:, None] == PointKind.SADDLE, _tangents(xx, xp, pp), np.nan),
    )


def _tangents(xx: Floats, xp: Floats, pp: Floats) -> Floats:
    """Directions, degrees in [0, 180), in which the second derivative of H vanishes: a saddle's separatrices."""
    # xx cos^2 + 2 xp cos sin + pp sin^2 = mean + half cos(2 (a - axis))
    mean, half, axis = 0.5 * (xx + pp), np.hypot(0.5 * (xx - pp), xp), 0.5 * np.arctan2(xp, 0.5 * (xx - pp))
    with np.errstate(divide="ignore", invalid="ignore"):
        opening = 0.5 * np.arccos(np.clip(-mean / half, -1.0, 1.0))
    return np.sort(np.degrees(np.stack([axis - opening, axis + opening], axis=1)) % 180.0, axis=1)


def _curves(table: Floats, track: Floats, point_particle: Ints) -> Curves:
    kind, level, first, count, begin, end, begin_node, end_node, above, below, owner = table.T
    particle = owner.astype(np.int64)
    low = np.searchsorted(point_particle, particle)
    many = np.searchsorted(point_particle, particle, side="right") - low

    def ending(code: Floats, node: Floats) -> tuple[Codes, Ints]:
        at_point = (code == JOINED) & (node < many)
        what = np.where((code == JOINED) & ~at_point, float(CurveEnd.TOUCH), code)
        return what.astype(np.uint8), np.where(at_point, low + node.astype(np.int64), -1)

    begins, begin_point = ending(begin, begin_node)
    ends, end_point = ending(end, end_node)
    return Curves(
        particle,
        kind.astype(np.uint8),
        level,
        begins,
        ends,
        begin_point,
        end_point,
        above.astype(np.uint8),
        below.astype(np.uint8),
        first.astype(np.int64),
        count.astype(np.int64),
        track,
    )


def kernel_rows(curves: Curves) -> Floats:
    """The table of curves as the kernel reads it again: what it needs to look up a place."""
    table = np.zeros((len(curves.particle), CURVE_WIDTH))
    table[:, 1], table[:, 2], table[:, 3] = curves.hamiltonian_keV, curves.first, curves.count
    table[:, 8], table[:, 9] = curves.higher, curves.lower
    return table
