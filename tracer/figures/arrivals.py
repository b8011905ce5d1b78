"""Energy against arrival time at a circle and a sector of local time: dispersion."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import Normalize
from matplotlib.figure import Figure, SubFigure

from tracer.analysis.arrivals import Crossings, crossings
from tracer.analysis.facts import facts
from tracer.analysis.vantage import busiest_sector, watched_radius
from tracer.figures.clock import time_ticks
from tracer.figures.style import INK, PITCH_MAP, POPULATION_MARKERS, entry, frame, key, page, plain_log_axis, shortened
from tracer.records import Result

SHOWN = 6000


def draw_arrivals(
    result: Result, r_re: float | None = None, sector_h: tuple[float, float] | None = None
) -> list[Figure]:
    """First arrivals at r = `r_re` within the sector; a place is chosen where none is given.

    None without tracks; or, when no place was asked for, if no circle is crossed or all is cold plasma.
    """
    chosen = r_re is None and sector_h is None
    if result.time_h.size == 0 or (chosen and not np.any(np.asarray(result.particle["energy_keV"]) > 0)):
        return []
    radius = r_re if r_re is not None else watched_radius(result)
    if radius is None:
        return []
    every = crossings(result, radius, "any")
    sector = sector_h if sector_h is not None else busiest_sector(result, every)
    arrived = every.within(sector).first()
    return [_figure(result, arrived, every, sector, chosen=sector_h is None)]


def _figure(result: Result, arrived: Crossings, every: Crossings, sector: tuple[float, float], chosen: bool) -> Figure:
    run = facts(result)
    figure, body = page()
    axes = body.subplots()
    warm = arrived.where(arrived.energy_keV > 0)
    shown = warm.where(np.linspace(0, warm.count - 1, min(warm.count, SHOWN)).round().astype(np.int64))
    if shown.count:
        _points(body, axes, result, warm, shown)
    else:
        axes.set_ylim(0.1, 1000.0)
        axes.text(0.5, 0.5, "no particle arrived here", transform=axes.transAxes, ha="center", color=INK)
    axes.set_yscale("log")
    plain_log_axis(axes, "y")
    axes.set_ylabel("energy at arrival (keV)")
    axes.set_xlabel("time of arrival (UTC)")
    axes.grid(True)
    time_ticks(axes, run)
    place = f"{every.r_re:g} R_E, {_sector(sector)}"
    detail = f"First arrival of each particle there: {arrived.count} of {result.count} particles came"
    detail += f", {shown.count} shown." if shown.count < arrived.count else "."
    if chosen:
        detail += " The sector was chosen for its many arrivals."
    if warm.count < arrived.count:
        detail += f" {arrived.count - warm.count} have no energy and so no place here."
    unknown = np.unique(every.particle[~every.mlt_known]).size
    if unknown:
        detail += f" Left out: {unknown} that go round too fast for the saved interval: their local time is not known."
    frame(figure, run, f"Arrivals at {place}: energy against time", detail)
    return figure


def _points(body: SubFigure, axes: Axes, result: Result, warm: Crossings, shown: Crossings) -> None:
    population = np.asarray(result.particle["population"])
    size = 14.0 if shown.count < 1500 else 8.0
    scale = Normalize(0.0, 90.0)
    entries = []
    for code in np.unique(population[shown.particle]):
        here = population[shown.particle] == code
        marker = POPULATION_MARKERS[int(code) % len(POPULATION_MARKERS)]
        points = axes.scatter(
            shown.time_h[here], shown.energy_keV[here], c=shown.pitch_deg[here], cmap=PITCH_MAP, norm=scale,
            s=size, marker=marker, linewidths=0.2, edgecolors="white",
        )  # fmt: skip
        count = np.count_nonzero(population[warm.particle] == code)
        words = f"{shortened(result.population_names[int(code)], 40)} ({count})"
        entries.append(entry(words, marker=marker, color=INK, markersize=5))
    bar = body.colorbar(points, ax=axes, fraction=0.04, pad=0.02)
    bar.set_label("equatorial pitch angle at arrival (deg)")
    bar.set_ticks([0, 15, 30, 45, 60, 75, 90])
    key(body, entries)


def _sector(hours: tuple[float, float]) -> str:
    if hours[0] != hours[1] and hours[0] % 24.0 == hours[1] % 24.0:
        return "all local times"
    return f"{_clock(hours[0])} to {_clock(hours[1])} MLT"


def _clock(hour: float) -> str:
    return f"{int(hour) % 24:02d}" if float(hour).is_integer() else f"{hour:g}"
