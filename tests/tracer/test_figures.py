"""Figures: a unit on every axis, no words on top of each other, files that are never lost and always the same."""

from __future__ import annotations

import dataclasses
import re
import xml.etree.ElementTree as ElementTree
from functools import cache
from itertools import combinations
from pathlib import Path
from typing import Any
from unittest import mock

import matplotlib
import numpy as np
import pytest
import synthetic
from matplotlib.collections import LineCollection
from matplotlib.figure import Figure
from matplotlib.text import Text

from fields.errors import InputError
from tracer.analysis.facts import facts
from tracer.figures import draw, fitting
from tracer.figures.clock import time_ticks
from tracer.figures.style import COLD, END_MARKS, ENERGY_MAP, PITCH_MAP, SETTINGS
from tracer.records import Result
from tracer.status import Cause
from tracer.stopping import Stopped

UNITS = {"R_E", "keV", "h", "UTC", "deg", "kV", "mV/m", "index", "particles", "1"}
TOUCH_PX = 1.0  # boxes of words that only touch do not overlap

BOTH = {"protons": {"charge": 1}, "electrons": {"charge": -1, "mlt_h": (2.0, 8.0)}}
MANY = {
    f"ions {i} with a name that is longer than anybody needs": {"charge": 1, "energy_keV": (10.0**i, 20.0 * 10**i)}
    for i in range(5)
}


def ends_only(result: Result) -> Result:
    return dataclasses.replace(result, time_h=np.empty(0), track={})


def every_cause(result: Result) -> Result:
    cause = (np.arange(result.count) % len(Cause)).astype("u1")
    return dataclasses.replace(result, end={**result.end, "cause": cause})


def cold(result: Result) -> Result:
    none = {"energy_keV": np.zeros(result.count)}
    track = {**result.track, "energy_keV": np.zeros_like(result.track["energy_keV"])}
    return dataclasses.replace(result, particle={**result.particle, **none}, end={**result.end, **none}, track=track)


CASES: dict[str, Any] = {
    "one population": lambda: synthetic.drifting(n=120),
    "two populations": lambda: synthetic.drifting(BOTH, n=60),
    "five populations": lambda: synthetic.drifting(MANY, n=20, every_min=30.0),
    "backward": lambda: synthetic.drifting(n=40, backward=True),
    "half an hour": lambda: synthetic.drifting(n=40, hours=0.5, every_min=1.0),
    "five days": lambda: synthetic.drifting(n=20, hours=120.0, every_min=30.0, drivers=()),
    "ends only": lambda: ends_only(synthetic.drifting(n=40)),
    "every cause": lambda: every_cause(synthetic.drifting(n=80)),
    "cold": lambda: cold(synthetic.drifting(n=20)),
    "one particle": lambda: synthetic.drifting(n=1),
    "long title": lambda: synthetic.drifting(n=20, title="A title in $dollars$ that does not end " * 6),
    "six drivers": lambda: synthetic.drifting(
        n=20, drivers=(synthetic.kp_steps(), *(synthetic.kp_linear(f"series:wind_{i}") for i in range(5)))
    ),
    "late start": lambda: late(synthetic.drifting(n=20, hours=23.0)),
}


def late(result: Result) -> Result:
    return dataclasses.replace(
        result, attrs={**result.attrs, "start": "2003-10-29T23:41:30Z", "end_error_99_re": 1.3e-6}
    )


@cache
def result_of(case: str) -> Result:
    return CASES[case]()


@cache
def figures_of(case: str) -> dict[str, Figure]:
    return fitting(result_of(case))


@cache
def words_in(case: str, name: str) -> list[tuple[str, Any]]:
    return drawn_words(figures_of(case)[name])


def drawn_words(figure: Figure) -> list[tuple[str, Any]]:
    """Every text that is drawn, with its box in pixels."""
    seen: dict[int, Text] = {}
    original = Text.draw

    def recording(self: Text, renderer: Any, *args: Any, **more: Any) -> None:
        if self.get_visible() and self.get_text().strip():
            seen[id(self)] = self
        original(self, renderer, *args, **more)

    with matplotlib.rc_context(SETTINGS):
        with mock.patch.object(Text, "draw", recording):
            figure.canvas.draw()
        renderer = figure.canvas.get_renderer()  # type: ignore[attr-defined]
        return [(text.get_text(), text.get_window_extent(renderer)) for text in seen.values()]


