"""Scrambled Sobol points by index, bit for bit those of ``scipy.stats.qmc.Sobol``, without the second that it takes
to load.

Direction numbers: Joe & Kuo (2008), SIAM J. Sci. Comput. 30, 2635, their published set for criterion D(6). Order of
the points: Antonov & Saleev (1979), USSR Comput. Math. Math. Phys. 19, 252. Scramble: a random lower triangular matrix
over {0, 1} and a random shift (Matousek 1998, J. Complexity 14, 527). The random numbers are taken from numpy's
generator in the order in which scipy takes them; a test holds both sequences equal.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from fields.units import Floats

BITS = 30  # scipy's default: 2^30 distinct points
BITS_LARGE = 52  # for more; the widest whose points a float64 holds exactly

# Dimension by dimension, from the second on: degree s of the primitive polynomial, its inner coefficients a as a
# binary number, the first s direction numbers m. The first dimension is van der Corput's sequence.
JOE_KUO = (
    (1, 0, (1,)),
    (2, 1, (1, 3)),
    (3, 1, (1, 3, 1)),
    (3, 2, (1, 1, 1)),
    (4, 1, (1, 1, 3, 3)),
    (4, 4, (1, 3, 5, 13)),
    (5, 2, (1, 1, 5, 5, 17)),
)
MOST_DIMENSIONS = 1 + len(JOE_KUO)

Words = NDArray[np.uint64]


def points(index: NDArray[np.int64], dimensions: int, seed: int, bits: int = BITS) -> Floats:
    """Points of the sequence with the scramble that `seed` gives.

    Parameters
    ----------
    index : ndarray of int, shape (n,)
        Each at least 0 and below ``2**bits``.
    dimensions : int
        0 to `MOST_DIMENSIONS`.
    seed : int
        Of scipy's argument ``rng``: a child of ``numpy.random.default_rng(seed)`` is drawn from.
    bits : int
        Binary digits of a coordinate, at most `BITS_LARGE`.

    Returns
    -------
    ndarray, shape (n, dimensions)
        In [0, 1).
    """
    if dimensions == 0 or index.size == 0:
        return np.empty((index.size, dimensions))
    shift, directions = scrambled(dimensions, seed, bits)
    place = index.astype(np.uint64)
    gray = place ^ (place >> np.uint64(1))
    found = np.empty((dimensions, index.size), dtype=np.uint64)
    found[:] = shift[:, np.newaxis]
    for digit in range(int(index.max()).bit_length()):
        chosen = (gray >> np.uint64(digit)) & np.uint64(1)
        found ^= chosen * directions[:, digit, np.newaxis]
    return np.asarray(found.T * 2.0**-bits)


@lru_cache(maxsize=64)
def scrambled(dimensions: int, seed: int, bits: int) -> tuple[Words, Words]:
    """Shift, shape (dimensions,), and scrambled direction numbers, shape (dimensions, bits), as integers of `bits`
    bits."""
    drawn = np.uint32 if bits <= 32 else np.uint64  # the width decides what the generator yields
    rng = np.random.default_rng(seed).spawn(1)[0]  # as scipy does
    shift = rng.integers(2, size=(dimensions, bits), dtype=drawn)
    matrix = np.tril(rng.integers(2, size=(dimensions, bits, bits), dtype=drawn))
    diagonal = np.arange(bits)
    matrix[:, diagonal, diagonal] = 1
    weight = np.uint64(1) << np.arange(bits, dtype=np.uint64)  # of each binary digit, the last first
    plain = (direction_numbers(dimensions, bits)[..., np.newaxis] & weight[::-1]) != 0  # digits, the first first
    mixed = np.einsum("dpk,djk->djp", matrix.astype(np.int64), plain.astype(np.int64)) % 2
    return shift.astype(np.uint64) @ weight, mixed.astype(np.uint64) @ weight[::-1]


def direction_numbers(dimensions: int, bits: int) -> Words:
    """Direction numbers as integers of `bits` bits, shape (dimensions, bits), by the recurrence of Joe & Kuo."""
    if dimensions > MOST_DIMENSIONS:
        raise ValueError(f"{dimensions} dimensions; at most {MOST_DIMENSIONS}")
    rows = [[1] * bits]
    for degree, inner, start in JOE_KUO[: dimensions - 1]:
        m = list(start[:bits])
        for k in range(degree, bits):
            value = m[k - degree] ^ (m[k - degree] << degree)
            for i in range(1, degree):
                value ^= ((inner >> (degree - 1 - i)) & 1) * (m[k - i] << i)
            m.append(value)
        rows.append(m)
    return np.array([[m << (bits - 1 - k) for k, m in enumerate(row)] for row in rows], dtype=np.uint64)
