"""Where and why particles ended."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure, SubFigure
from matplotlib.ticker import MaxNLocator

from tracer.analysis.endings import counts_by_cause, end_rates
from tracer.analysis.facts import facts
from tracer.analysis.polylines import evenly_over_energy
from tracer.figures.clock import time_ticks
from tracer.figures.dial import VIEW, boundary, draw_dial, place
from tracer.figures.style import END_MARKS, INK, entry, frame, key, page, rim
from tracer.records import Result
from tracer.status import Cause

SHOWN = 600  # for each cause


def draw_ends(result: Result) -> list[Figure]:
    """A map of the end points by cause, and the ends over time."""
    run = facts(result)
    figure, body = page()
    where, when = body.subplots(1, 2, width_ratios=[1.0, 1.0])
    draw_dial(where, run)
    where.set_title("end points")
    _map(where, result)
    _history(when, result)
    _legend(body, result)
    detail = f"Left: equatorial crossing points, {VIEW}; up to {SHOWN} of each cause. "
    detail += "Right: all ends before the end of the run."
    frame(figure, run, "Where and why the particles ended", detail)
    return [figure]


def _map(axes: Axes, result: Result) -> None:
    cause = np.asarray(result.end["cause"])
    r, mlt = np.asarray(result.end["r_re"]), np.asarray(result.end["mlt_h"])
    for each in counts_by_cause(result):
        if each is Cause.NEVER_RELEASED:
            continue
        rows = evenly_over_energy(result, np.flatnonzero((cause == each) & np.isfinite(r)), SHOWN)
        x, y = place(r[rows], mlt[rows])
        mark = END_MARKS[each]
        back = each is Cause.DRIFTING
        axes.scatter(
            x, y, s=9 if back else 20, marker=mark.marker, color=mark.colour, edgecolors=rim(each) if back else "none",
            linewidths=0.3, zorder=3.2 if back else 4,
        )  # fmt: skip


def _history(axes: Axes, result: Result) -> None:
    run = facts(result)
    rates = end_rates(result)
    edges = rates.edges_h
    base = np.zeros(edges.size - 1)
    for cause, counts in rates.counts.items():
        mark = END_MARKS[cause]
        axes.bar(
            edges[:-1], counts, np.diff(edges), base, align="edge", color=mark.colour, hatch=mark.hatch,
            edgecolor="white", linewidth=0.4,
        )  # fmt: skip
        base += counts
    if not rates.counts:
        axes.set_ylim(0.0, 1.0)
        axes.text(0.5, 0.5, "no path ended before the run did", transform=axes.transAxes, ha="center", color=INK)
    axes.yaxis.set_major_locator(MaxNLocator(8, integer=True))
    axes.grid(True, axis="y")
    axes.set_ylabel(f"ends in {_width(rates.width_h)} (particles)")
    axes.set_xlabel("time of the end (UTC)")
    axes.set_box_aspect(1.0)
    time_ticks(axes, run, most=5)


def _width(hours: float) -> str:
    return f"{hours:g} h" if hours >= 1 else f"{60 * hours:.3g} min"


def _legend(body: SubFigure, result: Result) -> None:
    entries = []
    for cause, count in counts_by_cause(result).items():
        mark = END_MARKS[cause]
        words = f"{cause.sentence}: {count} ({100.0 * count / result.count:.1f} %)"
        entries.append(entry(words, marker=mark.marker, color=mark.colour, markersize=6.5, markeredgecolor=rim(cause)))
    key(body, [*entries, boundary(facts(result))], columns=2)
