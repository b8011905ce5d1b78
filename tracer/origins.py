"""Consecutive targets traced back to where they came from. No files."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from fields.units import Floats
from tracer.access_plan import Sector
from tracer.access_records import TARGET
from tracer.accuracy import (
    AUDIT_SEED,
    COARSE,
    PILOT_SEED,
    PILOTS,
    Errors,
    Pilot,
    audit_of,
    pilot_of,
    sample_of,
)
from tracer.integrate import Tick, advance, warmed
from tracer.kernels.build import Kernel, kernel_for
from tracer.outcomes import CAME_IN, Outcome
from tracer.status import Cause
from tracer.targets import Targets, traced

END_TIME, END_MLT, END_ENERGY, END_CAUSE, ACCEPTED, REJECTED = 0, 2, 3, 5, 8, 9  # columns of the kernel's `end`
BY_CAUSE = {
    Cause.INNER: Outcome.INNER,
    Cause.ATMOSPHERE: Outcome.ATMOSPHERE,
    Cause.MAGNETOPAUSE: Outcome.MAGNETOPAUSE,
    Cause.OUTSIDE_MODEL: Outcome.OUTSIDE_MODEL,
}


@dataclass(frozen=True, eq=False)
class Origins:
    """Where some consecutive targets came from.

    Attributes
    ----------
    first : int
        Index of the first of them.
    columns : dict of ndarray, shape (n,)
        By the names of `tracer.access_records.TARGET`.
    work : dict of float
        Counters: targets traced, accepted and rejected steps.
    """

    first: int
    columns: dict[str, np.ndarray]
    work: dict[str, float]


def origins(
    targets: Targets,
    kernel: Kernel,
    first: int,
    stop: int,
    tolerance: float,
    tick: Tick | None = None,
    stopped: Callable[[], bool] | None = None,
) -> Origins:
    """Trace targets `first` to `stop` - 1 back: a pure function of the targets, the tolerance and the indices.

    Raises
    ------
    Interrupted
        When `stopped` says so.
    """
    begun = targets.at(np.arange(first, stop))
    asked = traced(begun)
    if tick is not None:
        tick(int(np.count_nonzero(~asked)))
    end, _ = advance(targets.scenario, kernel, begun.state[asked], tolerance, np.empty(0), tick, stopped)
    columns = {column.name: np.full(stop - first, np.nan) for column in TARGET}
    region = begun.answered.copy()
    region[asked] = outcomes(end, begun.state[asked, 7], targets.record_h, targets.request.source)
    columns["region"] = region
    came = np.isin(region[asked], CAME_IN)
    rows = np.flatnonzero(asked)[came]
    for name, column in (("entry_time_h", END_TIME), ("entry_mlt_h", END_MLT), ("entry_energy_keV", END_ENERGY)):
        columns[name][rows] = end[came, column]
    work = {
        "traced": float(end.shape[0]),
        "accepted": float(end[:, ACCEPTED].sum()),
        "rejected": float(end[:, REJECTED].sum()),
    }
    return Origins(first, columns, work)


def outcomes(end: Floats, until_h: Floats, record_h: float, source: Sector) -> np.ndarray:
    """What the ends of backward paths say.

    Parameters
    ----------
    end : ndarray, shape (n, 10)
        From the kernel.
    until_h : ndarray, shape (n,)
        Run times down to which they were traced at most.
    record_h : float
        Run time at which the record begins.
    source : Sector

    Returns
    -------
    ndarray of uint8, shape (n,)
        `Outcome`.
    """
    cause = end[:, END_CAUSE]
    found = np.full(cause.size, int(Outcome.FAILED), np.uint8)
    drifting = cause == Cause.DRIFTING
    found[drifting & (until_h <= record_h)] = Outcome.BEFORE_RECORD
    found[drifting & (until_h > record_h)] = Outcome.UNDECIDED
    outer = cause == Cause.OUTER
    within = source.holds(end[:, END_MLT])
    found[outer & within] = Outcome.OPEN
    found[outer & ~within] = Outcome.OPEN_ELSEWHERE
    for known, outcome in BY_CAUSE.items():
        found[cause == known] = outcome
    return found


def pilot(targets: Targets, kernel: Kernel) -> Pilot:
    """The local tolerance to trace all targets with, see `tracer.accuracy.pilot_of`."""
    states = sample_states(targets, PILOT_SEED)
    if not states.size:
        return Pilot(COARSE * targets.scenario.output.tolerance_re, 0.0)
    return pilot_of(targets.scenario, kernel, states)


def audit(targets: Targets, kernel: Kernel, local_tolerance: float) -> Errors:
    """The error that was met, see `tracer.accuracy.audit_of`; NaN where no target of the sample was traced."""
    states = sample_states(targets, AUDIT_SEED)
    if not states.size:
        return Errors(np.nan, np.nan, np.nan, 0)
    return audit_of(targets.scenario, kernel, states, local_tolerance)


def sample_states(targets: Targets, seed: int, size: int = PILOTS) -> Floats:
    """States of a sample, less those that need no tracing."""
    begun = targets.at(sample_of(targets.count, size, seed))
    return begun.state[traced(begun)]


def compile_kernel(targets: Targets) -> Kernel:
    """The kernel of the targets, ready to run."""
    return warmed(kernel_for(targets.scenario.field, targets.equatorial), targets.scenario.direction)
