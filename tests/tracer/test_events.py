"""Where and when particles end, what is saved on the way: against scipy's path and its roots."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import pytest
import storm_runs
from scipy.optimize import brentq
from small_runs import number, population, span
from storm_runs import FINE, Path, path_by_scipy, storm

import tracer
from fields.units import mlt_from_phi, phi_from_mlt
from tracer.integrate import advance, compile_kernel, prepare, run_chunk
from tracer.kernels.build import Kernel
from tracer.records import Chunk
from tracer.scenario import Domain, Output, Population, Quantity, Scenario
from tracer.status import Cause

FIELD = storm_runs.STORM
EVERYWHERE = {
    "r_re": span(4.0, 9.5),
    "mlt_h": span(0.0, 24.0),
    "energy_keV": span(1.0, 300.0, "log"),
    "pitch_deg": span(6.0, 90.0),
}


def both(count: int, **given: Any) -> tuple[Population, Population]:
    chosen = {"count": count, **EVERYWHERE, **given}
    return population("protons", "H+", **chosen), population("electrons", "e-", **chosen)


def traced(run: Scenario, tolerance: float = FINE) -> Chunk:
    return run_chunk(run, compile_kernel(run), 0, run.count, tolerance)


def grid(*values: float) -> Quantity:
    return Quantity("list", values)


# ---------------------------------------------------------------------------------------------- a storm against scipy


@dataclass(frozen=True)
class Traced:
    """A run by the kernel, and the paths of its particles by scipy."""

    run: Scenario
    kernel: Kernel
    chunk: Chunk
    paths: list[Path]


@pytest.fixture(scope="module", params=["forward", "backward"])
def case(request: pytest.FixtureRequest) -> Traced:
    backward = request.param == "backward"
    release = span(-4.0, 0.0) if backward else span(0.0, 4.0)
    domain = Domain(outer_re=10.0, inner_re=4.0)
    run = storm(*both(12, release_h=release), backward=backward, domain=domain, loss_cone="off")
    kernel = compile_kernel(run)
    state = prepare(run, 0, run.count).state
    return Traced(run, kernel, traced(run), [path_by_scipy(run, kernel, row) for row in state])


def first_end(path: Path, run: Scenario) -> tuple[float, Cause]:
    """When scipy's path first leaves the domain, and where."""
    outer = path.first(lambda r, phi: r - run.domain.outer_re)
    inner = path.first(lambda r, phi: run.domain.inner_re - r)
    ends = [(t, c) for t, c in ((outer, Cause.OUTER), (inner, Cause.INNER)) if np.isfinite(t)]
    return min(ends, key=lambda e: abs(e[0]), default=(run.end_h, Cause.DRIFTING))


def test_ends_are_those_of_scipy(case: Traced) -> None:
    seen = set()
    for i, path in enumerate(case.paths):
        time, cause = first_end(path, case.run)
        r, phi = path.at(time)
        end = {name: column[i] for name, column in case.chunk.end.items()}
        assert end["cause"] == cause
        assert end["time_h"] == pytest.approx(time, rel=0, abs=1e-9)
        assert end["r_re"] == pytest.approx(r, rel=0, abs=1e-8)
        assert wrapped(end["mlt_h"] - mlt_from_phi(phi)) == pytest.approx(0.0, abs=1e-8)
        assert np.isnan(end["loss_cone_h"])
        seen.add(cause)
    assert seen == {Cause.DRIFTING, Cause.OUTER, Cause.INNER}


def wrapped(hours: Any) -> Any:
    """A difference of local times, in [-12, 12)."""
    return (np.asarray(hours) + 12.0) % 24.0 - 12.0


def test_ends_stand_exactly_on_the_boundary_and_on_the_last_time(case: Traced) -> None:
    end, run = case.chunk.end, case.run
    assert np.all(end["r_re"][end["cause"] == Cause.OUTER] == run.domain.outer_re)
    assert np.all(end["r_re"][end["cause"] == Cause.INNER] == run.domain.inner_re)
    assert np.all(end["time_h"][end["cause"] == Cause.DRIFTING] == run.end_h)


def test_turns_are_those_of_the_unwrapped_angle(case: Traced) -> None:
    start = phi_from_mlt(case.chunk.particle["mlt_h"])
    for i, path in enumerate(case.paths):
        want = (path.at(case.chunk.end["time_h"][i])[1] - start[i]) / (2 * np.pi)
        assert case.chunk.end["turns"][i] == pytest.approx(want, rel=0, abs=1e-8)
    assert np.max(np.abs(case.chunk.end["turns"])) > 3.0


