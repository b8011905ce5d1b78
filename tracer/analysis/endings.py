"""How particles ended: counts by cause, in all and over time."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fields.units import Floats
from tracer.analysis.facts import facts
from tracer.records import Result
from tracer.status import Cause

BIN_WIDTHS_H = (1 / 60, 2 / 60, 5 / 60, 0.25, 0.5, 1.0, 2.0, 3.0, 6.0, 12.0, 24.0, 48.0, 120.0, 240.0)
MOST_BINS = 60


@dataclass(frozen=True)
class EndRates:
    """Ends over time.

    Attributes
    ----------
    edges_h : ndarray, shape (n_bin + 1,)
        Run time.
    width_h : float
        Width of a bin, h.
    counts : dict of Cause to ndarray of int, shape (n_bin,)
        The causes that end a path before the end of the run, where any particle has them.
    """

    edges_h: Floats
    width_h: float
    counts: dict[Cause, NDArray[np.int64]]


def counts_by_cause(result: Result) -> dict[Cause, int]:
    """Number of particles for each cause that occurs, in the order of the codes."""
    counts = np.bincount(np.asarray(result.end["cause"], dtype=np.int64), minlength=len(Cause))
    return {cause: int(counts[cause]) for cause in Cause if counts[cause]}


def end_rates(result: Result) -> EndRates:
    """Ends by cause in bins of time that cover the run."""
    run = facts(result)
    low, high = run.span_h
    width = next((w for w in BIN_WIDTHS_H if run.hours / w <= MOST_BINS), run.hours / MOST_BINS)
    n = max(1, int(np.ceil(run.hours / width - 1e-9)))
    edges = low + width * np.arange(n + 1) if not run.backward else high - width * np.arange(n, -1, -1)
    cause = np.asarray(result.end["cause"])
    time = np.clip(np.asarray(result.end["time_h"], dtype=float), edges[0], edges[-1])
    stopping = [c for c in Cause if c not in (Cause.DRIFTING, Cause.NEVER_RELEASED) and np.any(cause == c)]
    return EndRates(
        np.asarray(edges), width, {c: np.histogram(time[cause == c], edges)[0].astype(np.int64) for c in stopping}
    )