@pytest.mark.parametrize("case", CASES)
def test_no_words_overlap_and_none_leave_the_page(case: str) -> None:
    for name, figure in figures_of(case).items():
        words = words_in(case, name)
        assert len(words) > 10
        for text, box in words:
            assert box.x0 >= 0, (name, text)
            assert box.y0 >= 0, (name, text)
            assert box.x1 <= figure.bbox.x1, (name, text)
            assert box.y1 <= figure.bbox.y1, (name, text)
        for (text, box), (other, second) in combinations(words, 2):
            wide = min(box.x1, second.x1) - max(box.x0, second.x0)
            high = min(box.y1, second.y1) - max(box.y0, second.y0)
            assert not (wide > TOUCH_PX and high > TOUCH_PX), f"{name}: {text!r} overlaps {other!r}"


@pytest.mark.parametrize("case", CASES)
def test_every_axis_has_a_unit(case: str) -> None:
    for name, figure in figures_of(case).items():
        axes = [a for top in figure.findobj(matplotlib.axes.Axes) for a in (top, *top.child_axes)]
        assert axes
        for each in axes:
            for axis in (each.xaxis, each.yaxis):
                ticks = [t for t in axis.get_majorticklabels() if t.get_visible() and t.get_text()]
                if not ticks or not axis.get_visible():
                    continue
                label = axis.get_label_text()
                if not label:
                    assert each.get_shared_x_axes().get_siblings(each) != [each], (name, ticks)
                    continue
                unit = re.search(r"\(([^()]+)\)$", label)
                assert unit, f"{name}: {label!r} ends in no unit"
                assert unit.group(1) in UNITS, label


def test_an_overlap_would_be_seen() -> None:
    figure = next(iter(fitting(synthetic.drifting(n=10, every_min=60.0)).values()))
    figure.text(0.02, 0.965, "on the headline")
    boxes = [box for _, box in drawn_words(figure)]
    assert any(a.overlaps(b) for a, b in combinations(boxes, 2))


def test_what_fits_depends_on_the_file() -> None:
    assert list(figures_of("one population")) == ["paths", "drivers", "arrivals", "ends"]
    assert list(figures_of("ends only")) == ["drivers", "ends"]
    assert "drivers" not in figures_of("five days")
    assert {"paths", "paths-2", "paths-3"} <= set(figures_of("five populations"))
    assert {"drivers", "drivers-2"} <= set(figures_of("six drivers"))


def joined(words: list[tuple[str, Any]]) -> str:
    return " ".join(" ".join(text for text, _ in words).split())


def test_the_words_say_what_is_shown() -> None:
    result = result_of("two populations")
    shown = {name: joined(words_in("two populations", name)) for name in ("paths", "drivers", "ends")}
    shown["arrivals"] = joined(drawn_words(fitting(result, r_re=5.0, sector_h=(15.0, 18.0))["arrivals"]))
    for text in shown.values():
        assert result.attrs["title"] in text
        assert "start 2027-03-04 00:00 UTC" in text
        assert "driftrose 0.1.0" in text
        assert "Screening estimate" in text
        assert "defers to agency standards and to qualified engineers" in text
    assert "60 of 60 shown" in shown["paths"]
    assert "Sun to the left" in shown["paths"]
    assert "protons (H+)" in shown["paths"]
    assert "electrons (e-)" in shown["paths"]
    assert 'hold = "step"' in shown["drivers"]
    assert "sets kp of volland-stern" in shown["drivers"]
    assert "Arrivals at 5 R_E, 15 to 18 MLT" in shown["arrivals"]
    left = int(np.count_nonzero(result.end["cause"] == Cause.OUTER))
    assert f"{Cause.OUTER.sentence}: {left} ({100 * left / 120:.1f} %)" in shown["ends"]


def test_the_measured_error_and_the_sense_of_time_are_in_the_footer() -> None:
    assert "error of 99 % of end positions: 1.3e-06 R_E" in joined(words_in("late start", "ends"))
    assert "traced backward" in joined(words_in("backward", "ends"))


def test_a_selection_of_many_is_stated_and_even_over_energy() -> None:
    text = joined(drawn_words(fitting(synthetic.drifting(n=400, every_min=60.0))["paths"]))
    assert "150 of 400 shown" in text


