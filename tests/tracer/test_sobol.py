"""The Sobol sequence against scipy's, bit for bit."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.stats import qmc

from tracer.sobol import BITS, BITS_LARGE, MOST_DIMENSIONS, direction_numbers, points


@pytest.mark.parametrize("dimensions", range(1, MOST_DIMENSIONS + 1))
def test_unscrambled_points_are_scipys(dimensions: int) -> None:
    theirs = qmc.Sobol(dimensions, scramble=False).random_base2(12)  # scipy, with the numbers of Joe & Kuo (2008)
    index = np.arange(2**12, dtype=np.uint64)
    words = np.zeros((index.size, dimensions), dtype=np.uint64)
    for digit, column in enumerate(direction_numbers(dimensions, BITS).T):
        words ^= (((index ^ (index >> np.uint64(1))) >> np.uint64(digit)) & np.uint64(1))[:, np.newaxis] * column
    np.testing.assert_array_equal(words * 2.0**-BITS, theirs)


@settings(max_examples=60, deadline=None)
@given(
    seed=st.integers(0, 2**128 - 1),
    dimensions=st.integers(1, MOST_DIMENSIONS),
    power=st.integers(0, 11),
    bits=st.one_of(st.just(BITS), st.integers(12, BITS_LARGE)),
)
def test_scrambled_points_are_scipys(seed: int, dimensions: int, power: int, bits: int) -> None:
    theirs = qmc.Sobol(dimensions, scramble=True, bits=bits, rng=seed).random_base2(power)  # scipy
    np.testing.assert_array_equal(points(np.arange(2**power), dimensions, seed, bits), theirs)


@pytest.mark.parametrize(
    ("first", "bits"),
    [(2**20 - 100, BITS), (2**20 + 12_345, BITS), (2**24 - 50, BITS), (2**24 - 100, 24), (2**22 - 7, 31)],
)
def test_far_points_are_scipys(first: int, bits: int) -> None:
    engine = qmc.Sobol(5, scramble=True, bits=bits, rng=77).fast_forward(first)  # scipy
    np.testing.assert_array_equal(points(np.arange(first, first + 100), 5, 77, bits), engine.random(100))


def test_the_wider_sequence_holds_beyond_scipys_fast_forward() -> None:
    """scipy 1.17 cannot go far at 52 bits; its next point differs by one direction number from the one before."""
    far = np.array([2**40 - 1, 2**40, 2**40 + 1])  # the Gray code flips digit 40, then digit 0
    words = (points(far, 4, 3, BITS_LARGE) * 2.0**BITS_LARGE).astype(np.uint64)
    near = (points(np.array([0, 1]), 4, 3, BITS_LARGE) * 2.0**BITS_LARGE).astype(np.uint64)
    np.testing.assert_array_equal(words[1] ^ words[2], near[0] ^ near[1])
    engine = qmc.Sobol(4, scramble=True, bits=BITS_LARGE, rng=3)
    np.testing.assert_array_equal(words[0] ^ words[1], engine._sv[:, 40])


@given(st.lists(st.integers(0, 2**30 - 1), max_size=30))
def test_points_depend_on_their_index_alone(index: list[int]) -> None:
    together = points(np.array(index, dtype=np.int64), 5, 1)
    alone = [points(np.array([i]), 5, 1)[0] for i in index]
    np.testing.assert_array_equal(together, np.array(alone).reshape(-1, 5))


def test_nothing_asked_nothing_given() -> None:
    assert points(np.arange(0), 3, 1).shape == (0, 3)
    assert points(np.arange(4), 0, 1).shape == (4, 0)


def test_more_dimensions_than_are_tabled_are_refused() -> None:
    with pytest.raises(ValueError, match="9 dimensions; at most 8"):
        points(np.arange(4), MOST_DIMENSIONS + 1, 1)
