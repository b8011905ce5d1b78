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

    None without tracks, or when no place was asked for and no circle is crossed.
    """
    if result.time_h.size == 0:
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
    shown = arrived.where(np.arange(arrived.count)[:: max(1, -(-arrived.count // SHOWN))])
    if shown.count:
        _points(body, axes, result, shown)
    else:
        axes.set_ylim(0.1, 1000.0)
        axes.text(0.5, 0.5, "no particle arrived here", transform=axes.transAxes, ha="center", color=INK)
    axes.set_yscale("log")
    plain_log_axis(axes, "y")
    axes.set_ylabel("energy at arrival (keV)")
    axes.set_xlabel("time of arrival (UTC)")
    axes.grid(True)
    time_ticks(axes, run)
    place = f"{every.r_re:g} R_E, {_clock(sector[0])} to {_clock(sector[1])} MLT"
    detail = f"First arrival of each particle in the sector: {arrived.count} of {result.count} particles came"
    detail += f", {shown.count} shown." if shown.count < arrived.count else "."
    if chosen:
        detail += " The sector was chosen for its many arrivals."
    unknown = np.unique(every.particle[~every.mlt_known]).size
    if unknown:
        detail += f" Left out: {unknown} that go round too fast for the saved interval: their local time is not known."
    frame(figure, run, f"Arrivals at {place}: energy against time", detail)
    return figure


def _points(body: SubFigure, axes: Axes, result: Result, shown: Crossings) -> None:
    population = np.asarray(result.particle["population"])[shown.particle]
    positive = shown.energy_keV[shown.energy_keV > 0]
    floor = float(positive.min()) if positive.size else 1e-6
    scale = Normalize(0.0, 90.0)
    entries = []
    for code in np.unique(population):
        here = population == code
        marker = POPULATION_MARKERS[int(code) % len(POPULATION_MARKERS)]
        # Cold particles have no place on a logarithmic axis: they stand at its foot.
        energy = np.maximum(shown.energy_keV[here], floor)
        points = axes.scatter(
            shown.time_h[here], energy, c=shown.pitch_deg[here], cmap=PITCH_MAP, norm=scale,
            s=14, marker=marker, linewidths=0.2, edgecolors="white",
        )  # fmt: skip
        words = f"{shortened(result.population_names[int(code)], 40)} ({np.count_nonzero(here)})"
        entries.append(entry(words, marker=marker, color=INK, markersize=5))
    bar = body.colorbar(points, ax=axes, fraction=0.04, pad=0.02)
    bar.set_label("equatorial pitch angle at arrival (deg)")
    bar.set_ticks([0, 15, 30, 45, 60, 75, 90])
    key(body, entries)


def _clock(hour: float) -> str:
    return f"{int(hour) % 24:02d}" if float(hour).is_integer() else f"{hour:g}"