def test_saved_places_are_on_scipys_path(case: Traced) -> None:
    track, times = case.chunk.track, case.run.save_times_h
    for i, path in enumerate(case.paths):
        kept = np.isfinite(track["r_re"][i])
        want = path.at(times[kept]).T
        np.testing.assert_allclose(track["r_re"][i, kept], want[:, 0], rtol=0, atol=1e-8)
        away = wrapped(track["mlt_h"][i, kept] - mlt_from_phi(want[:, 1])) * np.pi / 12 * want[:, 0]
        np.testing.assert_allclose(away, 0.0, atol=1e-8)


def test_nothing_is_saved_before_release_and_after_the_end(case: Traced) -> None:
    times, sign = case.run.save_times_h, case.run.direction
    release, end = case.chunk.particle["release_h"], case.chunk.end["time_h"]
    moving = (sign * (times - release[:, None]) >= 0) & (sign * (times - end[:, None]) <= 0)
    assert not np.all(moving)
    for column in case.chunk.track.values():
        assert np.array_equal(np.isfinite(column), moving)


def test_saved_energy_and_pitch_follow_from_the_invariants(case: Traced) -> None:
    track, particle = case.chunk.track, case.chunk.particle
    for i in range(case.run.count):
        kept = np.isfinite(track["r_re"][i])
        species = case.run.species[particle["species"][i]]
        mu, k = particle["mu_MeV_per_G"][i], particle["K_re_sqrtG"][i]
        want = tracer.from_invariants(FIELD, species, mu, k, track["r_re"][i, kept], track["mlt_h"][i, kept])
        np.testing.assert_allclose(track["energy_keV"][i, kept], want.energy_keV, rtol=1e-12)
        np.testing.assert_allclose(track["pitch_deg"][i, kept], want.pitch_deg, rtol=1e-12)


def test_saved_times_hold_zero_and_the_last_hour_even_if_the_interval_does_not_divide() -> None:
    for backward, sign in ((False, 1.0), (True, -1.0)):
        run = storm(
            population(count=3, r_re=span(4.0, 5.0)), hours=2.0, backward=backward, output=Output(every_min=25.0)
        )
        assert run.save_times_h == pytest.approx(sign * np.array([0, 25, 50, 75, 100, 120]) / 60.0, abs=1e-12)
        assert (run.save_times_h[0], run.save_times_h[-1]) == (0.0, sign * 2.0)
        chunk = traced(run, 1e-9)
        assert np.all(chunk.end["cause"] == Cause.DRIFTING)
        for name, column in chunk.track.items():
            assert np.array_equal(column[:, -1], chunk.end[name])
            np.testing.assert_allclose(column[:, 0], chunk.particle[name], rtol=1e-12, atol=1e-12)


def test_release_at_a_saved_time_is_saved() -> None:
    place = {"r_re": number(6.0), "mlt_h": number(0.0), "energy_keV": number(30.0), "pitch_deg": number(60.0)}
    released = population(draw="grid", count=3, release_h=grid(0.0, 1.5, 2.0), **place)
    run = storm(released, hours=4.0, output=Output(every_min=30.0))
    chunk = traced(run)
    assert np.sum(np.isfinite(chunk.track["r_re"]), axis=1).tolist() == [9, 6, 5]
    for row, column in ((0, 0), (1, 3), (2, 4)):
        assert chunk.track["r_re"][row, column] == 6.0
        assert chunk.track["mlt_h"][row, column] == pytest.approx(0.0, abs=1e-12)


def test_release_at_the_last_hour_ends_where_it_starts() -> None:
    for backward, last in ((False, 4.0), (True, -4.0)):
        run = storm(population(count=4, release_h=number(last)), hours=4.0, backward=backward)
        chunk = traced(run)
        assert np.all(chunk.end["cause"] == Cause.DRIFTING)
        assert np.all(chunk.end["time_h"] == last)
        assert np.array_equal(chunk.end["r_re"], chunk.particle["r_re"])
        assert np.all(chunk.end["turns"] == 0.0)


# ---------------------------------------------------------------------------------------------------------- touches


