"""Particles in lockstep lanes against the plain loop, and against each other: no particle knows who rides beside it."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
import storm_runs
from small_runs import number, population, span
from storm_runs import storm

from tracer.integrate import CONE_MODES, advance, compile_kernel, prepare
from tracer.kernels.build import Kernel
from tracer.scenario import Domain, Scenario
from tracer.status import Cause

WIDE = {
    "count": 60,
    "r_re": span(3.0, 9.5),
    "mlt_h": span(0.0, 24.0),
    "energy_keV": span(0.1, 500.0, "log"),
    "pitch_deg": span(2.0, 90.0),
}
RUN = storm(
    population("protons", "H+", release_h=span(0.0, 3.0), **WIDE),
    population("electrons", "e-", **WIDE),
    domain=Domain(outer_re=10.0, inner_re=3.2),
)
BACKWARD = replace(
    RUN, backward=True, populations=(population("protons", "H+", release_h=span(-3.0, 0.0), **WIDE), RUN.populations[1])
)
TOLERANCE = 1e-10


def one_by_one(
    run: Scenario,
    kernel: Kernel,
    state: np.ndarray,
    end: np.ndarray,
    track: np.ndarray,
    times: np.ndarray,
) -> None:
    """The same by the loop over single particles, which searches every step for boundaries."""
    loop: Any = storm_runs.part(kernel, "scalar").advance_one_by_one
    domain, cone = run.domain, CONE_MODES[run.loss_cone]
    rules = (run.direction, domain.outer_re, domain.inner_re, domain.foot_re, cone, TOLERANCE)
    loop(state, kernel.constants, kernel.edges, kernel.segments, rules, times, end, track)


@pytest.mark.parametrize("run", [RUN, BACKWARD, replace(RUN, loss_cone="stop")], ids=["flag", "backward", "stop"])
def test_lanes_agree_with_the_plain_loop(run: Scenario) -> None:
    kernel, state = compile_kernel(run), prepare(run, 0, run.count).state
    end, track = advance(run, kernel, state, TOLERANCE, run.save_times_h)
    plain_end, plain_track = np.full_like(end, np.nan), np.full_like(track, np.nan)
    one_by_one(run, kernel, state, plain_end, plain_track, run.save_times_h)
    assert np.array_equal(end[:, 5], plain_end[:, 5])
    assert {Cause.DRIFTING, Cause.OUTER, Cause.INNER} <= set(end[:, 5])
    # the same arithmetic, rounded in another order
    np.testing.assert_allclose(end[:, [0, 1, 3, 4, 6, 7]], plain_end[:, [0, 1, 3, 4, 6, 7]], rtol=0, atol=1e-8)
    assert np.any(np.isfinite(end[:, 7]))
    assert np.array_equal(np.isfinite(track), np.isfinite(plain_track))
    np.testing.assert_allclose(track[:, [0, 2, 3]], plain_track[:, [0, 2, 3]], rtol=1e-8)
    away = np.abs((track[:, 1] - plain_track[:, 1] + 12.0) % 24.0 - 12.0)
    assert np.nanmax(away) < 1e-8
    np.testing.assert_allclose(end[:, 8], plain_end[:, 8], rtol=0.02, atol=2)


@pytest.mark.parametrize("order", ["reversed", "shuffled"])
def test_order_changes_no_bit(order: str) -> None:
    kernel, state = compile_kernel(RUN), prepare(RUN, 0, RUN.count).state
    end, track = advance(RUN, kernel, state, TOLERANCE, RUN.save_times_h)
    index = np.arange(RUN.count)[::-1] if order == "reversed" else np.random.default_rng(2).permutation(RUN.count)
    other_end, other_track = advance(RUN, kernel, state[index], TOLERANCE, RUN.save_times_h)
    assert other_end.tobytes() == end[index].tobytes()
    assert other_track.tobytes() == track[index].tobytes()


@pytest.mark.parametrize("count", [1, 7, 8, 9])
def test_a_few_alone_are_as_among_many(count: int) -> None:
    kernel, state = compile_kernel(RUN), prepare(RUN, 0, RUN.count).state
    end, _ = advance(RUN, kernel, state, TOLERANCE, np.empty(0))
    few, _ = advance(RUN, kernel, state[40 : 40 + count], TOLERANCE, np.empty(0))
    assert few.tobytes() == end[40 : 40 + count].tobytes()


def test_neighbours_that_fail_or_stand_still_do_no_harm() -> None:
    # one that is no number, one that never moves, one released at the last hour
    kernel, state = compile_kernel(RUN), prepare(RUN, 0, 5).state
    odd = np.repeat(state[:1], 3, axis=0)
    odd[0, 3], odd[1, 3], odd[2, 2] = np.nan, 0.0, RUN.end_h
    alone, _ = advance(RUN, kernel, state, TOLERANCE, np.empty(0))
    mixed, _ = advance(RUN, kernel, np.concatenate([odd, state]), TOLERANCE, np.empty(0))
    assert mixed[3:].tobytes() == alone.tobytes()
    assert mixed[0, 5] == Cause.FAILED
    assert mixed[2, 0] == RUN.end_h


def test_no_particle_at_all() -> None:
    kernel = compile_kernel(RUN)
    end, track = advance(RUN, kernel, np.zeros((0, 8)), TOLERANCE, RUN.save_times_h)
    assert end.shape == (0, 10)
    assert track.shape == (0, 4, RUN.save_times_h.size)


def test_a_fast_one_beside_slow_ones() -> None:
    run = storm(
        population("fast", "e-", count=1, energy_keV=number(5e3), r_re=number(1.5), pitch_deg=number(80.0)),
        population("slow", "H+", count=20, energy_keV=number(0.1), r_re=span(2.0, 3.0)),
    )
    kernel, state = compile_kernel(run), prepare(run, 0, run.count).state
    end, _ = advance(run, kernel, state, 1e-9, np.empty(0))
    assert end[0, 8] > 5 * np.max(end[1:, 8])
    rest, _ = advance(run, kernel, state[1:], 1e-9, np.empty(0))
    assert rest.tobytes() == end[1:].tobytes()


@pytest.mark.parametrize("depth", [1e-1, 1e-3, 1e-5])
def test_a_graze_is_met_as_by_the_plain_loop(depth: float) -> None:
    """An outer boundary just below the farthest point of a path: the particle turns as it crosses."""
    kernel, state = compile_kernel(RUN), prepare(RUN, 0, RUN.count).state
    _, track = advance(RUN, kernel, state, TOLERANCE, RUN.save_times_h)
    grazed = 0
    for row, r in zip(state, track[:, 0]):
        inside = np.flatnonzero(np.isfinite(r))
        if not inside.size or (top := int(np.nanargmax(r))) in (inside[0], inside[-1]):
            continue
        run = replace(RUN, domain=replace(RUN.domain, outer_re=float(r[top]) - depth))
        if row[0] >= run.domain.outer_re:
            continue
        end, _ = advance(run, kernel, row[None], TOLERANCE, np.empty(0))
        plain = np.full_like(end, np.nan)
        one_by_one(run, kernel, row[None], plain, np.empty((1, 4, 0)), np.empty(0))
        assert end[0, 5] == plain[0, 5] == Cause.OUTER
        assert end[0, 0] == pytest.approx(plain[0, 0], abs=1e-8)
        grazed += 1
    assert grazed > 10
