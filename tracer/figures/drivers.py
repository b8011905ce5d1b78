"""The drivers of a run over time, with their hold."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from fields.drivers import Driver
from fields.units import Floats
from tracer.analysis.driven import Driven, driven
from tracer.analysis.facts import facts
from tracer.figures.clock import time_ticks
from tracer.figures.style import INK, frame, page, shortened
from tracer.records import Result

PANELS = 4
HEADROOM = 0.35  # of the range, for the words above the curve
HOLDS = {"step": 'each value over its interval (hold = "step")', "linear": 'corners joined by lines (hold = "linear")'}


def draw_drivers(result: Result) -> list[Figure]:
    """One panel for each driver, four to a figure. None for a run without drivers."""
    found = driven(result)
    return [_page(result, found[i : i + PANELS]) for i in range(0, len(found), PANELS)]


def _page(result: Result, shown: list[Driven]) -> Figure:
    run = facts(result)
    figure, body = page()
    panels = body.subplots(len(shown), 1, sharex=True, squeeze=False).ravel()
    for axes, each in zip(panels, shown):
        _panel(axes, each)
    time_ticks(panels[-1], run, above=panels[0])
    panels[-1].set_xlabel("time (UTC)")
    names = ", ".join(dict.fromkeys(each.driver.name.removeprefix("series:") for each in shown))
    detail = "Values that the field models were given through the run, and how they were held between their times."
    frame(figure, run, f"Drivers over time: {names}", detail)
    return figure


def _panel(axes: Axes, each: Driven) -> None:
    driver = each.driver
    time, value = _outline(driver)
    stepped = driver.hold == "step"
    marker = "" if stepped else "o"
    axes.plot(time, value, color=INK, linewidth=1.6, solid_joinstyle="miter", marker=marker, markersize=4)
    low, high = min(0.0, float(value.min())), max(0.0, float(value.max()))
    axes.fill_between(time, value, 0.0, color="0.88", linewidth=0)
    axes.set_ylim(low * 1.05, high + HEADROOM * ((high - low) or 1.0))
    axes.yaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 5, 10]))
    axes.grid(True)
    unit = each.unit or ("index" if each.parameter == "kp" else "1")
    axes.set_ylabel(f"{_short(each)} ({unit})")
    words = f"{shortened(driver.name, 40)}: {HOLDS.get(driver.hold, driver.hold)}"
    if each.uses:
        words += "; sets " + ", ".join(each.uses)
    axes.text(0.01, 0.95, shortened(words, 120), transform=axes.transAxes, va="top", color=INK)


def _short(each: Driven) -> str:
    """The parameter's name without the unit in its tail."""
    if each.parameter == "kp":
        return "Kp"
    tail = "_" + each.unit.replace("/", "_per_")
    return shortened(each.parameter.removesuffix(tail).replace("_", " "), 30)


def _outline(driver: Driver) -> tuple[Floats, Floats]:
    """Both ends of every segment: a jump where two segments do not meet."""
    corners = driver.corners()
    time = np.column_stack([corners[:-1], corners[1:]]).ravel()
    value = np.column_stack([driver.value, driver.end_values()]).ravel()
    if driver.hold == "linear":
        keep = np.append(True, (np.diff(time) > 0) | (np.diff(value) != 0))
        time, value = time[keep], value[keep]
    return time, value
