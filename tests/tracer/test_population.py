"""Draws against scipy and numpy: their sequences, their distributions, and cuts that change no bit."""

from __future__ import annotations

import itertools
import math

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats
from scipy.stats import qmc
from small_runs import number, population, scenario, span

from fields.errors import InputError
from tracer.population import initial_state as state
from tracer.population import initial_state_at, random_points, sobol_points, spaced
from tracer.scenario import Quantity

# A correct draw fails a test at this level once in a thousand; the seeds are fixed, so a pass stays a pass.
LEVEL = 1e-3

COLUMNS = ["population", "species", "charge_e", "mass_kg", "seed", "weight"]
COLUMNS += ["release_h", "r_re", "mlt_h", "energy_keV", "pitch_deg"]


def every_spacing(draw: str, count: int, seed: int = 11):
    return population(
        draw=draw,
        count=count,
        seed=seed,
        r_re=span(3.0, 9.0, "area"),
        energy_keV=span(0.001, 10000.0, "log"),
        pitch_deg=span(5.0, 90.0, "isotropic"),
        release_h=span(0.0, 6.0),
    )


def uniform_of(columns: dict[str, np.ndarray]) -> np.ndarray:
    """What a right draw makes uniform in the unit cube: the distribution functions, by formula."""
    cos = np.cos(np.radians(columns["pitch_deg"]))
    return np.column_stack(
        [
            (columns["r_re"] ** 2 - 9.0) / 72.0,
            np.mod(columns["mlt_h"] - 21.0, 24.0) / 6.0,
            np.log10(columns["energy_keV"] / 0.001) / 7.0,
            1.0 - cos / math.cos(math.radians(5.0)),
            columns["release_h"] / 6.0,
        ]
    )


@pytest.mark.parametrize("draw", ["sobol", "random"])
def test_each_quantity_has_its_distribution(draw):
    run = scenario(every_spacing(draw, 5000))
    u = uniform_of(state(run, 0, 5000))
    for column in u.T:
        assert stats.kstest(column, "uniform").pvalue > LEVEL  # scipy
        assert stats.chisquare(np.histogram(column, 50, (0.0, 1.0))[0]).pvalue > LEVEL
    assert np.abs(np.corrcoef(u.T)[np.triu_indices(5, 1)]).max() < 5 / math.sqrt(5000)


def test_sobol_fills_more_evenly_than_chance():
    run = scenario(every_spacing("sobol", 1024), every_spacing("random", 1024))
    sobol, random = (qmc.discrepancy(uniform_of(state(run, first, first + 1024))) for first in (0, 1024))
    assert sobol < random / 10  # scipy's centred discrepancy
    counts = np.histogram(uniform_of(state(run, 0, 1024))[:, 2], 1024, (0.0, 1.0))[0]
    assert np.count_nonzero(counts == 1) > 1015  # a digital net puts one point in each; log and back moves a few


@settings(max_examples=30, deadline=None)
@given(count=st.integers(1, 3000), dimensions=st.integers(1, 5), seed=st.integers(0, 2**63 - 1))
def test_sobol_is_scipys_sequence_cut_from_the_next_power_of_two(count, dimensions, seed):
    whole = qmc.Sobol(dimensions, scramble=True, rng=seed).random_base2((count - 1).bit_length())  # scipy
    ours = sobol_points(population(count=count, seed=seed), dimensions, np.arange(count))
    np.testing.assert_array_equal(ours, whole[:count])


def test_sobol_far_out_is_scipys_sequence():
    first, stop = 3_000_001, 3_000_200
    engine = qmc.Sobol(4, scramble=True, rng=5).fast_forward(first)
    ours = sobol_points(population(count=2**30, seed=5), 4, np.arange(first, stop))
    np.testing.assert_array_equal(ours, engine.random(stop - first))


