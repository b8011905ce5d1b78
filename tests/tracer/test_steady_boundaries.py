"""Stagnation points and boundary curves: what the tables hold, what is refused, and that nothing depends on threads."""

from __future__ import annotations

import importlib
from typing import Any

import numpy as np
import pytest
from invented_fields import Lopsided
from tolerances import bound

import fields
import tracer
from fields.drivers import Driver
from tracer import steady
from tracer.kernels.curves import contours, hamiltonian_of
from tracer.steady import Boundaries, CurveEnd, CurveKind, PointKind, Region
from tracer.steady.particles import rows

DIPOLE = fields.Dipole(b0_nT=30000.0)
SHIELDED = fields.compose(DIPOLE, [fields.Corotation(), fields.VollandStern(kp=4.0)])
LOPSIDED = fields.compose(DIPOLE, [fields.Corotation(), Lopsided(2.0, 0.25, 0.2, 0.7)])
NIGHT = (18.0, 6.0)
ENERGY, PITCH = np.array([0.1, 0.4, 2.0, 20.0])[:, None], np.array([20.0, 50.0, 90.0])


def usual(field: fields.Field = SHIELDED, species: str = "H+", **given: Any) -> Boundaries:
    return tracer.boundaries(field, species, ENERGY, PITCH, 6.6, 0.0, source_mlt_h=NIGHT, **given)


def tables(found: Boundaries) -> list[np.ndarray]:
    """Every array of the result."""
    parts = (found, found.points, found.curves)
    return [value for part in parts for value in vars(part).values() if isinstance(value, np.ndarray)]


def part(name: str) -> Any:
    """A module of the compiled search."""
    return importlib.import_module(f"{contours().__name__.rpartition('.')[0]}.{name}")


# ---------------------------------------------------------------------------------------------------------- the tables


def test_one_table_for_all_particles() -> None:
    found = usual()
    assert found.particles.shape == (4, 3) == found.mu_MeV_per_G.shape == found.K_re_sqrtG.shape
    assert found.complete.shape == (12,)
    assert found.complete.all()
    for table in (found.points, found.curves):
        assert np.all(np.diff(table.particle) >= 0)
    assert set(found.curves.particle) == set(range(12))
    assert np.array_equal(found.curves.first, np.append(0, np.cumsum(found.curves.count))[:-1])
    assert len(found.curves.r_re) == len(found.curves.mlt_h) == found.curves.count.sum()
    alone = tracer.boundaries(SHIELDED, "H+", 0.4, 50.0, 6.6, 0.0, source_mlt_h=NIGHT)
    mine = found.curves.particle == 4
    assert np.array_equal(alone.curves.hamiltonian_keV, found.curves.hamiltonian_keV[mine])
    for here, there in enumerate(np.flatnonzero(mine)):
        assert np.array_equal(alone.curves.path(here), found.curves.path(there))
    assert np.array_equal(alone.points.r_re, found.points.r_re[found.points.particle == 4])


def test_particles_by_their_invariants() -> None:
    found = usual()
    again = steady.boundaries_from_invariants(SHIELDED, "H+", found.mu_MeV_per_G, found.K_re_sqrtG, source_mlt_h=NIGHT)
    for one, other in zip(tables(found), tables(again), strict=True):
        np.testing.assert_allclose(one, other, rtol=bound("closed form"), atol=bound("closed form"))


@pytest.mark.parametrize("threads", [2, 5])
def test_threads_change_no_bit(threads: int) -> None:
    one, many = usual(threads=1), usual(threads=threads)
    for a, b in zip(tables(one), tables(many), strict=True):
        assert a.tobytes() == b.tobytes()
    r, mlt = np.linspace(1.1, 9.9, 20)[:, None], np.linspace(0.0, 23.0, 24)
    assert np.array_equal(steady.classify(one, r, mlt, threads=1), steady.classify(many, r, mlt, threads=threads))


def test_no_particle_at_all() -> None:
    found = tracer.boundaries(SHIELDED, "H+", np.empty(0), 90.0, 6.6, 0.0)
    assert found.complete.size == found.points.particle.size == found.curves.particle.size == 0
    assert steady.classify(found, [3.0, 4.0], 0.0).shape == (0, 2)


