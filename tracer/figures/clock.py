"""Time axes in run hours: dates in UTC below, hours since the start above, both at the same spacing."""

from __future__ import annotations

from datetime import timedelta

import numpy as np
from matplotlib.axes import Axes

from fields.units import Floats
from tracer.analysis.facts import Facts

STEPS_H = (1 / 60, 2 / 60, 5 / 60, 0.25, 0.5, 1.0, 2.0, 3.0, 6.0, 12.0, 24.0, 48.0, 120.0, 240.0, 480.0)
MOST_STEPS = 9


def time_ticks(axes: Axes, run: Facts, most: int = MOST_STEPS, above: Axes | None = None) -> None:
    """Let `axes` cover the run in UTC, and the top of `above` (`axes` when absent) in hours since the start."""
    step = next((s for s in STEPS_H if run.hours / s <= most), run.hours / most)
    low, high = run.span_h
    midnight = run.start.replace(hour=0, minute=0, second=0, microsecond=0)
    since_h = (run.start - midnight).total_seconds() / 3600.0
    utc_h = _multiples(low + since_h, high + since_h, step) - since_h
    axes.set_xlim(low, high)
    axes.set_xticks(utc_h, _labels(run, utc_h, step))
    top = (above or axes).secondary_xaxis("top")
    top.set_xticks(_multiples(low, high, step))
    top.set_xlabel("time since start (h)")


def _multiples(low: float, high: float, step: float) -> Floats:
    """Multiples of `step` from `low` to `high`."""
    slack = 1e-6
    return np.arange(np.ceil(low / step - slack), np.floor(high / step + slack) + 1) * step


def _labels(run: Facts, time_h: Floats, step_h: float) -> list[str]:
    """The time of day, and the date below it where the day changes."""
    half_second = timedelta(seconds=0.5)
    moments = [run.utc(hour) + half_second for hour in time_h]  # cut below, so rounded
    if step_h >= 24.0:
        return [f"{moment:%Y-%m-%d}" for moment in moments]
    clock = "%H:%M" if step_h >= STEPS_H[0] else "%H:%M:%S"
    known = [None, *(moment.date() for moment in moments)]
    return [f"{m:{clock}}" + (f"\n{m:%Y-%m-%d}" if m.date() != day else "") for m, day in zip(moments, known)]
