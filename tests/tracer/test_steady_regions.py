"""Regions of places: by the curves, and by following each place's own level curve, which knows nothing of them."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from invented_fields import Lopsided
from tolerances import bound

import fields
import tracer
from tracer import steady
from tracer.kernels.source import regions as compiled
from tracer.steady import CurveKind, PointKind, Region

DIPOLE = fields.Dipole(b0_nT=30000.0)
SHIELDED = fields.compose(DIPOLE, [fields.Corotation(), fields.VollandStern(kp=4.0)])


def steps(lowest: int, highest: int, step: float) -> st.SearchStrategy[float]:
    """Multiples of a step: with zero and with symmetric fields among them, without fields of 1e-300 kV."""
    return st.integers(lowest, highest).map(lambda n: n * step)


models = st.one_of(
    st.builds(lambda e0: fields.Uniform(e0_mV_per_m=e0), steps(-1000, 1000, 1e-3)),
    st.builds(
        lambda amplitude, phi0: fields.VollandStern(gamma=2.0, amplitude_kV=amplitude, phi0_deg=phi0),
        steps(0, 300, 0.01),
        steps(-180, 180, 1.0),
    ),
    st.builds(Lopsided, steps(-60, 60, 0.1), steps(-12, 12, 0.05), steps(-12, 12, 0.05), steps(-30, 30, 0.1)),
)


@given(
    model=models,
    species=st.sampled_from(["e-", "H+", "O+", "He++"]),
    outer=st.floats(5.0, 12.0),
    inner=st.floats(1.02, 2.0),
    source=st.tuples(st.integers(0, 2400), st.integers(50, 2350)),  # hundredths of an hour
    seed=st.integers(0, 10**6),
)
@settings(max_examples=60, deadline=None)
# two curves closer than their points' sagitta; a stationary point a hair's breadth from the boundary
@example(
    model=fields.VollandStern(gamma=2.0, amplitude_kV=0.016550378097829065, phi0_deg=-19.373291335178294),
    species="e-",
    outer=11.6645418523832,
    inner=1.8236729642345628,
    source=(528, 1143),
    seed=0,
)
def test_curves_and_single_paths_agree(
    model: Any, species: str, outer: float, inner: float, source: tuple[int, int], seed: int
) -> None:
    field = fields.compose(DIPOLE, [fields.Corotation(), model])
    rng = np.random.default_rng(seed)
    count, places = 6, 60
    energy, pitch = 10.0 ** rng.uniform(-2.0, 2.5, count), rng.uniform(5.0, 90.0, count)
    energy[0], pitch[0] = 0.0, 90.0
    where = rng.uniform(inner, outer, count), rng.uniform(0.0, 24.0, count)
    domain: dict[str, Any] = {
        "outer_re": outer,
        "inner_re": inner,
        "source_mlt_h": (source[0] / 100.0, sum(source) % 2400 / 100.0),
    }
    found = tracer.boundaries(field, species, energy, pitch, *where, **domain)
    assert np.all(found.complete)
    assert Region.UNDECIDED not in np.concatenate([found.curves.higher, found.curves.lower])
    r, mlt = rng.uniform(inner, outer, places), rng.uniform(0.0, 24.0, places)
    by_curves = steady.classify(found, r, mlt)
    there = tracer.from_invariants(field, species, found.mu_MeV_per_G[:, None], found.K_re_sqrtG[:, None], r, mlt)
    alone = tracer.regions(field, species, there.energy_keV, there.pitch_deg, r, mlt, **domain)
    assert np.array_equal(by_curves, alone.region)
    # without trust in the curves every place is followed by itself
    doubtful = replace(found, complete=np.zeros_like(found.complete))
    assert np.array_equal(steady.classify(doubtful, r, mlt), by_curves)


@pytest.mark.parametrize("species", ["e-", "H+"])
def test_a_path_keeps_its_energy_up_to_its_entry(species: str) -> None:
    r, mlt = np.linspace(2.0, 10.0, 33)[:, None], np.linspace(0.3, 23.3, 24)
    energy = 2.0
    found = tracer.regions(SHIELDED, species, energy, 60.0, r, mlt, source_mlt_h=(20.0, 4.0))
    opened = np.isin(found.region, (Region.OPEN_SOURCE, Region.OPEN_ELSEWHERE))
    assert np.array_equal(opened, np.isfinite(found.entry_mlt_h))
    assert 100 < opened.sum() < opened.size
    inside = (found.entry_mlt_h[opened] - 20.0) % 24.0 <= 8.0
    assert np.array_equal(inside, found.region[opened] == Region.OPEN_SOURCE)
    wide_r, wide_mlt = (np.broadcast_to(a, opened.shape)[opened] for a in (r, mlt))
    start = tracer.invariants(SHIELDED, species, energy, 60.0, wide_r, wide_mlt)
    entry = found.entry_mlt_h[opened]
    there = tracer.from_invariants(SHIELDED, species, start.mu_MeV_per_G, start.K_re_sqrtG, 10.0, entry)
    first = tracer.hamiltonian_keV(SHIELDED, species, there.energy_keV, there.pitch_deg, 10.0, entry)
    here = tracer.hamiltonian_keV(SHIELDED, species, energy, 60.0, wide_r, wide_mlt)
    np.testing.assert_allclose(first, here, rtol=bound("closed form"), atol=bound("closed form"))
    rate = tracer.drift_rate(SHIELDED, species, there.energy_keV, there.pitch_deg, 10.0, entry)
    assert np.all(rate.dr_re_per_h < 0.0)


def test_on_the_outer_boundary() -> None:
    # cold plasma comes in before midnight and leaves after noon
    found = tracer.regions(SHIELDED, "H+", 0.0, 90.0, 10.0, [22.0, 14.0], source_mlt_h=(18.0, 24.0))
    assert found.region[0] == Region.OPEN_SOURCE
    assert found.entry_mlt_h[0] == pytest.approx(22.0, abs=1e-12)
    assert found.entry_mlt_h[1] != pytest.approx(14.0, abs=0.1)


def test_beside_the_curves() -> None:
    # a hair's breadth on either side of a curve lies what the curve says
    found = tracer.boundaries(SHIELDED, "H+", 0.3, 90.0, 6.6, 0.0, source_mlt_h=(20.0, 4.0))
    curves = found.curves
    for row in range(len(curves.kind)):
        r, mlt = (values[curves.count[row] // 2] for values in curves.path(row))
        for off in (1e-5, 1e-7):
            there = tracer.from_invariants(
                SHIELDED, "H+", found.mu_MeV_per_G, found.K_re_sqrtG, [r - off, r + off], mlt
            )
            h = tracer.hamiltonian_keV(SHIELDED, "H+", there.energy_keV, there.pitch_deg, [r - off, r + off], mlt)
            above = h > curves.hamiltonian_keV[row]
            assert above[0] != above[1]
            want = np.where(above, curves.higher[row], curves.lower[row])
            assert np.array_equal(steady.classify(found, [r - off, r + off], mlt), want)


def test_close_to_an_extremum_every_path_is_closed() -> None:
    found = tracer.boundaries(SHIELDED, "H+", 0.3, 90.0, 6.6, 0.0)
    (row,) = np.flatnonzero(found.points.kind == PointKind.MINIMUM)
    r, mlt = found.points.r_re[row], found.points.mlt_h[row]
    for off in (1e-2, 1e-4, 1e-6, 1e-8, 0.0):
        assert steady.classify(found, r + off, mlt) == Region.CLOSED_APART


def test_regions_meet_only_at_curves() -> None:
    # along a circle the region changes exactly where a curve that separates crosses it
    found = tracer.boundaries(SHIELDED, "H+", 0.3, 90.0, 6.6, 0.0, source_mlt_h=(20.0, 4.0))
    mlt = np.linspace(0.0, 24.0, 4000, endpoint=False)
    for radius in (2.1, 3.0, 5.5, 8.0):
        region = steady.classify(found, radius, mlt)
        changes = np.count_nonzero(region != np.roll(region, 1))
        crossings = 0
        for row in range(len(found.curves.kind)):
            if found.curves.higher[row] != found.curves.lower[row]:
                r = found.curves.path(row)[0]
                crossings += np.count_nonzero((r[:-1] < radius) != (r[1:] < radius))
        assert changes == crossings


def test_the_plasmapause_is_the_zero_energy_boundary() -> None:
    found = tracer.boundaries(SHIELDED, "e-", 0.0, 90.0, 6.6, 0.0)
    ions = tracer.boundaries(SHIELDED, "O+", 0.0, 90.0, 2.0, 9.0)
    np.testing.assert_allclose(found.points.r_re, ions.points.r_re, rtol=bound("closed form"))
    r, mlt = np.linspace(1.5, 9.5, 40)[:, None], np.arange(24.0)
    assert np.array_equal(steady.classify(found, r, mlt), steady.classify(ions, r, mlt))
    assert set(found.curves.kind) == {CurveKind.SEPARATRIX, CurveKind.INNER_TOUCH}


def test_at_the_ends_of_the_source_sector() -> None:
    # both ends belong to it, as of `tracer.access_plan.Sector`
    found = tracer.regions(SHIELDED, "H+", 0.0, 90.0, 10.0, [20.0, 4.0, 19.99, 4.01], source_mlt_h=(20.0, 4.0))
    entering = np.abs(found.entry_mlt_h - [20.0, 4.0, 19.99, 4.01]) < 1e-9
    assert entering.all()
    assert list(found.region == Region.OPEN_SOURCE) == [True, True, False, False]


def test_every_region_has_its_words() -> None:
    assert all(region.sentence and region.word == region.name.lower() for region in Region)
    assert len({region.sentence for region in Region}) == len(Region)
    assert {region.name: getattr(compiled, region.name) for region in Region} == dict(Region.__members__)