@pytest.mark.parametrize("field", [SHIELDED, LOPSIDED], ids=["shielded", "lopsided"])
@pytest.mark.parametrize("species", ["e-", "H+"])
def test_points_of_a_curve_stand_in_the_order_of_the_drift(field: fields.Field, species: str) -> None:
    found = usual(field, species)
    curves, mu, k = found.curves, found.mu_MeV_per_G.ravel(), found.K_re_sqrtG.ravel()
    for row, i in enumerate(curves.particle):
        r, mlt = curves.path(row)
        there = tracer.from_invariants(field, species, mu[i], k[i], r[1:-1], mlt[1:-1])
        rate = tracer.drift_rate(field, species, there.energy_keV, there.pitch_deg, r[1:-1], mlt[1:-1])
        east = np.unwrap(mlt, period=24.0)
        along = rate.dr_re_per_h * (r[2:] - r[:-2]) + r[1:-1] ** 2 * rate.dmlt_per_h * (east[2:] - east[:-2]) * 0.0685
        assert np.all(along > 0.0)  # 0.0685 is (pi / 12)^2


@pytest.mark.parametrize("field", [SHIELDED, LOPSIDED], ids=["shielded", "lopsided"])
def test_curves_end_where_they_say(field: fields.Field) -> None:
    found = usual(field, inner_re=1.5, outer_re=9.0)
    curves, points = found.curves, found.points
    seen = set()
    for row in range(len(curves.kind)):
        r, mlt = curves.path(row)
        for what, point, at in (
            (curves.begins[row], curves.begin_point[row], 0),
            (curves.ends[row], curves.end_point[row], -1),
        ):
            seen.add(CurveEnd(what))
            assert (point >= 0) == (what == CurveEnd.POINT)
            if point >= 0:
                assert r[at] == pytest.approx(points.r_re[point], rel=1e-14)
                assert (mlt[at] - points.mlt_h[point] + 12.0) % 24.0 - 12.0 == pytest.approx(0.0, abs=1e-12)
                assert points.particle[point] == curves.particle[row]
                assert points.hamiltonian_keV[point] == pytest.approx(curves.hamiltonian_keV[row], rel=1e-12)
            if what == CurveEnd.OUTER:
                assert r[at] == pytest.approx(9.0, rel=1e-14)
            if what == CurveEnd.INNER:
                assert r[at] == pytest.approx(1.5, rel=1e-14)
        touches = curves.kind[row] in (CurveKind.OUTER_TOUCH, CurveKind.INNER_TOUCH)
        assert touches == (CurveEnd.TOUCH in (curves.begins[row], curves.ends[row]))
        edge = {CurveKind.OUTER_TOUCH: 9.0, CurveKind.INNER_TOUCH: 1.5}.get(CurveKind(curves.kind[row]))
        if edge is not None:
            at = 0 if curves.begins[row] == CurveEnd.TOUCH else -1
            assert r[at] == pytest.approx(edge, rel=1e-14)
            beside = 1 if at == 0 else -2
            east = (mlt[beside] - mlt[at] + 12.0) % 24.0 - 12.0
            assert abs(r[beside] / r[at] - 1.0) < 0.1 * abs(east) * np.pi / 12.0  # it runs along the boundary
    assert CurveEnd.LOST not in seen
    assert {CurveEnd.POINT, CurveEnd.OUTER} <= seen


def test_curves_are_dense_enough_to_draw() -> None:
    found = usual()
    for row in range(len(found.curves.kind)):
        points = found.curves.place[found.curves.first[row] :][: found.curves.count[row]]
        step = np.diff(points, axis=0)
        length = np.hypot(*step.T)
        turn = np.abs(np.diff(np.unwrap(np.arctan2(step[:, 1], step[:, 0]))))
        assert np.max(length) <= 0.021  # 2 % of r
        assert np.max(turn[1:-1], initial=0.0) < 0.15  # 8 degrees


# ------------------------------------------------------------------------------------------------- particular fields


