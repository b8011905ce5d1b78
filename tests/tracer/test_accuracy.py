"""From the error asked for to the local tolerance, and back to the error met."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from small_runs import number, population, span
from storm_runs import storm

from tracer.accuracy import PILOTS, audit, quantiles, run_pilot, sample, separation, states_of
from tracer.integrate import advance, compile_kernel, prepare
from tracer.scenario import Output, Scenario
from tracer.status import Cause

WIDE = {"r_re": span(4.0, 9.0), "mlt_h": span(0.0, 24.0), "pitch_deg": span(5.0, 90.0)}


@pytest.fixture(scope="module")
def run() -> Scenario:
    return storm(population(count=300, **WIDE), population("electrons", "e-", count=300, draw="random", **WIDE))


def asking(run: Scenario, tolerance_re: float) -> Scenario:
    return replace(run, output=Output(every_min=0.0, tolerance_re=tolerance_re))


# ------------------------------------------------------------------------------------------------------ the measures


def test_quantiles_are_values_of_the_sample() -> None:
    apart = np.arange(1.0, 201.0)[::-1]
    found = quantiles(apart)
    assert (found.median, found.most, found.worst, found.count) == (100.0, 198.0, 200.0, 200)


def test_quantiles_tell_a_share_that_ended_elsewhere() -> None:
    apart = np.full(200, 1e-7)
    apart[:2] = np.inf
    found = quantiles(apart)
    assert (found.median, found.most, found.worst) == (1e-7, 1e-7, np.inf)  # one in a hundred may
    apart[2] = np.inf
    assert quantiles(apart).most == np.inf


def test_quantiles_of_one_particle() -> None:
    found = quantiles(np.array([3e-7]))
    assert (found.median, found.most, found.worst, found.count) == (3e-7, 3e-7, 3e-7, 1)


def ends(r: float = 5.0, turns: float = 1.25, cause: int = 0) -> np.ndarray:
    """One end state as the kernel gives it; only what is compared."""
    return np.array([[12.0, r, 6.0, 1.0, 90.0, cause, turns, np.nan, 10.0, 1.0]])


def test_separation_is_a_distance() -> None:
    assert separation(ends(), ends())[0] == 0.0
    assert separation(ends(5.0 + 3e-6), ends())[0] == pytest.approx(3e-6)
    assert separation(ends(turns=1.25 + 1e-6), ends())[0] == pytest.approx(5.0 * 2 * np.pi * 1e-6)
    both = separation(ends(5.0 + 3e-6, 1.25 + 4e-6 / (10 * np.pi)), ends())[0]
    assert both == pytest.approx(5e-6, rel=1e-4)


def test_a_lost_turn_and_another_cause_count() -> None:
    # the places are the same, the paths are not
    assert separation(ends(turns=2.25), ends(turns=1.25))[0] == pytest.approx(10 * np.pi)
    assert separation(ends(cause=Cause.OUTER), ends())[0] == np.inf


def test_sample_is_sorted_distinct_and_the_same_each_time(run: Scenario) -> None:
    drawn = sample(run, 50, 3)
    assert drawn.size == 50
    assert np.all(np.diff(drawn) > 0)
    assert drawn[0] >= 0
    assert drawn[-1] < run.count
    assert np.array_equal(drawn, sample(run, 50, 3))
    assert not np.array_equal(drawn, sample(run, 50, 4))


def test_sample_of_few_is_all_of_them(run: Scenario) -> None:
    assert np.array_equal(sample(run, run.count, 3), np.arange(run.count))
    assert np.array_equal(sample(run, 10**6, 3), np.arange(run.count))


def test_states_of_scattered_particles_are_those_of_the_run(run: Scenario) -> None:
    index = np.array([0, 7, 299, 300, 599])
    assert np.array_equal(states_of(run, index), prepare(run, 0, run.count).state[index])


# ------------------------------------------------------------------------------------------------------------ pilot


def test_local_tolerance_follows_the_target(run: Scenario) -> None:
    kernel = compile_kernel(run)
    found = [run_pilot(asking(run, target), kernel) for target in (1e-4, 1e-6, 1e-8)]
    local = np.array([pilot.local_tolerance for pilot in found])
    # errors go about as the local tolerance, so it falls by about a hundred for each hundred asked
    assert np.all(local[:-1] / local[1:] > 20.0)
    assert np.all(local[:-1] / local[1:] < 500.0)
    steps = np.array([pilot.steps for pilot in found])
    # order 8: a hundredth of the tolerance takes 100^(1/8) = 1.8 times the steps
    np.testing.assert_allclose(steps[1:] / steps[:-1], 100.0**0.125, rtol=0.35)


def test_steps_of_the_pilot_are_those_of_the_run(run: Scenario) -> None:
    kernel = compile_kernel(run)
    pilot = run_pilot(run, kernel)
    end, _ = advance(run, kernel, prepare(run, 0, run.count).state, pilot.local_tolerance, np.empty(0))
    assert pilot.steps == pytest.approx(np.mean(end[:, 8] + end[:, 9]), rel=0.1)


@pytest.mark.parametrize("target", [1e-4, 1e-6, 1e-8])
def test_the_target_is_met(run: Scenario, target: float) -> None:
    wanted = asking(run, target)
    kernel = compile_kernel(wanted)
    local = run_pilot(wanted, kernel).local_tolerance
    errors = audit(wanted, kernel, local)
    assert errors.count == PILOTS
    assert 0.0 < errors.median < errors.most <= errors.worst
    assert errors.most <= target
    assert errors.most > 1e-4 * target  # and not by wasting steps


def test_audit_agrees_with_a_run_of_all_at_a_far_finer_tolerance(run: Scenario) -> None:
    kernel = compile_kernel(run)
    state = prepare(run, 0, run.count).state
    kept, _ = advance(run, kernel, state, 1e-8, np.empty(0))
    finer, _ = advance(run, kernel, state, 1e-14, np.empty(0))
    whole, found = quantiles(separation(kept, finer)), audit(run, kernel, 1e-8)
    assert found.median == pytest.approx(whole.median, rel=0.5)
    assert whole.most / 4 < found.most < whole.most * 4


def test_a_run_of_one_particle_has_a_pilot(run: Scenario) -> None:
    alone = storm(population(count=1))
    kernel = compile_kernel(alone)
    pilot = run_pilot(alone, kernel)
    assert 0.0 < pilot.local_tolerance <= alone.output.tolerance_re
    assert audit(alone, kernel, pilot.local_tolerance).worst <= alone.output.tolerance_re


def test_particles_that_never_move_have_a_pilot() -> None:
    # all drawn inside the loss cone: no error to go by
    still = storm(population(count=8, pitch_deg=number(1.0)), loss_cone="stop")
    kernel = compile_kernel(still)
    pilot = run_pilot(still, kernel)
    assert 0.0 < pilot.local_tolerance <= still.output.tolerance_re
    assert pilot.steps == 0.0
    assert audit(still, kernel, pilot.local_tolerance).worst == 0.0
