"""Crossings of a circle, against paths whose crossings are known in closed form."""

from __future__ import annotations

import dataclasses
from itertools import pairwise

import numpy as np
import pytest
import synthetic
from hypothesis import given, settings
from hypothesis import strategies as st

import tracer.analysis.arrivals as arrivals_module
from fields.errors import InputError
from tracer.analysis.arrivals import DIRECTIONS, crossings, first_times
from tracer.analysis.endings import counts_by_cause, end_rates
from tracer.analysis.polylines import evenly_over_energy, polylines, polylines_across
from tracer.analysis.summary import sentences
from tracer.analysis.vantage import busiest_sector, watched_radius
from tracer.records import Result
from tracer.status import Cause


def spiral(
    start_r: np.ndarray,
    speed: float = 0.5,
    wobble: float = 0.0,
    turns_per_h: float = 0.3,
    release: float = 0.0,
    hours: float = 10.0,
    every_min: float = 6.0,
    backward: bool = False,
) -> Result:
    """Particles on r(s) = r0 - speed s + wobble sin(2 pi s), phi(s) = 2 pi turns s; s the time since release."""
    sign = -1.0 if backward else 1.0
    n = start_r.size
    times = sign * np.linspace(0.0, hours, round(hours * 60 / every_min) + 1)

    def state(s: np.ndarray) -> dict[str, np.ndarray]:
        r = start_r[:, None] - speed * s + wobble * np.sin(2 * np.pi * s)
        return {"r_re": r, "mlt_h": (22.0 + 24.0 * turns_per_h * s) % 24.0, "energy_keV": 100.0 * (7.0 / r) ** 3}

    s = np.broadcast_to(sign * times - release, (n, times.size))
    stop = np.full(n, hours - release)
    track = {k: np.where(s >= 0, v, np.nan) for k, v in state(s).items()}
    first = {k: v[:, 0] for k, v in state(np.zeros((n, 1))).items()}
    last = {k: v[:, 0] for k, v in state(stop[:, None]).items()}
    return synthetic.assemble(
        times, np.zeros(n, dtype=int), ("protons",), np.ones(n), np.full(n, 60.0),
        {**first, "release_h": np.full(n, sign * release)}, track,
        {**last, "time_h": np.full(n, sign * hours), "cause": np.zeros(n), "turns": turns_per_h * stop},
        synthetic.attributes("Invented spirals", hours, backward), (),
    )  # fmt: skip


@given(
    level=st.floats(3.0, 6.4),
    speed=st.floats(0.4, 2.0),
    turns=st.floats(-2.5, 2.5),  # less than half a turn from point to point
    release=st.floats(0.0, 3.0),
    backward=st.booleans(),
)
@settings(max_examples=60, deadline=None)
def test_a_straight_spiral_is_crossed_where_it_must_be(
    level: float, speed: float, turns: float, release: float, backward: bool
) -> None:
    start = np.array([6.5, 7.0])
    hours = release + 0.8 * 6.5 / speed  # ends before the Earth's centre
    result = spiral(
        start, speed, hours=hours, every_min=hours * 60 / 100, turns_per_h=turns, release=release, backward=backward
    )
    found = crossings(result, level, "inward")
    since = (start - level) / speed
    inside = since < hours - release - 1e-9
    assert found.particle.tolist() == np.flatnonzero(inside).tolist()
    sign = -1.0 if backward else 1.0
    assert found.time_h == pytest.approx(sign * (release + since[inside]), abs=1e-9)
    wanted = (22.0 + 24.0 * turns * since[inside]) % 24.0
    assert (found.mlt_h - wanted + 12.0) % 24.0 - 12.0 == pytest.approx(np.zeros(wanted.size), abs=1e-7)
    assert found.energy_keV == pytest.approx(np.full(found.count, 100.0 * (7.0 / level) ** 3), rel=2e-3)
    assert found.pitch_deg == pytest.approx(np.full(found.count, 60.0))
    assert found.mlt_known.all()
    assert crossings(result, level, "outward").count == 0


def test_time_of_crossing_converges_to_the_third_order() -> None:
    """An oscillating approach; the crossings by bisection of the formula to 1e-13 h."""
    from scipy.optimize import brentq

    def r(s: float) -> float:
        return 7.0 - 0.3 * s + 0.2 * np.sin(2 * np.pi * s)

    level = 5.93
    grid = np.linspace(0.0, 10.0, 4001)
    exact = [
        brentq(lambda s: r(s) - level, a, b, xtol=1e-13)
        for a, b in pairwise(grid)
        if (r(a) - level) * (r(b) - level) < 0
    ]
    assert len(exact) >= 3
    errors = []
    for every in (6.0, 3.0, 1.5):
        found = crossings(spiral(np.array([7.0]), 0.3, 0.2, every_min=every), level, "any")
        assert found.count == len(exact)
        errors.append(np.abs(found.time_h - exact).max())
        assert found.inward.tolist() == [k % 2 == 0 for k in range(found.count)]
    orders = np.log2(np.array(errors[:-1]) / errors[1:])
    assert errors[0] < 0.1 * 0.1  # a tenth of the saved interval, 0.1 h; ten points to an oscillation
    assert np.all(orders > 2.7), (errors, orders)  # slopes from three points are of second order