def test_a_source_sector_has_edges_where_the_drift_enters() -> None:
    found = tracer.boundaries(SHIELDED, "e-", 5.0, 60.0, 6.6, 0.0, source_mlt_h=(21.0, 15.0))
    edges = np.flatnonzero(found.curves.kind == CurveKind.SOURCE_EDGE)
    assert len(edges) == 1  # at 15 h local time the drift leaves
    r, mlt = found.curves.path(edges[0])
    assert (r[0], mlt[0]) == (pytest.approx(10.0), pytest.approx(21.0))
    beside = {found.curves.higher[edges[0]], found.curves.lower[edges[0]]}
    assert beside == {Region.OPEN_SOURCE, Region.OPEN_ELSEWHERE}
    everywhere = tracer.boundaries(SHIELDED, "e-", 5.0, 60.0, 6.6, 0.0)
    assert CurveKind.SOURCE_EDGE not in everywhere.curves.kind
    assert Region.OPEN_ELSEWHERE not in steady.classify(everywhere, np.linspace(2.0, 10.0, 30), 3.0)


@pytest.mark.parametrize("folds", [2, 3])
def test_saddles_of_one_level_are_joined(folds: int) -> None:
    # -C/r + b r^2 cos(2 phi), or c r^2 sin(3 phi): saddles at r^3 = C / (2 b), the same all round
    model = Lopsided(0.0, 0.4) if folds == 2 else Lopsided(0.0, 0.0, 0.4)
    found = tracer.boundaries(
        fields.compose(DIPOLE, [fields.Corotation(potential_kV=90.0), model]), "H+", 0.0, 90, 5, 0
    )
    assert list(found.points.kind) == [PointKind.SADDLE] * folds
    np.testing.assert_allclose(found.points.r_re, (90.0 / 0.8) ** (1 / 3), rtol=bound("closed form"))
    curves = found.curves
    between = np.flatnonzero((curves.begin_point >= 0) & (curves.end_point >= 0))
    assert len(between) == folds  # each once, though it leaves one saddle and enters another
    assert sorted(curves.begin_point[between]) == sorted(curves.end_point[between]) == list(range(folds))
    assert np.all(curves.begin_point[between] != curves.end_point[between])
    assert np.count_nonzero(curves.kind == CurveKind.SEPARATRIX) == 3 * folds
    assert found.complete.all()


def test_the_same_all_round() -> None:
    found = tracer.boundaries(fields.compose(DIPOLE, [fields.Corotation()]), "H+", [0.0, 0.5, 30.0], 90.0, 6.6, 0.0)
    assert found.same_all_round.all()
    assert found.complete.all()
    assert found.points.particle.size == found.curves.particle.size == 0
    assert np.all(steady.classify(found, [1.02, 3.0, 10.0], [0.0, 7.0, 19.0]) == Region.CLOSED_AROUND)


def test_nothing_moves_without_a_field() -> None:
    found = tracer.boundaries(fields.compose(DIPOLE), "H+", 0.0, 90.0, 6.6, 0.0)
    assert found.same_all_round.all()
    assert np.all(steady.classify(found, [2.0, 9.0], 3.0) == Region.UNDECIDED)


KP = Driver("series:kp", np.array([0.0, 3.0, 6.0]), np.array([2.0, 6.0, 4.0]), np.array([0.0, 0.0, 0.25]), 12.0)


@pytest.mark.parametrize(("time", "kp"), [(1.0, 2.0), (3.0, 6.0), (8.0, 4.5), (12.0, 5.5)])
def test_a_history_is_held_at_its_instant(time: float, kp: float) -> None:
    varying = fields.compose(DIPOLE, [fields.Corotation(), fields.VollandStern(kp=KP)])
    held = fields.compose(DIPOLE, [fields.Corotation(), fields.VollandStern(kp=kp)])
    one = tracer.boundaries(varying, "e-", 5.0, 90.0, 6.6, 0.0, time)
    other = tracer.boundaries(held, "e-", 5.0, 90.0, 6.6, 0.0)
    np.testing.assert_allclose(one.points.r_re, other.points.r_re, rtol=bound("closed form"))
    np.testing.assert_allclose(one.curves.hamiltonian_keV, other.curves.hamiltonian_keV, rtol=bound("closed form"))


