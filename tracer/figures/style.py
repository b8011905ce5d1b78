"""How every figure looks: its size, fonts, colours, marks, headline and footer."""

from __future__ import annotations

import textwrap
from dataclasses import dataclass
from typing import Any

import numpy as np
from matplotlib import colormaps
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import Colormap, ListedColormap, LogNorm
from matplotlib.figure import Figure, SubFigure
from matplotlib.layout_engine import ConstrainedLayoutEngine
from matplotlib.lines import Line2D
from matplotlib.patheffects import withStroke
from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter

from fields.units import Floats
from tracer.analysis.facts import Facts
from tracer.status import Cause

SIZE_IN = (10.0, 7.5)
DPI = 130
BANDS = (0.105, 0.825, 0.07)  # heights of headline, panels and footer
GRID_DIGITS = 5  # of the figure's width and height
KEY_WIDTH = 26  # letters
TITLE_LENGTH = 78
FOOTER_TITLE_LENGTH = 60

CAUTION = (
    "Screening estimate: it defers to agency standards and to qualified engineers. "
    "Not for hardware or crew decisions alone."
)

SETTINGS: Any = {
    "font.family": "DejaVu Sans",  # travels with matplotlib: the same glyphs everywhere
    "font.size": 9.5,
    "axes.titlesize": 10.0,
    "axes.labelsize": 9.5,
    "xtick.labelsize": 8.5,
    "ytick.labelsize": 8.5,
    "legend.fontsize": 8.5,
    "legend.frameon": False,
    "axes.axisbelow": True,
    "axes.grid": False,
    "grid.color": "0.85",
    "grid.linewidth": 0.6,
    "hatch.linewidth": 0.6,
    "text.parse_math": False,  # a dollar in a title is a dollar
    "svg.hashsalt": "driftrose",
    "pdf.fonttype": 42,
    "axes.unicode_minus": True,
    "figure.dpi": DPI,
    "savefig.dpi": DPI,
}

INK = "0.15"
FAINT = "0.45"
COLD = "0.5"


@dataclass(frozen=True)
class Mark:
    """How one kind of thing is drawn: told apart by shape, by lightness and by hatch."""

    marker: str
    colour: str
    hatch: str = ""


# Lightness (CIE L*) climbs in steps of about ten or more through the list, so that the marks differ in grey as well.
END_MARKS: dict[Cause, Mark] = {
    Cause.ATMOSPHERE: Mark("v", "#000000"),
    Cause.FAILED: Mark("X", "#5B0F22", "xxxx"),
    Cause.MAGNETOPAUSE: Mark("D", "#8A2A6B", "\\\\\\\\"),
    Cause.OUTER: Mark("^", "#0072B2"),
    Cause.OUTSIDE_MODEL: Mark("P", "#00A57C", "++"),
    Cause.INNER: Mark("s", "#F0A030", "////"),
    Cause.DRIFTING: Mark("o", "#CFCFCF"),
    Cause.NEVER_RELEASED: Mark("*", "#EDEDED"),
}


def rim(cause: Cause) -> str:
    """Colour of a mark's edge: the pale ones need a dark rim to be seen on white."""
    return "0.45" if cause in (Cause.DRIFTING, Cause.NEVER_RELEASED) else "white"


POPULATION_MARKERS = ("o", "^", "s", "D", "v", "P", "X", "*")


def _clipped(name: str, low: float, high: float) -> Colormap:
    """The part of a map that shows on white; what has no place on a logarithmic scale is grey."""
    colours = ListedColormap(colormaps[name](np.linspace(low, high, 256)), name=f"{name} {low:g}-{high:g}")
    return colours.with_extremes(bad=COLD)


# Perceptually uniform, their lightness rising all the way: safe for colour-blind eyes, and readable in grey.
ENERGY_MAP = _clipped("viridis", 0.0, 0.93)
PITCH_MAP = _clipped("plasma", 0.0, 0.90)


def halo(width: float = 2.5) -> list[Any]:
    """A white rim that keeps words readable over lines."""
    return [withStroke(linewidth=width, foreground="white")]