def test_local_noon_is_on_the_left_and_dusk_below() -> None:
    centre = {text: (box.x0 + box.x1, box.y0 + box.y1) for text, box in words_in("one population", "paths")}
    assert centre["12"][0] < centre["06"][0] < centre["00"][0]
    assert centre["18"][1] < centre["12"][1] < centre["06"][1]


@pytest.mark.parametrize(("hold", "driver"), [("step", synthetic.kp_steps()), ("linear", synthetic.kp_linear())])
def test_the_curve_is_the_driver(hold: str, driver: Any) -> None:
    figure = fitting(synthetic.drifting(n=5, every_min=60.0, drivers=(driver,)))["drivers"]
    (line,) = figure.subfigs[1].axes[0].get_lines()
    hours, value = np.asarray(line.get_xdata()), np.asarray(line.get_ydata())
    middle = 0.5 * (hours[1:] + hours[:-1])
    moving = np.diff(hours) > 1e-6
    assert np.interp(middle[moving], hours, value) == pytest.approx(driver.at(middle[moving]), abs=1e-6)
    jumps = np.count_nonzero((np.diff(hours) < 1e-6) & (np.diff(value) != 0))
    assert jumps == (7 if hold == "step" else 0)


def test_cold_plasma_is_drawn_without_an_energy_scale() -> None:
    figures = figures_of("cold")
    assert "arrivals" not in figures
    (axes,) = figures["paths"].axes  # no colour bar
    (lines,) = axes.findobj(LineCollection)
    assert np.allclose(lines.get_colors()[:, :3], matplotlib.colors.to_rgb(COLD))
    assert "zero energy" in joined(words_in("cold", "paths"))


def test_warm_paths_take_their_colours_from_the_scale() -> None:
    figure = figures_of("one population")["paths"]
    lines = max(figure.axes[0].findobj(LineCollection), key=lambda found: len(found.get_segments()))
    (scale,) = {figure.axes[1]._colorbar.norm}
    energies = result_of("one population").track["energy_keV"]
    assert scale.vmin <= np.nanmin(energies) * 1.001
    assert scale.vmax >= np.nanmax(energies) * 0.999
    known = ENERGY_MAP(np.linspace(0, 1, 256))[:, :3]
    gap = np.abs(np.asarray(lines.get_colors())[::97, None, :3] - known).sum(axis=2).min(axis=1)
    assert gap.max() < 0.02


def lightness(colour: Any) -> np.ndarray:
    """CIE L* of sRGB colours (IEC 61966-2-1 and CIE 15, formulas from memory)."""
    rgb = np.atleast_2d(matplotlib.colors.to_rgba_array(colour))[:, :3]
    linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
    y = linear @ np.array([0.2126, 0.7152, 0.0722])
    return np.where(y > 216 / 24389, 116 * np.cbrt(y) - 16, y * 24389 / 27)


def test_everything_can_be_told_apart_in_grey() -> None:
    for scale in (ENERGY_MAP, PITCH_MAP):
        steps = np.diff(lightness(scale(np.linspace(0, 1, 64))))
        assert np.all(steps > 0)
        assert steps.sum() > 60
    marks = list(END_MARKS.values())
    assert set(END_MARKS) == set(Cause)
    assert len({mark.marker for mark in marks}) == len(marks)
    levels = np.sort(lightness([mark.colour for mark in marks]))
    assert np.diff(levels).min() > 8


@pytest.mark.parametrize("format", ["png", "svg", "pdf"])
def test_files_are_the_same_bytes_and_carry_their_origin(tmp_path: Path, format: str) -> None:
    result = synthetic.drifting(n=12, every_min=60.0)
    if format != "svg":
        result = ends_only(result)
    first = draw(result, tmp_path / "a" / "b", format=format)
    second = draw(result, tmp_path / "c", format=format)
    assert [p.name for p in first] == [p.name for p in second]
    assert [p.read_bytes() for p in first] == [p.read_bytes() for p in second]
    assert sorted(p.name for p in (tmp_path / "c").iterdir()) == sorted(p.name for p in second)
    content = first[0].read_bytes()
    if format == "pdf":
        assert content.startswith(b"%PDF")
        assert b"/Creator (driftrose 0.1.0)" in content
        assert b"0123456789abcdef" in content
        assert b"CreationDate" not in content
    else:
        assert b"driftrose 0.1.0" in content
        assert ("0123456789abcdef" * 4).encode() in content
        assert result.attrs["title"].encode() in content
    if format == "svg":
        assert ElementTree.fromstring(content).tag.endswith("svg")
        assert b"<dc:date>" not in content