def test_release_and_end_between_saved_times_count() -> None:
    result = spiral(np.array([6.5]), 1.0, release=2.503, hours=10.0, every_min=60.0)
    found = crossings(result, 6.4, "inward")  # 0.1 h after release: before the first saved point
    assert found.time_h == pytest.approx([2.603], abs=1e-9)
    end = dict(result.end)
    track = {k: np.where(result.time_h < 4.5, v, np.nan) for k, v in result.track.items()}
    end.update(time_h=np.array([4.9]), r_re=np.array([6.5 - 2.397]), turns=np.array([0.3 * 2.397]))
    found = crossings(dataclasses.replace(result, end=end, track=track), 4.2, "inward")
    assert found.time_h == pytest.approx([4.803], abs=1e-9)


def test_first_and_sector() -> None:
    result = spiral(np.array([7.0]), 0.0, 0.5, turns_per_h=0.25, hours=8.0)
    every = crossings(result, 7.2, "any")  # each hour out and in again, six hours of local time further on
    assert every.count == 16
    assert every.first().time_h == pytest.approx(every.time_h[:1])
    assert crossings(result, 7.2, "outward").count == crossings(result, 7.2, "inward").count == 8
    around_noon = every.within((9.0, 15.0))
    assert 0 < around_noon.count < every.count
    assert np.all((around_noon.mlt_h >= 9.0) & (around_noon.mlt_h < 15.0))
    through_midnight = every.within((21.0, 3.0))
    assert np.all((through_midnight.mlt_h >= 21.0) | (through_midnight.mlt_h < 3.0))
    assert every.within((0.0, 24.0)).count == every.count
    assert every.within((6.0, 18.0)).count + every.within((18.0, 6.0)).count == every.count


def test_blocks_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    result = synthetic.drifting(n=50)
    whole = crossings(result, 5.5)
    monkeypatch.setattr(arrivals_module, "BLOCK_POINTS", 7 * (result.time_h.size + 2))
    parts = crossings(result, 5.5)
    for field in dataclasses.fields(whole):
        assert np.array_equal(getattr(whole, field.name), getattr(parts, field.name))