def page() -> tuple[Figure, SubFigure]:
    """An empty figure of the one size, and the part of it between headline and footer where the panels go."""
    layout = ConstrainedLayoutEngine(w_pad=0.12, h_pad=0.06, wspace=0.04, hspace=0.04)
    figure = Figure(figsize=SIZE_IN, dpi=DPI, layout=layout)
    FigureCanvasAgg(figure)
    figure.subfigures(3, 1, height_ratios=BANDS)
    return figure, figure.subfigs[1]


def settle(figure: Figure) -> None:
    """Lay the figure out once and for all, on a grid: the solver's last bits differ from one time to the next."""
    engine = figure.get_layout_engine()
    if engine is not None:
        engine.execute(figure)
    figure.set_layout_engine("none")
    for part in figure.subfigs:
        part.bbox_relative.p0, part.bbox_relative.p1 = (
            np.round(corner, GRID_DIGITS) for corner in (part.bbox_relative.p0, part.bbox_relative.p1)
        )
    for axes in figure.axes:
        axes.set_position(tuple(np.round(axes.get_position(original=True).bounds, GRID_DIGITS)))


def key(body: SubFigure, entries: list[Line2D], columns: int = 3, side: bool = False) -> None:
    """Put a legend below the panels, or beside them on the left with its words wrapped."""
    for entry in entries:
        if side:
            entry.set_label("\n".join(textwrap.wrap(str(entry.get_label()), KEY_WIDTH)))
    if side:
        body.legend(handles=entries, loc="outside left center", labelspacing=0.9)
    else:
        body.legend(handles=entries, loc="outside lower center", ncols=columns)


def entry(words: str, **look: Any) -> Line2D:
    """A mark without a line, for a legend."""
    return Line2D([], [], linestyle="none", label=words, **look)


def frame(figure: Figure, run: Facts, heading: str, detail: str) -> None:
    """Write the headline above and the footer below."""
    left = 0.02
    if run.backward:
        heading += " (traced backward)"
    figure.text(left, 0.965, shortened(heading, TITLE_LENGTH), fontsize=13, weight="bold", color=INK, va="center")
    lines = textwrap.wrap(detail, 140)[:2]
    figure.text(left, 0.943, "\n".join(lines), fontsize=9.5, color=INK, va="top", linespacing=1.3)
    error = "not measured" if run.error_re is None else f"{run.error_re:.1e} R_E"
    source = " · ".join(
        part
        for part in (
            shortened(run.title, FOOTER_TITLE_LENGTH),
            f"start {run.start:%Y-%m-%d %H:%M} UTC" + (", traced backward" if run.backward else ""),
            f"driftrose {run.version}".strip(),
            f"error of 99 % of end positions: {error}",
        )
        if part
    )
    figure.text(left, 0.047, source, fontsize=7.5, color=FAINT, va="center")
    figure.text(left, 0.021, CAUTION, fontsize=7.5, color=FAINT, va="center")


def shortened(text: str, length: int) -> str:
    """`text` on one line, cut at `length` characters."""
    text = " ".join(text.split())
    return text if len(text) <= length else text[: length - 1].rstrip() + "…"


def plain_log_axis(axes: Axes, which: str) -> None:
    """Ticks of a logarithmic axis as plain numbers, at 1, 2 and 5 where the axis is short."""
    axis = axes.xaxis if which == "x" else axes.yaxis
    low, high = sorted(axis.get_view_interval())
    subs = (1.0,) if high / low > 300 else (1.0, 2.0, 5.0) if high / low > 8 else tuple(float(i) for i in range(1, 10))
    axis.set_major_locator(LogLocator(subs=subs, numticks=12))
    axis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axis.set_minor_formatter(NullFormatter())


def log_scale(values: Floats) -> LogNorm:
    """A logarithmic colour scale over the positive values; a single value gets a range around it."""
    good = values[np.isfinite(values) & (values > 0)]
    low, high = (float(good.min()), float(good.max())) if good.size else (1.0, 10.0)
    if high / low < 1.2:
        low, high = low / 1.2, high * 1.2
    return LogNorm(low, high)