def test_each_particle_has_its_own_instant() -> None:
    field = fields.compose(DIPOLE, [fields.Corotation(), fields.VollandStern(kp=KP)])
    times = np.array([1.0, 4.0, 8.0])
    found = tracer.boundaries(field, "e-", 0.0, 90.0, 6.6, 0.0, times)
    one_by_one = [tracer.boundaries(field, "e-", 0.0, 90.0, 6.6, 0.0, t).points.r_re[0] for t in times]
    assert np.array_equal(found.points.r_re, one_by_one)


# ------------------------------------------------------------------------------------------------------- what can fail


def test_the_index_theorem_misses_a_point() -> None:
    found = tracer.boundaries(LOPSIDED, "H+", 0.3, 90.0, 6.6, 0.0)
    hamiltonian, balanced = hamiltonian_of(LOPSIDED), part("stationary").balanced
    problem = (*hamiltonian.addresses, hamiltonian.constants, rows(found.particles, hamiltonian)[0], np.empty(4))
    count, circles = len(found.points.kind), found.circles[:, 1:].copy()
    assert count > 2
    table = np.zeros((count, 8))
    table[:, 3] = found.points.kind
    assert balanced(table, count, circles, len(circles), problem)
    assert not balanced(table, count - 1, circles, len(circles), problem)
    rising = np.flatnonzero(circles[:, 3] > 0.0)
    assert not balanced(table, count, np.delete(circles, rising[0], axis=0), len(circles) - 1, problem)


BAD = [
    ({"species": "H"}, 'species = "H": unknown species; did you mean H+'),
    ({"energy_keV": -1.0}, "energy_keV = -1.0: not a possible value; a number from 0"),
    ({"pitch_deg": 0.0}, "pitch_deg = 0.0: not a possible value; a number above 0 up to 90"),
    ({"r_re": np.inf}, "r_re = inf: not a possible value; a number above 0"),
    ({"time_h": np.nan}, "time_h = nan: not a possible value; a finite number"),
    ({"inner_re": 10.0}, "outer_re = 10.0: not a possible value; a number above 10"),
    ({"outer_re": np.inf}, "outer_re = inf: not a possible value; a number above 1.02"),
    (
        {"source_mlt_h": (3.0, 3.0)},
        "source_mlt_h = [3.0, 3.0]: a source sector without width; two local times, eastward",
    ),
    ({"source_mlt_h": (3.0, 25.0)}, "source_mlt_h = 25.0: not a possible value; a number from 0 up to 24"),
]


@pytest.mark.parametrize(("given", "line"), BAD, ids=[next(iter(given)) for given, _ in BAD])
@pytest.mark.parametrize("function", [tracer.boundaries, tracer.regions], ids=["boundaries", "regions"])
def test_bad_input_is_one_line(function: Any, given: dict[str, Any], line: str) -> None:
    usual: dict[str, Any] = {"species": "H+", "energy_keV": 1.0, "pitch_deg": 90.0, "r_re": 5.0, "mlt_h": 0.0}
    with pytest.raises(tracer.InputError) as caught:
        function(SHIELDED, **{**usual, **given})
    if "r_re" not in given or function is tracer.boundaries:
        assert str(caught.value).startswith(f"driftrose: {line}")


def test_a_time_outside_a_history_is_refused() -> None:
    field = fields.compose(DIPOLE, [fields.Corotation(), fields.VollandStern(kp=KP)])
    with pytest.raises(tracer.InputError, match="series:kp: asked outside its cover 0 to 12 h"):
        tracer.boundaries(field, "H+", 1.0, 90.0, 6.6, 0.0, 12.5)


@pytest.mark.parametrize("place", [(1.0, 0.0), (10.5, 0.0), (np.nan, 0.0), (5.0, np.inf)])
def test_a_place_outside_the_domain_is_refused(place: tuple[float, float]) -> None:
    with pytest.raises(tracer.InputError, match="not a possible value"):
        steady.classify(usual(), *place)
    with pytest.raises(tracer.InputError, match="not a possible value"):
        tracer.regions(SHIELDED, "H+", 1.0, 90.0, *place)
