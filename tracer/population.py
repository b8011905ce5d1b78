"""The initial state of the particles: draws and grids. Random numbers are made here and nowhere else.

A particle's numbers depend on its population and its index in it alone, so the same bits come out however a run is
cut into chunks, and memory is bounded by what is asked for.

Seeds are used as given. Two populations with the same seed, count and draw therefore share their points of the unit
cube (species compared particle by particle is one use); give them different seeds for independent samples.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from fields.errors import InputError
from fields.units import Floats
from tracer import sobol
from tracer.records import PARTICLE
from tracer.scenario import Population, Scenario
from tracer.spacing import ends, grid_points, spaced

COORDINATES = ("r_re", "mlt_h", "energy_keV", "pitch_deg", "release_h")  # the order of Population.quantities()

Index = NDArray[np.int64]

INVARIANTS = ("mu_MeV_per_G", "K_re_sqrtG")  # these need the field
DTYPES = {column.name: np.dtype(column.dtype) for column in PARTICLE}


def initial_state(scenario: Scenario, first: int, stop: int) -> dict[str, np.ndarray]:
    """Particles `first` to `stop` - 1 of a run, populations in file order; see `initial_state_at`."""
    if not 0 <= first <= stop <= scenario.count:
        raise ValueError(f"particles {first} to {stop} of {scenario.count}")
    return initial_state_at(scenario, np.arange(first, stop))


def initial_state_at(scenario: Scenario, index: Index) -> dict[str, np.ndarray]:
    """Scattered particles of a run, in user units.

    Parameters
    ----------
    scenario : Scenario
    index : ndarray of int, shape (n,)
        Particle numbers, in any order; ``0 <= index < scenario.count``.

    Returns
    -------
    dict of str to ndarray, shape (n,)
        The columns of `tracer.records.PARTICLE` except the invariants; `weight` is 1. mlt_h lies in [0, 24).

    Raises
    ------
    InputError
        When a population that is drawn holds a list.
    """
    if index.size and not (index.min() >= 0 and index.max() < scenario.count):
        raise ValueError(f"no particle {index.min() if index.min() < 0 else index.max()} of {scenario.count}")
    names = [column.name for column in PARTICLE if column.name not in INVARIANTS]
    columns = {name: np.empty(index.size, DTYPES[name]) for name in names}
    offset = 0
    for number, population in enumerate(scenario.populations):
        here = (index >= offset) & (index < offset + population.count)
        if here.any():
            part = _members(scenario, number, index[here] - offset)
            for name in names:
                columns[name][here] = part[name]
        offset += population.count
    return columns


def _members(scenario: Scenario, number: int, index: Index) -> dict[str, np.ndarray]:
    """Some particles of population `number`, by their index in it."""
    population = scenario.populations[number]
    constants = {
        "population": number,
        "species": scenario.species.index(population.species),
        "charge_e": population.species.charge_e,
        "mass_kg": population.species.mass_kg,
        "seed": population.seed,
        "weight": 1.0,
    }
    columns = {name: np.full(index.size, value, DTYPES[name]) for name, value in constants.items()}
    placed = _grid(population, index) if population.draw == "grid" else _drawn(population, index)
    placed["mlt_h"] = _wrapped(placed["mlt_h"])
    return columns | placed


def _wrapped(mlt_h: Floats) -> Floats:
    wrapped = np.mod(mlt_h, 24.0)
    return np.asarray(np.where(wrapped >= 24.0, 0.0, wrapped))


def _grid(population: Population, index: Index) -> dict[str, Floats]:
    """The product of all quantities, last fastest; only what is asked for is made."""
    quantities = population.quantities()
    places = np.unravel_index(index, tuple(q.size for q in quantities))
    columns = {}
    for name, quantity, place in zip(COORDINATES, quantities, places):
        columns[name] = grid_points(name, quantity, place)
    return columns


def _drawn(population: Population, index: Index) -> dict[str, Floats]:
    """A column for each quantity: its number, or its range filled from one dimension of the unit cube."""
    quantities = dict(zip(COORDINATES, population.quantities()))
    ranged = [name for name, quantity in quantities.items() if quantity.kind == "range"]
    cube = UNIT_CUBES[population.draw](population, len(ranged), index)
    columns = {}
    for name, quantity in quantities.items():
        if quantity.kind == "list":
            raise InputError("a list in a draw", 'a number, a range, or draw = "grid"', key=f"{population.name}.{name}")
        if quantity.kind == "range":
            begin, end = ends(name, quantity)
            columns[name] = spaced(cube[:, ranged.index(name)], begin, end, quantity.spacing)
        else:
            columns[name] = np.full(index.size, quantity.values[0], dtype=float)
    return columns


def random_points(population: Population, dimensions: int, index: Index) -> Floats:
    """Rows `index` of ``numpy.random.default_rng(seed).random((count, dimensions))``.

    PCG64 can be advanced: one step for each float64, so no other row is made.
    """
    bits = np.random.PCG64(population.seed)
    rng = np.random.Generator(bits)
    points = np.empty((index.size, dimensions))
    begins = np.flatnonzero(np.diff(index, prepend=-2) != 1)  # of each stretch of consecutive rows
    following = 0
    for begin, stop in zip(begins, [*begins[1:], index.size]):
        bits.advance((int(index[begin]) - following) * dimensions)
        points[begin:stop] = rng.random((stop - begin, dimensions))
        following = int(index[stop - 1]) + 1
    return points


def sobol_points(population: Population, dimensions: int, index: Index) -> Floats:
    """Points `index` of scipy's scrambled Sobol sequence, one dimension for each range.

    A population of any count holds the first `count` points: those of the next power of two, cut. Every 2^k
    consecutive points from a multiple of 2^k on are balanced (as a digital net). With a count that is not a power
    of two the last, broken block is not: the mean of a smooth function then errs like 1/count instead of nearly
    count^(-3/2) (Owen 1997, Ann. Stat. 25, 1541; Owen 2020, arXiv:2008.08051), and strata that a whole net fills
    equally differ by some points.
    """
    bits = sobol.BITS if population.count <= 2**sobol.BITS else sobol.BITS_LARGE
    return sobol.points(index, dimensions, population.seed, bits)


UNIT_CUBES: dict[str, Callable[[Population, int, Index], Floats]] = {
    "sobol": sobol_points,
    "random": random_points,
}