def test_nothing_is_replaced_unless_asked(tmp_path: Path) -> None:
    result = ends_only(synthetic.drifting(n=6, every_min=60.0))
    paths = draw(result, tmp_path)
    paths[1].write_text("mine")
    paths[0].unlink()
    with pytest.raises(InputError, match=f"{re.escape(str(paths[1]))}: exists"):
        draw(result, tmp_path)
    assert [p.name for p in tmp_path.iterdir()] == [paths[1].name]
    assert paths[1].read_text() == "mine"
    assert draw(result, tmp_path, overwrite=True) == paths
    assert paths[1].read_bytes().startswith(b"\x89PNG")


def test_bad_requests_are_one_clear_line(tmp_path: Path) -> None:
    result = ends_only(synthetic.drifting(n=4, every_min=60.0))
    for asked, line in (
        ({"format": "jpg"}, 'driftrose: format = "jpg": unknown format; did you mean png'),
        ({"arrival_r_re": 11.0}, "driftrose: arrival_r_re = 11.0: outside the domain; a number from 1.02 to 10 R_E"),
        (
            {"arrival_mlt_h": (3.0, 25.0)},
            "driftrose: arrival_mlt_h = [3.0, 25.0]: not hours of local time; two numbers from 0 to 24",
        ),
    ):
        with pytest.raises(InputError) as caught:
            draw(result, tmp_path / "new", **asked)
        assert str(caught.value) == line
    with pytest.raises(InputError, match=r"nowhere\.h5: no such file"):
        draw(tmp_path / "nowhere.h5", tmp_path)
    (tmp_path / "file").write_text("")
    with pytest.raises(InputError, match="cannot be written"):
        draw(result, tmp_path / "file")
    assert [p.name for p in tmp_path.iterdir()] == ["file"]


def test_a_full_disk_leaves_nothing(tmp_path: Path) -> None:
    result = ends_only(synthetic.drifting(n=4, every_min=60.0))
    full = OSError(28, "No space left on device")
    whole = Path.write_bytes
    written = []

    def failing(self: Path, data: bytes) -> int:
        written.append(whole(self, data[:100]))
        if len(written) == 2:
            raise full
        return written[-1]

    with mock.patch.object(Path, "write_bytes", failing), pytest.raises(Stopped, match="disk is full"):
        draw(result, tmp_path)
    assert list(tmp_path.iterdir()) == []


def test_drawing_leaves_the_global_settings_alone(tmp_path: Path) -> None:
    before = dict(matplotlib.rcParams)
    draw(ends_only(synthetic.drifting(n=4, every_min=60.0)), tmp_path)
    assert dict(matplotlib.rcParams) == before


@pytest.mark.parametrize("hours", [0.05, 0.5, 7.0, 24.0, 72.0, 300.0, 8760.0])
def test_time_axes_have_a_few_labels_each_with_its_date(hours: float) -> None:
    result = dataclasses.replace(late(synthetic.drifting(n=1, every_min=60.0)))
    result.attrs["hours"] = hours
    figure = Figure(figsize=(8, 4))
    axes = figure.subplots()
    time_ticks(axes, facts(result))
    labels = [text.get_text() for text in axes.get_xticklabels()]
    assert 2 <= len(labels) <= 10
    assert re.search(r"\d{4}-\d\d-\d\d$", labels[0])


@pytest.mark.parametrize(
    ("sector", "words"),
    [((0.0, 24.0), "all local times"), ((21.0, 3.0), "21 to 03 MLT"), ((18.0, 24.0), "18 to 00 MLT")],
)
def test_the_arrivals_title_names_the_sector(sector: tuple[float, float], words: str) -> None:
    figure = fitting(synthetic.drifting(n=40, every_min=15.0), r_re=5.0, sector_h=sector)["arrivals"]
    assert words in joined(drawn_words(figure))