@pytest.mark.parametrize("direction", DIRECTIONS)
@pytest.mark.parametrize("rows", [7, 1000])
def test_first_times_are_those_of_the_first_crossings(
    direction: arrivals_module.Direction, rows: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    result = synthetic.drifting(n=60)
    levels = [*np.linspace(1.5, 9.5, 17), float(result.track["r_re"][3, 5]), float(result.particle["r_re"][4])]
    found = [crossings(result, level, direction).first() for level in levels]
    assert sum(first.count for first in found) > 60
    monkeypatch.setattr(arrivals_module, "BLOCK_POINTS", rows * (result.time_h.size + 2))
    for level, first in zip(levels, found):
        particle, time_h = first_times(result, level, direction)
        assert np.array_equal(particle, first.particle)
        assert np.array_equal(time_h, first.time_h)


def test_paths_that_cannot_cross_are_the_only_ones_left_out() -> None:
    result = synthetic.drifting(n=60)
    for level in (3.0, 5.0, 7.0):
        whole = polylines(result, slice(None))
        across = polylines_across(result, slice(None), level)
        away = np.setdiff1d(whole.index, across.index)
        r = whole.r_re[away]
        assert np.all((np.nanmax(r, axis=1) < level) | (np.nanmin(r, axis=1) > level))
        for name in ("time_h", "r_re", "mlt_h", "energy_keV", "pitch_deg", "turns"):
            assert np.array_equal(getattr(across, name), getattr(whole, name)[across.index], equal_nan=True)


def test_the_sentences_read_the_tracks_of_r_only_and_few_at_a_time(monkeypatch: pytest.MonkeyPatch) -> None:
    result = synthetic.drifting(n=60)
    said = sentences(result)
    read: list[tuple[str, int]] = []
    track = result.track

    class Watched(dict[str, np.ndarray]):
        def rows(self, name: str, index: np.ndarray | slice) -> np.ndarray:
            read.append((name, track[name][index].shape[0]))
            return np.asarray(track[name][index])

    monkeypatch.setattr(arrivals_module, "BLOCK_POINTS", 7 * (result.time_h.size + 2))
    assert sentences(dataclasses.replace(result, track=Watched())) == said
    assert {name for name, _ in read} == {"r_re"}
    assert max(rows for _, rows in read) == 7
    assert sum(rows for _, rows in read) == 60


def test_a_particle_too_fast_to_follow_has_no_known_local_time() -> None:
    fast = spiral(np.array([6.5]), 0.5, turns_per_h=11.0)  # 1.1 turns from one saved point to the next
    found = crossings(fast, 5.0)
    assert found.count == 1
    assert not found.mlt_known.any()
    assert found.within((0.0, 24.0)).count == 0
    assert not polylines(fast, slice(None)).followed()[0]


def test_bad_circles_and_directions_are_refused() -> None:
    result = spiral(np.array([6.5]))
    with pytest.raises(InputError, match="r_re = -1: not a distance; a number above 0 R_E"):
        crossings(result, -1)
    with pytest.raises(InputError, match="did you mean inward"):
        crossings(result, 5.0, "inwards")  # type: ignore[arg-type]


def test_without_tracks_a_path_is_release_and_end() -> None:
    result = synthetic.drifting(n=5)
    bare = polylines(dataclasses.replace(result, time_h=np.empty(0), track={}), slice(None))
    assert bare.r_re.shape == (5, 2)
    assert bare.r_re[:, 0] == pytest.approx(result.particle["r_re"])
    assert bare.r_re[:, 1] == pytest.approx(result.end["r_re"])


def test_never_released_particles_have_no_path() -> None:
    result = synthetic.drifting(n=4)
    end = {**result.end, "cause": np.array([7, 0, 7, 0], dtype="u1")}
    nothing = {k: np.where([[True], [False], [True], [False]], np.nan, v) for k, v in result.track.items()}
    paths = polylines(dataclasses.replace(result, end=end, track=nothing), slice(None))
    assert np.isnan(paths.r_re[[0, 2]]).all()
    assert np.isfinite(paths.r_re[[1, 3]]).any(axis=1).all()


def test_selection_is_even_over_energy() -> None:
    result = synthetic.drifting(n=1000, every_min=60.0)
    chosen = evenly_over_energy(result, np.arange(1000), 11)
    ranks = np.sort(np.argsort(np.argsort(result.particle["energy_keV"]))[chosen])
    assert ranks == pytest.approx(np.linspace(0, 999, 11), abs=0.5)
    assert np.all(np.diff(chosen) > 0)


def test_the_watched_place_is_where_particles_come() -> None:
    result = spiral(np.linspace(6.2, 7.0, 40), 0.25)  # inward by 2.5 R_E
    assert watched_radius(result) == 4.5  # half of them come inside 4.1
    found = crossings(result, 4.5)
    sector = busiest_sector(result, found)
    assert found.within(sector).count >= found.count * 3 / 24
    assert not 19.0 < sector[0] <= 22.0  # where they all start, at 22
    assert (sector[1] - sector[0]) % 24.0 == 3.0
    still = spiral(np.array([6.5]), 0.0)
    assert watched_radius(still) is None


def test_ends_are_counted_once() -> None:
    result = synthetic.drifting(n=300, every_min=30.0)
    counts = counts_by_cause(result)
    assert sum(counts.values()) == 300
    rates = end_rates(result)
    assert rates.edges_h[0] <= 0.0
    assert rates.edges_h[-1] >= 24.0
    assert {cause: int(n.sum()) for cause, n in rates.counts.items()} == {
        cause: n for cause, n in counts.items() if cause is not Cause.DRIFTING
    }
    assert np.diff(rates.edges_h) == pytest.approx(rates.width_h)


def test_sentences_say_who_came_and_who_left() -> None:
    result = spiral(np.array([6.0, 6.5, 12.0]), 0.5)
    end = dict(result.end)
    end["cause"] = np.array([0, 0, 1], dtype="u1")
    lines = sentences(dataclasses.replace(result, end=end))
    assert lines == [
        "protons: 2 of 3 (66.7 %) reached 4 R_E, the first at 4.00 h (2027-03-04 04:00 UTC), half of them by 4.50 h.",
        "2 of 3 (66.7 %) were still drifting at the end of the run.",
        "1 of 3 (33.3 %) reached the outer boundary moving outward (10 R_E), "
        "the first at 10.00 h (2027-03-04 10:00 UTC).",
    ]
    assert sentences(spiral(np.array([6.0, 6.5]), 0.1))[0] == "protons: none of 2 reached 4 R_E."
    assert "back in time at 4.00 h (2027-03-03 20:00 UTC)" in sentences(spiral(np.array([6.0]), 0.5, backward=True))[0]