@pytest.fixture(scope="module")
def orbits() -> Traced:
    """Closed orbits in a steady field: each has a farthest and a nearest point."""
    field = storm_runs.storm_field(storm_runs.steady(2.0))
    chosen = {"r_re": span(3.5, 5.0), "energy_keV": span(3.0, 300.0, "log")}
    run = storm(*both(12, **chosen), field=field, output=Output(every_min=0.0), loss_cone="off")
    kernel = compile_kernel(run)
    state = prepare(run, 0, run.count).state
    return Traced(run, kernel, traced(run), [path_by_scipy(run, kernel, row) for row in state])


def ends_with(orbits: Traced, i: int, tolerance: float, **given: Any) -> np.ndarray:
    """The end of one particle under other rules."""
    run = replace(orbits.run, **given)
    return advance(run, orbits.kernel, prepare(run, i, i + 1).state, tolerance, np.empty(0))[0][0]


DEPTH = (
    1e-6  # by which a path pokes through a limit or misses it, R_E or relative; the path is good to a hundredth of it
)
TOUCHED = 0.01  # h to which the time of so shallow a crossing is known


@pytest.mark.parametrize("tolerance", [FINE, 1e-10])
@pytest.mark.parametrize("side", ["outer", "inner"])
def test_a_touch_within_a_step_is_found_and_a_near_miss_is_none(orbits: Traced, side: str, tolerance: float) -> None:
    sign, cause = (1.0, Cause.OUTER) if side == "outer" else (-1.0, Cause.INNER)
    met = 0
    for i, path in enumerate(orbits.paths):
        top = path.first_top(lambda r, phi: sign * r)
        if top is None:
            continue
        time, extreme, hours = top[0], sign * top[1], 1.3 * top[0]
        limit = extreme - sign * DEPTH
        hit = ends_with(orbits, i, tolerance, domain=limits(side, limit), hours=hours)
        assert hit[5] == cause, i
        want = path.first(lambda r, phi, limit=limit: sign * (r - limit), until=time)
        assert hit[0] == pytest.approx(want, abs=TOUCHED)
        assert hit[1] == limit
        missed = ends_with(orbits, i, tolerance, domain=limits(side, extreme + sign * DEPTH), hours=hours)
        assert missed[5] == Cause.DRIFTING, i
        met += 1
    assert met >= 6


@pytest.mark.parametrize("depth", [1e-3, 1e-6, 1e-9])
def test_a_touch_is_found_wherever_in_the_step_it_lies(orbits: Traced, depth: float) -> None:
    # r = limit + depth - (x - top)^2, written as the interpolant f0 + x (f1 + (1 - x) f2)
    first_crossing = storm_runs.part(orbits.kernel, "crossing").first_crossing
    p, limit = (1.0, 0.0, 1.0, 1e-6), 8.0
    for top in np.linspace(0.0, 1.0, 101)[1:-1]:
        for which, sign in ((Cause.OUTER, 1.0), (Cause.INNER, -1.0)):
            start, end = (limit + sign * (depth - (x - top) ** 2) for x in (0.0, 1.0))
            if sign * (start - limit) >= 0.0:
                continue
            F = np.zeros(16)
            F[:3] = start, end - start, sign
            x = first_crossing(int(which), F, limit, limit, 1.0, p, orbits.kernel.constants)
            assert x == pytest.approx(top - np.sqrt(depth), abs=1e-9 + 1e-15 / np.sqrt(depth)), top
            F[0] -= 2.0 * sign * depth
            assert first_crossing(int(which), F, limit, limit, 1.0, p, orbits.kernel.constants) > 1.0


def limits(side: str, limit: float) -> Domain:
    return Domain(outer_re=limit) if side == "outer" else Domain(outer_re=50.0, inner_re=limit)


@dataclass(frozen=True)
class Cone:
    """The exact condition for one particle, by the line averages of the field."""

    run: Scenario
    row: np.ndarray

    def mirror(self, r: Any, phi: Any) -> np.ndarray:
        """B_m, nT."""
        return self.run.field.equatorial_field(r, phi) * (1.0 + self.run.field.lines.cot2_at(self.row[4], r, phi))

    def depth(self, r: Any, phi: Any) -> np.ndarray:
        """B_m / B_foot - 1."""
        return self.mirror(r, phi) / self.run.field.lines.foot_field(r, phi, self.run.domain.foot_re) - 1.0

    def foot_re(self, r: float, phi: float, depth: float) -> float:
        """The foot sphere for which the particle at the place given is so deep in the cone."""
        wanted = self.mirror(r, phi) / (1.0 + depth)
        return float(brentq(lambda foot: self.run.field.lines.foot_field(r, phi, foot) - wanted, 0.3, r, xtol=1e-15))


