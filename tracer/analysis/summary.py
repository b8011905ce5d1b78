"""What a run found, in sentences."""

from __future__ import annotations

import numpy as np

from tracer.analysis.arrivals import first_times
from tracer.analysis.endings import counts_by_cause
from tracer.analysis.facts import Facts, facts
from tracer.records import Result
from tracer.status import Cause

STATES = (Cause.DRIFTING, Cause.FAILED, Cause.NEVER_RELEASED)  # their sentences have no verb of their own


def sentences(result: Result, r_re: float = 4.0) -> list[str]:
    """The findings of a run: who reached `r_re` and when, who left through which boundary and when, who still drifts.

    Parameters
    ----------
    result : Result
    r_re : float
        The circle to report on, R_E. Nothing is said of it when the result holds no tracks.

    Returns
    -------
    list of str
    """
    run = facts(result)
    lines = _reaching(result, run, r_re) if result.time_h.size else []
    for cause, count in counts_by_cause(result).items():
        lines.append(_ending(result, run, cause, count))
    return lines


def _reaching(result: Result, run: Facts, r_re: float) -> list[str]:
    """One sentence for each population on who came to r = `r_re`."""
    particle, time_h = first_times(result, r_re, "inward")
    members = np.asarray(result.particle["population"])
    cause = np.asarray(result.end["cause"])
    lines = []
    for code, name in enumerate(result.population_names):
        released = int(np.count_nonzero((members == code) & (cause != Cause.NEVER_RELEASED)))
        times = time_h[members[particle] == code] * run.direction
        if released == 0:
            continue
        if times.size == 0:
            lines.append(f"{name}: none of {released} reached {r_re:g} R_E.")
            continue
        when = f"the first {_moment(run, times.min())}"
        if times.size > 1:
            when += f", half of them by {np.median(times):.2f} h"
        share = _share(times.size, released)
        lines.append(f"{name}: {times.size} of {released} ({share}) reached {r_re:g} R_E, {when}.")
    return lines


def _ending(result: Result, run: Facts, cause: Cause, count: int) -> str:
    """How many ended by `cause`, and when."""
    line = f"{count} of {result.count} ({_share(count, result.count)}) {_words(cause, run)}"
    if cause in (Cause.DRIFTING, Cause.NEVER_RELEASED):
        return line + "."
    times = np.asarray(result.end["time_h"], dtype=float)[np.asarray(result.end["cause"]) == cause] * run.direction
    when = f", the first {_moment(run, times.min())}"
    return line + when + (f", half of them by {np.median(times):.2f} h." if count > 1 else ".")


def _words(cause: Cause, run: Facts) -> str:
    if cause is Cause.OUTER:
        return f"{cause.sentence} ({run.outer_re:g} R_E)"
    if cause is Cause.INNER:
        return f"{cause.sentence} ({run.inner_re:g} R_E)"
    return f"were {cause.sentence}" if cause in STATES else cause.sentence


def _moment(run: Facts, elapsed_h: float) -> str:
    """A run time in words: hours and date."""
    date = run.utc(run.direction * elapsed_h)
    sense = "back in time " if run.backward else ""
    return f"{sense}at {elapsed_h:.2f} h ({date:%Y-%m-%d %H:%M} UTC)"


def _share(count: int, total: int) -> str:
    return f"{100.0 * count / total:.1f} %"
