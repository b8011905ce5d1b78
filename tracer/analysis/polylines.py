"""Whole paths: the saved track of a particle with its release before and its end after it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fields.units import Floats
from tracer.analysis.facts import facts
from tracer.records import Result
from tracer.status import Cause

SAME_TIME_H = 1e-9  # a release or an end this close to a saved time is that saved point
QUANTITIES = ("r_re", "mlt_h", "energy_keV", "pitch_deg")

Rows = slice | NDArray[np.int64]


@dataclass(frozen=True)
class RadialPaths:
    """Paths of some particles in the order of tracing; the points of a path stand side by side, NaN elsewhere.

    Attributes
    ----------
    index : ndarray, shape (n,)
        Particle numbers in the run.
    time_h, r_re : ndarray, shape (n, n_time + 2)
    """

    index: NDArray[np.int64]
    time_h: Floats
    r_re: Floats


@dataclass(frozen=True)
class Polylines(RadialPaths):
    """The same with the rest of the state.

    Attributes
    ----------
    mlt_h, energy_keV, pitch_deg : ndarray, shape (n, n_time + 2)
    turns : ndarray, shape (n,)
        Turns around the Earth as the integrator counted them.
    """

    mlt_h: Floats
    energy_keV: Floats
    pitch_deg: Floats
    turns: Floats

    def mlt_steps_h(self) -> Floats:
        """Change of local time from point to point, h, the shorter way round; shape (n, n_time + 1)."""
        return shorter_way(np.diff(self.mlt_h, axis=1))

    def followed(self) -> NDArray[np.bool_]:
        """Whether the points stand close enough to follow the drift round the Earth: their steps sum to the turns."""
        return np.asarray(np.abs(np.nansum(self.mlt_steps_h(), axis=1) / 24.0 - self.turns) < 0.5)


def shorter_way(step_h: Floats) -> Floats:
    """Differences of local time taken into [-12, 12) h."""
    return np.asarray((step_h + 12.0) % 24.0 - 12.0)


def polylines(result: Result, rows: Rows) -> Polylines:
    """The paths of the particles in `rows` (a slice, or rising particle numbers); reads those rows only.

    Without saved tracks a path is its release and its end.
    """
    index = np.arange(result.count, dtype=np.int64)[rows]
    saved = {name: _track(result, name, rows) for name in QUANTITIES}
    return Polylines(turns=_of(result.end, "turns", index), index=index, **_joined(result, index, saved))


def polylines_across(result: Result, rows: slice, r_re: float) -> Polylines:
    """Those of the paths in `rows` that have points on both sides of r = `r_re`, or on it."""
    index, keep, r = _across(result, rows, r_re)
    saved = {"r_re": r}
    for name in QUANTITIES[1:]:
        saved[name] = _track(result, name, rows)[keep] if index.size else r
    return Polylines(turns=_of(result.end, "turns", index), index=index, **_joined(result, index, saved))


def radial_paths_across(result: Result, rows: slice, r_re: float) -> RadialPaths:
    """Those of the paths in `rows` that have points on both sides of r = `r_re`, or on it; reads r only."""
    index, _, r = _across(result, rows, r_re)
    return RadialPaths(index=index, **_joined(result, index, {"r_re": r}))


def _across(result: Result, rows: slice, r_re: float) -> tuple[NDArray[np.int64], NDArray[np.bool_], Floats]:
    """Particle numbers of those that have points on both sides, where in `rows` they stand, and their saved r."""
    index = np.arange(result.count, dtype=np.int64)[rows]
    r = _track(result, "r_re", rows)
    ends = np.column_stack([_of(result.particle, "r_re", index), _of(result.end, "r_re", index)])
    below = (r <= r_re).any(axis=1) | (ends <= r_re).any(axis=1)
    above = (r >= r_re).any(axis=1) | (ends >= r_re).any(axis=1)
    keep: NDArray[np.bool_] = np.logical_and(below, above)
    return index[keep], keep, r[keep]


def _joined(result: Result, index: NDArray[np.int64], saved: dict[str, Floats]) -> dict[str, Floats]:
    """The points of `saved` with the release before and the end after them, and the times of all; shape (n, n_time +
    2)."""
    times = np.asarray(result.time_h, dtype=float)
    kept = np.isfinite(saved["r_re"])
    saved = {"time_h": np.where(kept, times, np.nan), **saved}
    start = {name: _of(result.particle, "release_h" if name == "time_h" else name, index) for name in saved}
    end = {name: _of(result.end, name, index) for name in saved}

    direction = facts(result).direction
    before = np.searchsorted(direction * times, direction * np.nan_to_num(start["time_h"]))
    first = np.where(kept.any(axis=1), kept.argmax(axis=1) if times.size else 0, before)
    last = first + kept.sum(axis=1) + 1
    released = np.asarray(result.end["cause"])[index] != Cause.NEVER_RELEASED
    opens = released & ~_near(saved["time_h"], first, start["time_h"])
    closes = released & ~_near(saved["time_h"], last - 2, end["time_h"])
    line = np.arange(index.size)
    whole = {}
    for name, points in saved.items():
        table = np.full((index.size, times.size + 2), np.nan)
        table[:, 1:-1] = points
        table[line[opens], first[opens]] = start[name][opens]
        table[line[closes], last[closes]] = end[name][closes]
        whole[name] = table
    return whole


def _of(group: Mapping[str, np.ndarray], name: str, index: NDArray[np.int64]) -> Floats:
    return np.asarray(np.asarray(group[name])[index], dtype=float)


def _track(result: Result, name: str, rows: Rows) -> Floats:
    if result.time_h.size == 0:
        return np.empty((np.arange(result.count)[rows].size, 0))
    return np.asarray(result.track_rows(name, rows), dtype=float)


def _near(saved_h: Floats, column: NDArray[np.int64], time_h: Floats) -> NDArray[np.bool_]:
    """Whether the saved time in `column` of each row exists and equals `time_h`."""
    if saved_h.shape[1] == 0:
        return np.zeros(saved_h.shape[0], dtype=bool)
    inside = (column >= 0) & (column < saved_h.shape[1])
    found = saved_h[np.arange(saved_h.shape[0]), np.clip(column, 0, saved_h.shape[1] - 1)]
    return np.asarray(inside & (np.abs(found - time_h) <= SAME_TIME_H))


def evenly_over_energy(result: Result, members: NDArray[np.int64], limit: int) -> NDArray[np.int64]:
    """At most `limit` of the particles `members`, at even ranks of their initial energy; rising particle numbers."""
    if members.size <= limit:
        return np.sort(members)
    ranked = members[np.argsort(np.asarray(result.particle["energy_keV"])[members], kind="stable")]
    picks = np.linspace(0, members.size - 1, limit).round().astype(np.int64)
    return np.sort(ranked[picks])