@pytest.mark.parametrize("tolerance", [FINE, 1e-10])
def test_a_brief_visit_to_the_loss_cone_is_found_and_a_near_miss_is_none(orbits: Traced, tolerance: float) -> None:
    met = 0
    for i, path in enumerate(orbits.paths):
        cone = Cone(orbits.run, prepare(orbits.run, i, i + 1).state[0])
        top = path.first_top(lambda r, phi: -r)  # deepest where nearest: the foot field hardly changes
        if top is None:
            continue
        for depth, cause in ((DEPTH, Cause.ATMOSPHERE), (-DEPTH, Cause.DRIFTING)):
            altitude = (cone.foot_re(*path.at(top[0]), depth) - 1.0) * 6371.2
            rules = {"domain": Domain(foot_altitude_km=altitude, inner_re=0.2), "hours": 1.3 * top[0]}
            flagged = ends_with(orbits, i, tolerance, loss_cone="flag", **rules)
            stopped = ends_with(orbits, i, tolerance, loss_cone="stop", **rules)
            assert (np.isfinite(flagged[7]), stopped[5]) == (cause == Cause.ATMOSPHERE, cause), i
            if cause == Cause.ATMOSPHERE:
                assert flagged[7] == stopped[7] == stopped[0] == pytest.approx(top[0], abs=0.1)
        met += 1
    assert met >= 6


# ------------------------------------------------------------------------------------------------ release on the limits


@pytest.mark.parametrize("backward", [False, True])
@pytest.mark.parametrize(("r", "outward"), [(10.0, True), (4.0, False)])
def test_release_on_a_boundary_ends_at_once_only_when_moving_out(r: float, outward: bool, backward: bool) -> None:
    place = {"r_re": number(r), "mlt_h": span(0.25, 23.25, n=24), "energy_keV": number(2.0), "pitch_deg": number(60.0)}
    domain = Domain(outer_re=10.0, inner_re=4.0)
    run = storm(population(draw="grid", count=24, **place), domain=domain, backward=backward)
    chunk = traced(run)
    mlt, first = chunk.particle["mlt_h"], -1e-9 if backward else 1e-9
    rate = tracer.drift_rate(FIELD, "H+", 2.0, 60.0, r, mlt, first).dr_re_per_h * run.direction
    leaving = rate > 0 if outward else rate < 0
    assert 6 <= np.sum(leaving) <= 18
    at_once = chunk.end["time_h"] == 0.0
    assert np.array_equal(at_once, leaving)
    assert np.all(chunk.end["cause"][leaving] == (Cause.OUTER if outward else Cause.INNER))
    assert np.all(chunk.end["r_re"][leaving] == r)
    assert np.all(np.isfinite(chunk.track["r_re"][:, 0]))  # released, so its first place is saved
    assert np.all(np.isnan(chunk.track["r_re"][leaving, 1:]))


# --------------------------------------------------------------------------------------------------------- loss cone


@pytest.fixture(scope="module")
def steep() -> Scenario:
    """Small pitch angles, carried inward: many enter the loss cone, some are drawn inside."""
    return storm(
        population(count=24, pitch_deg=span(2.0, 5.0), energy_keV=span(1.0, 30.0, "log")), output=Output(every_min=30.0)
    )


def test_loss_cone_times_are_roots_of_the_exact_condition(steep: Scenario) -> None:
    flag, stop = traced(steep), traced(replace(steep, loss_cone="stop"))
    kernel = compile_kernel(steep)
    state = prepare(steep, 0, steep.count).state
    entered = 0
    for i in range(steep.count):
        path = path_by_scipy(steep, kernel, state[i])
        depth = Cone(steep, state[i]).depth
        inside = depth(*state[i, :2]) >= 0
        at = 0.0 if inside else path.first(depth)
        left = path.first(lambda r, phi: r - steep.domain.outer_re)
        if not np.isfinite(at) or at > left:
            assert np.isnan(flag.end["loss_cone_h"][i])
            assert stop.end["cause"][i] != Cause.ATMOSPHERE
            continue
        assert flag.end["loss_cone_h"][i] == pytest.approx(at, abs=1e-8)
        assert stop.end["loss_cone_h"][i] == stop.end["time_h"][i] == pytest.approx(at, abs=1e-8)
        assert stop.end["cause"][i] == Cause.ATMOSPHERE
        assert stop.end["r_re"][i] == pytest.approx(path.at(at)[0], abs=1e-7)
        entered += not inside
    assert entered >= 5