def test_sobol_of_more_than_2_to_30_points_is_scipys_wider_sequence():
    ours = sobol_points(population(count=2**30 + 1, seed=5), 3, np.arange(1024))
    np.testing.assert_array_equal(ours, qmc.Sobol(3, scramble=True, rng=5, bits=52).random_base2(10))
    assert ours.max() < 1.0


@given(
    first=st.integers(0, 2000), size=st.integers(0, 200), dimensions=st.integers(1, 5), seed=st.integers(0, 2**63 - 1)
)
def test_random_is_numpys_default_generator(first, size, dimensions, seed):
    whole = np.random.default_rng(seed).random((first + size, dimensions))  # numpy
    ours = random_points(population(seed=seed), dimensions, np.arange(first, first + size))
    np.testing.assert_array_equal(ours, whole[first:])


@given(index=st.lists(st.integers(0, 500), max_size=40), dimensions=st.integers(1, 5))
def test_random_rows_in_any_order_are_numpys(index, dimensions):
    whole = np.random.default_rng(9).random((501, dimensions))  # numpy
    ours = random_points(population(seed=9), dimensions, np.array(index, dtype=np.int64))
    np.testing.assert_array_equal(ours, whole[index])


RUN = scenario(
    every_spacing("sobol", 100),
    population("electrons", "e-", draw="random", count=77, seed=3),
    population(
        "grid",
        draw="grid",
        count=3 * 4 * 2 * 3,
        r_re=span(4.0, 8.0, "area", 3),
        mlt_h=span(0.0, 24.0, n=4),
        energy_keV=Quantity("list", (1.0, 30.0)),
        pitch_deg=span(30.0, 90.0, "isotropic", 3),
    ),
    population(
        "fixed", "O+", count=5, r_re=number(5.0), mlt_h=number(24.0), energy_keV=number(1.0), pitch_deg=number(90)
    ),
)
WHOLE = state(RUN, 0, RUN.count)


@given(st.lists(st.integers(0, RUN.count), max_size=8))
def test_no_cut_changes_a_bit(cuts):
    edges = sorted({0, RUN.count, *cuts})
    parts = [state(RUN, a, b) for a, b in itertools.pairwise(edges)]
    for name, column in WHOLE.items():
        joined = np.concatenate([part[name] for part in parts])
        assert joined.dtype == column.dtype
        np.testing.assert_array_equal(joined, column)


@given(st.lists(st.integers(0, RUN.count - 1), max_size=30))
def test_scattered_particles_are_those_of_the_run(index):
    some = initial_state_at(RUN, np.array(index, dtype=np.int64))
    assert some.keys() == WHOLE.keys()
    for name, column in some.items():
        assert column.dtype == WHOLE[name].dtype
        np.testing.assert_array_equal(column, WHOLE[name][index])


@pytest.mark.parametrize("wrong", [-1, RUN.count])
def test_a_particle_that_does_not_exist_is_refused(wrong):
    with pytest.raises(ValueError, match=f"no particle {wrong} of 254"):
        initial_state_at(RUN, np.array([0, wrong]))


def test_columns_name_the_population():
    assert sorted(WHOLE) == sorted(COLUMNS)
    assert np.bincount(WHOLE["population"]).tolist() == [100, 77, 72, 5]
    assert [RUN.species[i].name for i in WHOLE["species"][[0, 100, 177, -1]]] == ["H+", "e-", "H+", "O+"]
    assert WHOLE["charge_e"][[0, 100]].tolist() == [1, -1]
    assert WHOLE["seed"][[0, 100]].tolist() == [11, 3]
    assert set(WHOLE["weight"]) == {1.0}
    assert WHOLE["mlt_h"][-1] == 0.0  # 24 h is midnight


def test_empty_and_wrong_slices():
    assert {c.size for c in state(RUN, 30, 30).values()} == {0}
    with pytest.raises(ValueError, match="particles 0 to 255 of 254"):
        state(RUN, 0, RUN.count + 1)


