"""Arrivals: when, where and with what energy particles cross a circle around the Earth."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from fields.errors import InputError, nearest
from fields.units import Floats
from tracer.analysis.polylines import Polylines, RadialPaths, polylines_across, radial_paths_across, shorter_way
from tracer.records import Result

Direction = Literal["inward", "outward", "any"]
DIRECTIONS = ("inward", "outward", "any")

BLOCK_POINTS = 2_000_000  # track points held at a time, for each quantity
LEAST_NEIGHBOUR = 0.05  # a neighbouring interval shorter than this part of the crossed one gives no slope
HALVINGS = 50


@dataclass(frozen=True)
class Crossings:
    """Crossings of the circle r = `r_re`, by particle, then in the order of tracing.

    Attributes
    ----------
    r_re : float
    particle : ndarray of int, shape (n,)
        Particle numbers in the run.
    time_h, mlt_h, energy_keV, pitch_deg : ndarray, shape (n,)
        Run time and state at the crossing.
    inward : ndarray of bool, shape (n,)
        Sense of the crossing, in the order of tracing.
    mlt_known : ndarray of bool, shape (n,)
        False where the particle goes round too fast for the saved interval: its local time is then a guess.
    """

    r_re: float
    particle: NDArray[np.int64]
    time_h: Floats
    mlt_h: Floats
    energy_keV: Floats
    pitch_deg: Floats
    inward: NDArray[np.bool_]
    mlt_known: NDArray[np.bool_]

    @property
    def count(self) -> int:
        """Number of crossings."""
        return int(self.particle.size)

    def where(self, keep: NDArray[np.bool_] | NDArray[np.int64]) -> Crossings:
        """Some of the crossings."""
        return Crossings(
            self.r_re,
            self.particle[keep],
            self.time_h[keep],
            self.mlt_h[keep],
            self.energy_keV[keep],
            self.pitch_deg[keep],
            self.inward[keep],
            self.mlt_known[keep],
        )

    def within(self, sector_h: tuple[float, float]) -> Crossings:
        """Those whose local time is known and lies in the sector, eastward from its first to its last hour."""
        width = (sector_h[1] - sector_h[0]) % 24.0 or 24.0
        return self.where(self.mlt_known & ((self.mlt_h - sector_h[0]) % 24.0 < width))

    def first(self) -> Crossings:
        """The first of each particle."""
        return self.where(np.unique(self.particle, return_index=True)[1])


def crossings(result: Result, r_re: float, direction: Direction = "any") -> Crossings:
    """All crossings of the circle r = `r_re`.

    Between two points of a path r follows the cubic through both with slopes from their neighbours (Hermite form), so
    that time is good to the third order of the saved interval where the motion is smooth, and to the second at a
    corner of a driver. A path that touches the circle only between two points is not seen to cross it.

    Parameters
    ----------
    result : Result
    r_re : float
        R_E, above 0.
    direction : {"inward", "outward", "any"}
        In the order of tracing.

    Raises
    ------
    InputError
        When `r_re` or `direction` makes no sense.
    """
    _refuse_nonsense(r_re, direction)
    parts = [
        _crossings_of(polylines_across(result, rows, float(r_re)), float(r_re), direction) for rows in _blocks(result)
    ]
    names = ("particle", "time_h", "mlt_h", "energy_keV", "pitch_deg", "inward", "mlt_known")
    return Crossings(float(r_re), *(np.concatenate([getattr(part, name) for part in parts]) for name in names))


def first_times(result: Result, r_re: float, direction: Direction = "any") -> tuple[NDArray[np.int64], Floats]:
    """Who crosses the circle r = `r_re`, and when first: those of ``crossings(...).first()``, without their state.

    Reads the tracks of r only. Arguments as of `crossings`.

    Returns
    -------
    particle : ndarray of int, shape (n,)
        Rising particle numbers.
    time_h : ndarray, shape (n,)
    """
    _refuse_nonsense(r_re, direction)
    parts = []
    for rows in _blocks(result):
        paths = radial_paths_across(result, rows, float(r_re))
        row, column, _ = _hits(paths, float(r_re), direction)
        first = np.unique(row, return_index=True)[1]
        parts.append((paths.index[row[first]], _passage(paths, row[first], column[first], float(r_re))[0]))
    return np.concatenate([particle for particle, _ in parts]), np.concatenate([time for _, time in parts])


def _refuse_nonsense(r_re: float, direction: str) -> None:
    if not (np.isfinite(r_re) and r_re > 0):
        raise InputError("not a distance", "a number above 0 R_E", key="r_re", value=r_re)
    if direction not in DIRECTIONS:
        raise InputError("unknown direction", nearest(direction, DIRECTIONS), key="direction", value=direction)


def _blocks(result: Result) -> Iterator[slice]:
    """All particles, by as many as may be held at a time."""
    block = max(1, BLOCK_POINTS // (result.time_h.size + 2))
    for begin in range(0, max(result.count, 1), block):
        yield slice(begin, begin + block)


def _crossings_of(paths: Polylines, r_re: float, direction: Direction) -> Crossings:
    row, column, inward = _hits(paths, r_re, direction)
    time_h, time, part = _passage(paths, row, column, r_re)
    mlt = _unwound(_four(paths.mlt_h, row, column))
    values = [
        _value(_hermite(time, points), part)
        for points in (mlt, _four(paths.energy_keV, row, column), _four(paths.pitch_deg, row, column))
    ]
    return Crossings(
        r_re,
        paths.index[row],
        time_h,
        values[0] % 24.0,
        values[1],
        np.minimum(values[2], 90.0),
        inward,
        paths.followed()[row],
    )


def _hits(
    paths: RadialPaths, r_re: float, direction: Direction
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.bool_]]:
    """Path and first point of each interval that holds a crossing, and whether that is inward."""
    here, after = paths.r_re[:, :-1], paths.r_re[:, 1:]
    inward, outward = (here > r_re) & (after <= r_re), (here < r_re) & (after >= r_re)
    row, column = np.nonzero({"inward": inward, "outward": outward, "any": inward | outward}[direction])
    return row, column, inward[row, column]


def _passage(
    paths: RadialPaths, row: NDArray[np.int64], column: NDArray[np.int64], r_re: float
) -> tuple[Floats, Floats, Floats]:
    """Time of each crossing, the times of the four points around it, and where in the middle interval it lies."""
    time = _four(paths.time_h, row, column)
    part = _part_at(_hermite(time, _four(paths.r_re, row, column)), r_re)
    return time[:, 1] + part * (time[:, 2] - time[:, 1]), time, part


def _four(table: Floats, row: NDArray[np.int64], column: NDArray[np.int64]) -> Floats:
    """The points at column - 1 to column + 2, NaN off the table; shape (n, 4)."""
    wanted = column[:, None] + np.arange(-1, 3)
    inside = (wanted >= 0) & (wanted < table.shape[1])
    return np.where(inside, table[row[:, None], np.clip(wanted, 0, table.shape[1] - 1)], np.nan)


def _unwound(mlt: Floats) -> Floats:
    """Local times of four points without the jump at midnight, each reached from the last the shorter way round."""
    before, between, after = shorter_way(np.diff(mlt, axis=1)).T
    here = mlt[:, 1]
    return np.column_stack([here - before, here, here + between, here + between + after])


def _hermite(time: Floats, value: Floats) -> tuple[Floats, Floats, Floats, Floats]:
    """Coefficients, constant first, of the cubic in the part of the middle interval; from four points, shape (n,
    4)."""
    gap = np.diff(time, axis=1)
    slope = np.diff(value, axis=1) / gap
    middle = slope[:, 1]

    def at_point(side: int) -> Floats:
        beyond = gap[:, side]
        usable = np.abs(beyond) >= LEAST_NEIGHBOUR * np.abs(gap[:, 1])  # False for NaN
        weighted = (beyond * middle + gap[:, 1] * slope[:, side]) / (beyond + gap[:, 1])
        return np.where(usable, weighted, middle)

    start, rise = value[:, 1], value[:, 2] - value[:, 1]
    left, right = at_point(0) * gap[:, 1], at_point(2) * gap[:, 1]
    return start, left, 3.0 * rise - 2.0 * left - right, left + right - 2.0 * rise


def _value(cubic: tuple[Floats, Floats, Floats, Floats], part: Floats) -> Floats:
    a, b, c, d = cubic
    return a + part * (b + part * (c + part * d))


def _part_at(cubic: tuple[Floats, Floats, Floats, Floats], level: float) -> Floats:
    """Where in the interval the cubic, whose ends stand on both sides of `level`, crosses it; by halving."""
    low, high = np.zeros_like(cubic[0]), np.ones_like(cubic[0])
    above = cubic[0] > level
    for _ in range(HALVINGS):
        centre = 0.5 * (low + high)
        same = (_value(cubic, centre) > level) == above
        low, high = np.where(same, centre, low), np.where(same, high, centre)
    return 0.5 * (low + high)
