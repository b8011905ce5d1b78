"""What can reach where: the equatorial plane at chosen times and energies, one answer a cell."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from tracer.access_records import AccessResult
from tracer.analysis.facts import Facts, facts
from tracer.figures.access_marks import MAP, NORM, edges, evenly, legend
from tracer.figures.dial import HOURS, VIEW, place
from tracer.figures.style import INK, frame, key, page
from tracer.outcomes import Outcome

MOST_TIMES, MOST_ENERGIES = 3, 4
LEAST_CELLS = 3  # of distance, and of local time, for a map


def draw_access_maps(result: AccessResult) -> list[Figure]:
    """One figure for each species and pitch angle; none without a map."""
    if min(result.r_re.size, result.mlt_h.size) < LEAST_CELLS:
        return []
    return [
        _figure(result, species, pitch)
        for species in range(len(result.species_names))
        for pitch in range(result.pitch_deg.size)
    ]


def _figure(result: AccessResult, species: int, pitch: int) -> Figure:
    run = facts(result)
    times, energies = evenly(result.time_h.size, MOST_TIMES), evenly(result.energy_keV.size, MOST_ENERGIES)
    figure, body = page()
    panels = body.subplots(len(times), len(energies), squeeze=False)
    found: set[int] = set()
    for row, time in zip(panels, times):
        for axes, energy in zip(row, energies):
            region = result.part("region", (species, time, energy, pitch))
            found |= {int(code) for code in np.unique(region)}
            _map(axes, run, result, region)
            axes.set_title(_panel(run, result, time, energy), fontsize=8.5)
    key(body, legend(found), columns=2)
    name, angle = result.species_names[species], result.pitch_deg[pitch]
    sector = f"{result.source.from_h:g} to {result.source.to_h:g} h MLT at {result.source.r_re:g} R_E"
    detail = f"Each cell traced backward from the time above it; source: {sector}. {VIEW[0].upper()}{VIEW[1:]}. "
    detail += "Dashed: innermost places open to the source."
    frame(figure, run, f"Where {name} of {angle:g}° equatorial pitch angle come from", detail)
    return figure


def _panel(run: Facts, result: AccessResult, time: int, energy: int) -> str:
    kinetic = result.energy_keV[energy]
    words = "cold (0 keV)" if kinetic == 0.0 else f"{kinetic:.3g} keV"
    return f"{words}, {run.utc(result.time_h[time]):%d %b %H:%M} UTC"


def _map(axes: Axes, run: Facts, result: AccessResult, region: np.ndarray) -> None:
    order = np.argsort(result.mlt_h)
    mlt, rows = result.mlt_h[order], np.argsort(result.r_re)
    around = edges(mlt)
    around[-1] = min(around[-1], around[0] + 24.0)
    r, hour = np.meshgrid(edges(result.r_re[rows]), around, indexing="ij")
    x, y = place(r, hour)
    cells = region[np.ix_(rows, order)]
    axes.pcolormesh(x, y, cells, cmap=MAP, norm=NORM, shading="flat", rasterized=True)
    _boundary(axes, result, cells == Outcome.OPEN, rows, mlt)
    _plane(axes, run)


def _boundary(axes: Axes, result: AccessResult, is_open: np.ndarray, rows: np.ndarray, mlt: Any) -> None:
    """The inner rim of what is open, cell by cell."""
    inner = edges(result.r_re[rows])[:-1]
    first = np.where(is_open.any(axis=0), inner[np.argmax(is_open, axis=0)], np.nan)
    around = edges(mlt)
    hour = np.column_stack([around[:-1], around[1:]]).ravel()
    x, y = place(np.repeat(first, 2), hour)
    axes.plot(x, y, color="white", linewidth=1.6)
    axes.plot(x, y, color=INK, linewidth=0.9, linestyle=(0, (4, 2)))


def _plane(axes: Axes, run: Facts) -> None:
    """Earth, outer boundary and hours; without axes, for there are many panels."""
    angle = np.linspace(0.0, 2.0 * np.pi, 181)
    axes.plot(run.outer_re * np.cos(angle), run.outer_re * np.sin(angle), color=INK, linewidth=0.8)
    axes.fill(np.cos(angle), np.sin(angle), facecolor="white", edgecolor="black", linewidth=0.6, zorder=3)
    night = np.linspace(0.5 * np.pi, 1.5 * np.pi, 91)
    axes.fill(np.cos(night), np.sin(night), facecolor="black", zorder=3.1)
    for hour in HOURS:
        x, y = place(np.asarray(run.outer_re * 1.13), np.asarray(float(hour)))
        axes.text(float(x), float(y), f"{hour:02d}", ha="center", va="center", fontsize=7, color=INK)
    reach = 1.22 * run.outer_re
    axes.set_aspect("equal")
    axes.set_xlim(reach, -reach)
    axes.set_ylim(reach, -reach)
    axes.set_axis_off()
