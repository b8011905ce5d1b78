"""The equatorial map of drift paths, coloured by energy."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.cm import ScalarMappable
from matplotlib.collections import LineCollection
from matplotlib.colors import LogNorm
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from fields.units import Floats
from tracer.analysis.facts import facts
from tracer.analysis.polylines import Polylines, evenly_over_energy, polylines, shorter_way
from tracer.figures.dial import VIEW, boundary, draw_dial, place
from tracer.figures.style import (
    COLD,
    END_MARKS,
    ENERGY_MAP,
    INK,
    entry,
    frame,
    key,
    log_scale,
    page,
    plain_log_axis,
    rim,
    shortened,
)
from tracer.records import Result
from tracer.status import Cause

SHOWN = 150
PANELS = 2
SHADES = 64
ARC_H = 0.25  # a longer step is drawn as an arc of pieces this long


def draw_paths(result: Result) -> list[Figure]:
    """The map, a panel for each population; one figure for every two of them. None without tracks."""
    if result.time_h.size == 0:
        return []
    population = np.asarray(result.particle["population"])
    released = np.asarray(result.end["cause"]) != Cause.NEVER_RELEASED
    members = {
        name: np.flatnonzero((population == code) & released) for code, name in enumerate(result.population_names)
    }
    present = [(name, rows) for name, rows in members.items() if rows.size]
    return [_page(result, present[i : i + PANELS]) for i in range(0, len(present), PANELS)]


def _page(result: Result, present: list[tuple[str, NDArray[np.int64]]]) -> Figure:
    run = facts(result)
    figure, body = page()
    panels = body.subplots(1, len(present), squeeze=False).ravel()
    quota = max(1, SHOWN // len(present))
    drawn = [polylines(result, evenly_over_energy(result, rows, quota)) for _, rows in present]
    energies = np.concatenate([paths.energy_keV.ravel() for paths in drawn])
    scale, warm, cold = log_scale(energies), bool(np.any(energies > 0)), bool(np.any(energies == 0))
    causes: set[Cause] = set()
    for axes, (name, rows), paths in zip(panels, present, drawn):
        draw_dial(axes, run)
        _draw_lines(axes, paths, scale)
        causes |= _draw_ends(axes, result, paths.index)
        axes.set_title(f"{shortened(name, 30)} ({_species(result, rows)}): {paths.index.size} of {rows.size} shown")
    if warm:
        tall = 1.0 if len(present) == 1 else 0.75
        bar = body.colorbar(ScalarMappable(scale, ENERGY_MAP), ax=list(panels), fraction=0.04, pad=0.02, shrink=tall)
        bar.set_label("energy (keV)")
        plain_log_axis(bar.ax, "y")
    loose = sum(int(np.count_nonzero(~paths.followed())) for paths in drawn)
    lines = [boundary(run)] + ([Line2D([], [], color=COLD, label="zero energy")] if cold else [])
    if loose:
        lines.append(entry("saved too seldom to join", marker=".", color=INK, markersize=3))
    key(body, [*_end_entries(causes), *lines], side=len(present) == 1)
    detail = f"Equatorial crossing points of the drift paths, {VIEW}."
    if any(paths.index.size < rows.size for (_, rows), paths in zip(present, drawn)):
        detail += " Paths chosen evenly over initial energy."
    if loose:
        detail += f" {loose} go round too fast for the saved interval: dots."
    frame(figure, run, "Drift paths, coloured by energy" if warm else "Drift paths of cold plasma", detail)
    return figure


def _species(result: Result, rows: NDArray[np.int64]) -> str:
    codes = np.unique(np.asarray(result.particle["species"])[rows])
    return ", ".join(result.species_names[code] for code in codes)


def _draw_lines(axes: Axes, paths: Polylines, scale: LogNorm) -> None:
    """Paths whose points can be joined as lines, the others as dots."""
    joined = paths.followed()
    pieces: list[Floats] = []
    shades: list[int] = []
    fastest_first = np.argsort(-np.abs(paths.turns), kind="stable")  # they cover most, and so go below
    for i in fastest_first[joined[fastest_first]]:
        r, mlt, energy = _smooth(paths, i)
        if r.size < 2:
            continue
        shade = np.minimum((scale(energy[:-1]) * SHADES).filled(-1).astype(int), SHADES - 1)
        cuts = np.flatnonzero(np.diff(shade)) + 1
        points = np.column_stack(place(r, mlt))
        for begin, end in zip(np.append(0, cuts), np.append(cuts, shade.size)):
            pieces.append(points[begin : end + 1])
            shades.append(int(shade[begin]))
    colours = ENERGY_MAP(np.ma.masked_less(np.asarray(shades, dtype=float), 0.0) / (SHADES - 1))
    axes.add_collection(
        LineCollection(pieces, colors=colours, linewidths=0.8, alpha=0.9, capstyle="round", zorder=2), autolim=False
    )
    dots = np.isfinite(paths.r_re) & ~joined[:, None]
    x, y = place(paths.r_re[dots], paths.mlt_h[dots])
    axes.scatter(
        x, y, s=2.0, c=paths.energy_keV[dots], cmap=ENERGY_MAP, norm=scale, plotnonfinite=True, linewidths=0, zorder=2
    )


def _smooth(paths: Polylines, row: int) -> tuple[Floats, Floats, Floats]:
    """Points of one path with long steps round the Earth filled in, so that they are drawn as arcs."""
    there = np.isfinite(paths.r_re[row])
    r, mlt, energy = paths.r_re[row, there], paths.mlt_h[row, there], paths.energy_keV[row, there]
    if r.size < 2:
        return r, mlt, energy
    step = shorter_way(np.diff(mlt))
    total = mlt[0] + np.append(0.0, np.cumsum(step))
    parts = np.maximum(1, np.ceil(np.abs(step) / ARC_H)).astype(int)
    knots = np.append(0, np.cumsum(parts))
    fine = np.arange(knots[-1] + 1)
    return np.interp(fine, knots, r), np.interp(fine, knots, total), np.interp(fine, knots, energy)


def _draw_ends(axes: Axes, result: Result, index: NDArray[np.int64]) -> set[Cause]:
    """Start and end marks; the causes that occur."""
    x, y = place(np.asarray(result.particle["r_re"])[index], np.asarray(result.particle["mlt_h"])[index])
    axes.scatter(x, y, s=13, facecolors="white", edgecolors=INK, linewidths=0.7, zorder=4)
    cause = np.asarray(result.end["cause"])[index]
    x, y = place(np.asarray(result.end["r_re"])[index], np.asarray(result.end["mlt_h"])[index])
    found = {Cause(int(code)) for code in np.unique(cause)}
    for each in found:
        mark, here = END_MARKS[each], cause == each
        look: dict[str, Any] = {"marker": mark.marker, "color": mark.colour, "edgecolors": rim(each)}
        axes.scatter(x[here], y[here], s=22, linewidths=0.4, zorder=4.5, **look)
    return found


def _end_entries(causes: set[Cause]) -> list[Line2D]:
    entries = [entry("start", marker="o", markerfacecolor="white", markeredgecolor=INK, markersize=4.5)]
    for cause in sorted(causes):
        mark = END_MARKS[cause]
        look: dict[str, Any] = {"marker": mark.marker, "color": mark.colour, "markeredgecolor": rim(cause)}
        entries.append(entry(f"end: {cause.sentence}", markersize=6, **look))
    return entries
