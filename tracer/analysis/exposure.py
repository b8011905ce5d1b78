"""The exposure of a spacecraft: for each energy and pitch angle, how much of the time something reaches it.

A sample is one time of the orbit; the energies are centres of channels. It is in reach when its place lies in the
domain and the pitch angle comes to its latitude. "Out of reach", "no access" and "access" are three answers: shares are
of the samples in reach, and NaN where none is. A pass is an unbroken stretch of samples with access, and each sample
stands for one interval of the orbit's ``every_min``; where the source of the orbit has a gap the stretch ends.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from fields.units import Floats
from tracer.access_records import EXPOSURE
from tracer.analysis.boundary_history import runs
from tracer.outcomes import NO_ANSWER, UNKNOWN, Outcome

GAP = 1.5  # intervals between neighbours that belong together, at most


def exposure(region: NDArray[np.uint8], time_h: Floats, every_min: float) -> dict[str, np.ndarray]:
    """The columns of `tracer.access_records.EXPOSURE`.

    Parameters
    ----------
    region : ndarray of uint8, shape (time, ...)
        `Outcome`.
    time_h : ndarray, shape (time,)
        Run times, rising.
    every_min : float
        Time for which a sample stands.

    Returns
    -------
    dict of ndarray, shape (...)
        ``longest_closed_h`` is the longest stretch of time without access, from one pass to the next or to an end of
        the orbit's cover, times out of reach included.
    """
    found = {column.name: np.empty(region.shape[1:], column.dtype) for column in EXPOSURE}
    step_h = every_min / 60.0
    pieces = np.split(np.arange(time_h.size), np.flatnonzero(np.diff(time_h) > GAP * step_h) + 1)
    for at in np.ndindex(*region.shape[1:]):
        for name, value in _one(region[(slice(None), *at)], time_h, step_h, pieces).items():
            found[name][at] = value
    return found


def _one(region: NDArray[np.uint8], time_h: Floats, step_h: float, pieces: list[np.ndarray]) -> dict[str, float]:
    is_open = region == Outcome.OPEN
    reached = ~np.isin(region, NO_ANSWER)
    asked = int(np.count_nonzero(reached))
    passes = [(int(piece[a]), (b - a) * step_h) for piece in pieces for a, b in runs(is_open[piece])]
    closed = [(b - a) * step_h for piece in pieces for a, b in runs(~is_open[piece])]
    worst = max(passes, key=lambda one: one[1], default=None)
    when = time_h[is_open]
    return {
        "share_open": np.count_nonzero(is_open) / asked if asked else np.nan,
        "share_unknown": np.count_nonzero(np.isin(region, UNKNOWN)) / asked if asked else np.nan,
        "share_in_reach": asked / region.size if region.size else np.nan,
        "passes": len(passes),
        "first_open_h": when[0] if when.size else np.nan,
        "last_open_h": when[-1] if when.size else np.nan,
        "longest_closed_h": max(closed, default=0.0) if asked else np.nan,
        "worst_pass_h": worst[1] if worst else np.nan,
        "worst_pass_begin_h": time_h[worst[0]] if worst else np.nan,
    }