def test_the_same_seed_gives_populations_the_same_points():
    run = scenario(population("a", "H+"), population("b", "e-"), population("c", "H+", seed=8))
    energy = state(run, 0, 48)["energy_keV"].reshape(3, 16)
    np.testing.assert_array_equal(energy[0], energy[1])
    assert not np.any(energy[0] == energy[2])


def test_grid_is_a_product_with_the_last_quantity_fastest():
    cube = {k: v[177:249].reshape(3, 4, 2, 3) for k, v in WHOLE.items()}
    np.testing.assert_allclose(cube["r_re"][:, 0, 0, 0], [4.0, math.sqrt(40.0), 8.0], rtol=1e-15)  # even in r^2
    assert cube["mlt_h"][0, :, 0, 0].tolist() == [0.0, 6.0, 12.0, 18.0]  # midnight once
    assert cube["energy_keV"][0, 0, :, 0].tolist() == [1.0, 30.0]
    middle = math.degrees(math.acos(math.cos(math.radians(30.0)) / 2))
    np.testing.assert_allclose(cube["pitch_deg"][0, 0, 0], [30.0, middle, 90.0], rtol=1e-15)
    for axis, name in enumerate(("r_re", "mlt_h", "energy_keV", "pitch_deg")):
        assert np.all(np.ptp(cube[name], axis=tuple(i for i in range(4) if i != axis)) == 0)


def test_grid_through_midnight_holds_both_ends():
    run = scenario(
        population(
            draw="grid", count=4, r_re=number(5), mlt_h=span(22.0, 4.0, n=4), energy_keV=number(1), pitch_deg=number(90)
        )
    )
    assert state(run, 0, 4)["mlt_h"].tolist() == [22.0, 0.0, 2.0, 4.0]


def test_huge_grid_costs_its_slice_only():
    n = 10**5
    run = scenario(population(draw="grid", count=n**3, r_re=span(4, 8, n=n), mlt_h=span(0, 24, n=n),
                              energy_keV=span(1, 10, n=n), pitch_deg=number(90)))  # fmt: skip
    last = state(run, n**3 - 2, n**3)
    assert last["r_re"].tolist() == [8.0, 8.0]
    assert last["energy_keV"][1] == 10.0
    assert last["mlt_h"][0] == pytest.approx(24.0 - 24.0 / n, abs=1e-12)


def test_list_in_a_draw_is_refused():
    run = scenario(population(energy_keV=Quantity("list", (1.0, 2.0))))
    with pytest.raises(InputError, match=r"protons\.energy_keV: a list in a draw"):
        state(run, 0, 1)


RANGES = st.tuples(st.floats(1e-6, 90.0), st.floats(1e-6, 90.0)).filter(lambda ends: ends[0] < ends[1])


@given(RANGES, st.floats(0.0, 1.0), st.sampled_from(["linear", "area", "log", "isotropic"]))
def test_values_stay_in_their_range_and_ends_are_exact(ends, u, spacing):
    values = spaced(np.array([0.0, u, 1.0]), *ends, spacing)
    assert values[0] == ends[0]
    assert values[2] == ends[1]
    assert ends[0] <= values[1] <= ends[1]


@pytest.mark.parametrize(("begin", "end"), [(89.9, 90.0), (60.0, 90.0), (1e-4, 2e-4), (5.0, 90.0), (20.0, 70.0)])
def test_isotropic_keeps_its_digits(begin, end):
    with mpmath.workdps(40):
        low, high = (mpmath.cos(mpmath.radians(mpmath.mpf(a))) for a in (begin, end))
        for u in (0.1, 0.5, 0.9, 0.999999):
            exact = mpmath.degrees(mpmath.acos(low + (high - low) * mpmath.mpf(u)))
            ours = float(spaced(np.array([u]), begin, end, "isotropic")[0])
            assert abs(ours - exact) <= 4 * np.spacing(float(exact))  # mpmath; 4 units in the last place
