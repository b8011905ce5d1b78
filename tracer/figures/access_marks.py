"""How the answers of access are drawn: one colour each, cells of a grid, a legend of those that occur."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
from matplotlib.colors import BoundaryNorm, ListedColormap
from matplotlib.lines import Line2D

from fields.units import Floats
from tracer.figures.style import entry
from tracer.outcomes import Outcome

# Lightness climbs through the list, so that they differ in grey as well; what was not asked for is white.
COLOURS: dict[Outcome, str] = {
    Outcome.ATMOSPHERE: "#000000",
    Outcome.FAILED: "#5B0F22",
    Outcome.MAGNETOPAUSE: "#8A2A6B",
    Outcome.OPEN: "#0072B2",
    Outcome.OUTSIDE_MODEL: "#00A57C",
    Outcome.INNER: "#F0A030",
    Outcome.OPEN_ELSEWHERE: "#8CC5E8",
    Outcome.UNDECIDED: "#C8C8C8",
    Outcome.BEFORE_RECORD: "#F3E3B3",
    Outcome.OUT_OF_REACH: "#ECECEC",
    Outcome.OUTSIDE_DOMAIN: "#FFFFFF",
}
MAP = ListedColormap([COLOURS[outcome] for outcome in Outcome], name="access")
NORM = BoundaryNorm(np.arange(len(Outcome) + 1) - 0.5, MAP.N)


def edges(centres: Floats, log: bool = False) -> Floats:
    """Edges of the cells around rising centres, half way between them; a single one gets a tenth to both sides."""
    middle = np.log(centres) if log else np.asarray(centres, dtype=float)
    if middle.size == 1:
        reach = 0.1 if log else max(0.1 * abs(float(middle[0])), 0.05)
        found = np.array([middle[0] - reach, middle[0] + reach])
    else:
        inner = 0.5 * (middle[1:] + middle[:-1])
        found = np.concatenate([[2 * middle[0] - inner[0]], inner, [2 * middle[-1] - inner[-1]]])
    return np.exp(found) if log else found


def evenly(count: int, most: int) -> list[int]:
    """Up to `most` indices, the first and the last among them."""
    return sorted({round(float(i)) for i in np.linspace(0, count - 1, min(count, most))})


def legend(found: Iterable[int]) -> list[Line2D]:
    """Entries for the answers that occur."""
    shown = sorted({Outcome(int(code)) for code in found})
    return [
        entry(outcome.sentence, marker="s", markersize=9, color=COLOURS[outcome], markeredgecolor="0.45")
        for outcome in shown
    ]
