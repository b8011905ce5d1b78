"""What reaches a spacecraft: energy against time along its orbit, one answer a cell."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from fields.units import Floats
from tracer.access_records import AccessResult, OrbitAccess
from tracer.analysis.facts import facts
from tracer.figures.access_marks import MAP, NORM, edges, evenly, legend
from tracer.figures.clock import time_ticks
from tracer.figures.style import FAINT, INK, frame, key, page, plain_log_axis

MOST_PITCHES = 4
LEAST_SPAN_RE = 1.0


def draw_access_orbits(result: AccessResult) -> list[Figure]:
    """One figure for each spacecraft and species; none without orbits, or where all energies are 0."""
    if not np.any(result.energy_keV > 0.0):
        return []
    return [_figure(result, orbit, species) for orbit in result.orbits for species in range(len(result.species_names))]


def _figure(result: AccessResult, orbit: OrbitAccess, species: int) -> Figure:
    run = facts(result)
    pitches = evenly(result.pitch_deg.size, MOST_PITCHES)
    figure, body = page()
    panels = body.subplots(
        len(pitches) + 1, 1, sharex=True, height_ratios=[*([1.0] * len(pitches)), 0.55], squeeze=False
    )
    region = np.asarray(orbit.access["region"][species])
    kept = np.flatnonzero(result.energy_keV > 0.0)
    rows = kept[np.argsort(result.energy_keV[kept])]
    for axes, pitch in zip(panels[:, 0], pitches):
        _spectrogram(axes, orbit.time_h, result.energy_keV[rows], region[:, rows, pitch].T)
        axes.set_ylabel(f"{result.pitch_deg[pitch]:g}° pitch\nenergy (keV)")
    _distance(panels[-1, 0], orbit)
    time_ticks(panels[-1, 0], run, above=panels[0, 0])
    panels[-1, 0].set_xlabel("time (UTC)")
    key(body, legend(np.unique(region[:, rows][:, :, pitches])), columns=2)
    sector = f"{result.source.from_h:g} to {result.source.to_h:g} h MLT at {result.source.r_re:g} R_E"
    detail = f"Energy and equatorial pitch angle at the spacecraft; source: {sector}. "
    detail += "Out of reach: such particles mirror before they come to the spacecraft's latitude."
    frame(figure, run, f"What {result.species_names[species]} reach {orbit.name}, and when", detail)
    return figure


def _spectrogram(axes: Axes, time_h: Floats, energy_keV: Floats, region: np.ndarray) -> None:
    axes.pcolormesh(
        edges(time_h), edges(energy_keV, log=True), region, cmap=MAP, norm=NORM, shading="flat", rasterized=True
    )
    axes.set_yscale("log")
    plain_log_axis(axes, "y")


def _distance(axes: Axes, orbit: OrbitAccess) -> None:
    """Where the spacecraft's field line crosses the equator: distance, and local time as hours of the clock."""
    finite = np.isfinite(orbit.r_re)
    axes.plot(orbit.time_h[finite], orbit.r_re[finite], color=INK, linewidth=1.2)
    low, high = axes.get_ylim()
    spare = max(0.5 * (LEAST_SPAN_RE - (high - low)), 0.0)  # a circle is to look like one
    axes.set_ylim(low - spare, high + spare)
    axes.set_ylabel("r at the\nequator (R_E)")
    axes.grid(True)
    hours = axes.twinx()
    breaks = np.abs(np.diff(orbit.mlt_h, prepend=orbit.mlt_h[:1])) > 12.0
    hours.plot(orbit.time_h, np.where(breaks, np.nan, orbit.mlt_h), color=FAINT, linewidth=1.0, linestyle=(0, (4, 2)))
    hours.set_ylim(0.0, 24.0)
    hours.set_yticks([0, 6, 12, 18, 24])
    hours.set_ylabel("MLT (h), dashed", color=FAINT)
