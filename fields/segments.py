"""Piecewise-linear segments from rows: steps, or joined points."""

from __future__ import annotations

import numpy as np

from fields.units import Floats

Segments = tuple[Floats, Floats, Floats, float]  # starts in h, values there, slopes per h; end of the last in h


def step_segments(begins: Floats, values: Floats, end: float) -> Segments:
    """Each value from its row to the next, the last one to `end`; a last row at `end` only closes the cover."""
    if end <= begins[-1]:
        begins, values = begins[:-1], values[:-1]
    return begins, values, np.zeros(values.size), end


def linear_segments(begins: Floats, points: Floats, values: Floats, end: float) -> Segments:
    """Lines from point to point; constant from the first row's beginning to its point, and after the last point."""
    corners = np.concatenate([begins[:1], points, [end]])
    levels = np.concatenate([values[:1], values, values[-1:]])
    kept = np.diff(corners) > 0
    width = np.where(kept, np.diff(corners), 1.0)
    slopes = _bounded(levels[:-1], np.diff(levels) / width, width, levels[1:])
    return corners[:-1][kept], levels[:-1][kept], slopes[kept], end


def _bounded(values: Floats, slopes: Floats, width: Floats, targets: Floats) -> Floats:
    """Slopes turned down by a rounding error where the end of a segment would pass its target: a Kp of 9 stays 9."""
    beyond = (values + slopes * width - targets) * np.sign(slopes) > 0
    while beyond.any():
        slopes = np.where(beyond, np.nextafter(slopes, 0.0), slopes)
        beyond = (values + slopes * width - targets) * np.sign(slopes) > 0
    return slopes


def trimmed(starts: Floats, values: Floats, slopes: Floats, end: float, from_h: float, to_h: float) -> Segments:
    """The segments that meet ``[from_h, to_h]``: those that reach into it, or the one that holds it."""
    first = max(int(np.searchsorted(starts, from_h, side="right")) - 1, 0)
    stop = max(int(np.searchsorted(starts, to_h, side="left")), first + 1)
    stop_h = float(starts[stop]) if stop < starts.size else end
    return starts[first:stop].copy(), values[first:stop].copy(), slopes[first:stop].copy(), stop_h