def test_a_flag_changes_nothing_else(steep: Scenario) -> None:
    flag, off = traced(steep, 1e-9), traced(replace(steep, loss_cone="off"), 1e-9)
    assert np.any(np.isfinite(flag.end["loss_cone_h"]))
    assert np.all(np.isnan(off.end["loss_cone_h"]))
    for name in set(off.end) - {"loss_cone_h"}:
        assert np.array_equal(flag.end[name], off.end[name])
    for name, column in off.track.items():
        assert np.array_equal(column, flag.track[name], equal_nan=True)


def test_drawn_inside_the_loss_cone_ends_at_release(steep: Scenario) -> None:
    run = replace(
        steep, populations=(population(count=8, pitch_deg=number(1.5), release_h=span(0.0, 3.0)),), loss_cone="stop"
    )
    chunk = traced(run, 1e-9)
    assert np.all(chunk.end["cause"] == Cause.ATMOSPHERE)
    for name in ("r_re", "mlt_h"):
        np.testing.assert_allclose(chunk.end[name], chunk.particle[name], rtol=1e-14)
    assert np.array_equal(chunk.end["time_h"], chunk.particle["release_h"])
    assert np.array_equal(chunk.end["loss_cone_h"], chunk.particle["release_h"])
    flag = traced(replace(run, loss_cone="flag"), 1e-9)
    assert np.array_equal(flag.end["loss_cone_h"], chunk.particle["release_h"])
    assert not np.any(flag.end["cause"] == Cause.ATMOSPHERE)


# ---------------------------------------------------------------------------------------------------------- extremes


def test_no_numerical_failure_at_the_extremes() -> None:
    cold = {"energy_keV": number(1e-3), "pitch_deg": span(0.01, 90.0)}
    hot = {"energy_keV": number(1e4), "r_re": span(1.1, 2.0), "pitch_deg": span(0.01, 90.0)}
    run = storm(
        population("cold oxygen", "O+", count=8, **{**cold, "r_re": span(1.1, 9.9)}),
        population("cold electrons", "e-", count=8, **{**cold, "r_re": span(1.1, 9.9)}),
        population("hot electrons", "e-", count=4, **hot),
        population("hot protons", "H+", count=4, **hot),
        hours=6.0,
    )
    chunk = traced(run, 1e-8)
    assert set(np.unique(chunk.end["cause"])) <= {Cause.DRIFTING, Cause.OUTER, Cause.INNER}
    for name in set(chunk.end) - {"loss_cone_h"}:
        assert np.all(np.isfinite(chunk.end[name]))
    assert np.all(chunk.end["energy_keV"] > 0)
    assert np.all((chunk.end["pitch_deg"] > 0) & (chunk.end["pitch_deg"] <= 90.0))
    assert np.max(np.abs(chunk.end["turns"])) > 20


def test_cold_plasma_drifts_alike_whatever_it_is() -> None:
    cold = {"count": 12, "energy_keV": number(0.0), "pitch_deg": number(90.0), "r_re": span(2.0, 9.0)}
    run = storm(population("ions", "O+", **cold), population("electrons", "e-", **cold))
    chunk = traced(run, 1e-10)
    assert np.all(chunk.end["energy_keV"] == 0.0)
    assert np.all(chunk.end["pitch_deg"] == 90.0)
    for name in ("r_re", "mlt_h", "time_h", "cause"):
        assert np.array_equal(chunk.end[name][:12], chunk.end[name][12:])
    assert np.any(chunk.end["cause"] == Cause.OUTER)


def test_no_numerical_failure_in_an_ordinary_run() -> None:
    run = storm(
        *both(250, pitch_deg=span(1.0, 90.0), energy_keV=span(0.01, 1000.0, "log")), hours=24.0, loss_cone="stop"
    )
    causes = traced(run, 1e-7).end["cause"]
    assert set(np.unique(causes)) == {Cause.DRIFTING, Cause.OUTER, Cause.ATMOSPHERE}
