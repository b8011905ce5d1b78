"""The equatorial plane as a map: the Earth in sunlight, circles of distance, the hours of local time."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from matplotlib.patches import Circle, Wedge

from fields.units import Floats, phi_from_mlt
from tracer.analysis.facts import Facts
from tracer.figures.style import INK, halo

HOURS = (0, 6, 12, 18)
LABEL_MLT_H = 7.0  # the numbers of the circles stand along this hour
LABEL: dict[str, Any] = {"fontsize": 8, "color": INK, "ha": "center", "va": "center"}
DASHES = (0, (6, 3))
VIEW = "seen from the north, Sun to the left"


def place(r_re: Floats, mlt_h: Floats) -> tuple[Floats, Floats]:
    """SM x and y of equatorial points."""
    phi = phi_from_mlt(mlt_h)
    return r_re * np.cos(phi), r_re * np.sin(phi)


def draw_dial(axes: Axes, run: Facts) -> None:
    """Draw the map into `axes`: SM coordinates with the Sun to the left, dusk below."""
    reach = run.outer_re * 1.19
    axes.set_aspect("equal")
    axes.set_xlim(reach, -reach)
    axes.set_ylim(reach, -reach)
    axes.set_xlabel("SM x, toward the Sun (R_E)")
    axes.set_ylabel("SM y, toward dusk (R_E)")
    step = _circle_step(run.outer_re)
    reached = np.floor(run.outer_re / (2 * step))
    ticks = np.arange(-reached, reached + 1) * 2 * step
    axes.set_xticks(ticks)
    axes.set_yticks(ticks)
    _circles(axes, run, step)
    _earth(axes)
    for hour in HOURS:
        x, y = place(np.asarray(run.outer_re * 1.095), np.asarray(float(hour)))
        axes.text(float(x), float(y), f"{hour:02d}", ha="center", va="center", fontsize=10, weight="bold", color=INK)
    axes.text(reach * 0.96, -reach * 0.93, "← Sun", ha="left", va="center", fontsize=9, color=INK)
    axes.text(-reach * 0.96, -reach * 0.93, "MLT (h)", ha="right", va="center", fontsize=9, color=INK)


def boundary(run: Facts) -> Line2D:
    """The outer boundary, for a legend."""
    return Line2D([], [], color=INK, linewidth=1.3, linestyle=DASHES, label=f"outer boundary, {run.outer_re:g} R_E")


def _circle_step(outer_re: float) -> float:
    return next(step for step in (1.0, 2.0, 5.0, 10.0, 20.0, 50.0, 1e9) if outer_re / step <= 6)


def _circles(axes: Axes, run: Facts, step: float) -> None:
    for radius in np.arange(step, run.outer_re - 1e-9, step):
        axes.add_patch(Circle((0, 0), radius, fill=False, edgecolor="0.8", linewidth=0.7, zorder=0.5))
        x, y = place(np.asarray(radius), np.asarray(LABEL_MLT_H))
        outermost = radius + step > run.outer_re - 1e-9
        if radius > 1.0:
            words = f"{radius:g} R_E" if outermost else f"{radius:g}"
            axes.text(float(x), float(y), words, zorder=6, path_effects=halo(), **LABEL)
    for hour in range(0, 24, 3):
        x, y = place(np.array([1.0, run.outer_re]), np.full(2, float(hour)))
        axes.plot(x, y, color="0.88", linewidth=0.6, zorder=0.4)
    axes.add_patch(Circle((0, 0), run.outer_re, fill=False, edgecolor=INK, linewidth=1.3, linestyle=DASHES, zorder=3))
    if run.inner_re > 1.1:
        axes.add_patch(
            Circle((0, 0), run.inner_re, fill=False, edgecolor=INK, linewidth=1.0, linestyle=(0, (1, 1.5)), zorder=3)
        )


def _earth(axes: Axes) -> None:
    """Day half white, night half black."""
    axes.add_patch(Wedge((0, 0), 1.0, -90, 90, facecolor="white", edgecolor="black", linewidth=0.9, zorder=5))
    axes.add_patch(Wedge((0, 0), 1.0, 90, 270, facecolor="black", edgecolor="black", linewidth=0.9, zorder=5))
