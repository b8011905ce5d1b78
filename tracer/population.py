"""The initial state of the particles: draws and grids. Random numbers are made here and nowhere else.

A particle's numbers depend on its population and its index in it alone, so the same bits come out however a run is
cut into chunks, and memory is bounded by the slice asked for.

Seeds are used as given. Two populations with the same seed, count and draw therefore share their points of the unit
cube (species compared particle by particle is one use); give them different seeds for independent samples.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache

import numpy as np

from fields.errors import InputError
from fields.units import Floats
from tracer.records import PARTICLE
from tracer.scenario import Population, Quantity, Scenario

COORDINATES = ("r_re", "mlt_h", "energy_keV", "pitch_deg", "release_h")  # the order of Population.quantities()

SOBOL_BITS = 30  # scipy's default: 2^30 distinct points
SOBOL_BITS_LARGE = 52  # for more; the widest whose points a float64 holds exactly
SOBOL_STRIDE = 2**14  # points walked over at a time

DTYPES = {column.name: np.dtype(column.dtype) for column in PARTICLE}


def initial_state(scenario: Scenario, first: int, stop: int) -> dict[str, np.ndarray]:
    """Particles `first` to `stop` - 1 of a run, populations in file order, in user units.

    Parameters
    ----------
    scenario : Scenario
    first, stop : int
        ``0 <= first <= stop <= scenario.count``.

    Returns
    -------
    dict of str to ndarray, shape (stop - first,)
        The columns of `tracer.records.PARTICLE` except the invariants; `weight` is 1. mlt_h lies in [0, 24).

    Raises
    ------
    InputError
        When a population that is drawn holds a list.
    """
    if not 0 <= first <= stop <= scenario.count:
        raise ValueError(f"particles {first} to {stop} of {scenario.count}")
    parts = []
    offset = 0
    for number, population in enumerate(scenario.populations):
        low, high = max(first - offset, 0), min(stop - offset, population.count)
        if low < high:
            parts.append(_slice(scenario, number, low, high))
        offset += population.count
    names = parts[0] if parts else _slice(scenario, 0, 0, 0)
    return {name: np.concatenate([part[name] for part in parts] or [names[name]]) for name in names}


def _slice(scenario: Scenario, number: int, first: int, stop: int) -> dict[str, np.ndarray]:
    population = scenario.populations[number]
    size = stop - first
    constants = {
        "population": number,
        "species": scenario.species.index(population.species),
        "charge_e": population.species.charge_e,
        "mass_kg": population.species.mass_kg,
        "seed": population.seed,
        "weight": 1.0,
    }
    columns = {name: np.full(size, value, DTYPES[name]) for name, value in constants.items()}
    placed = _grid(population, first, stop) if population.draw == "grid" else _drawn(population, first, stop)
    placed["mlt_h"] = _wrapped(placed["mlt_h"])
    columns.update((name, placed[name]) for name in ("release_h", *COORDINATES[:-1]))
    return columns


def _wrapped(mlt_h: Floats) -> Floats:
    wrapped = np.mod(mlt_h, 24.0)
    return np.asarray(np.where(wrapped >= 24.0, 0.0, wrapped))


def _grid(population: Population, first: int, stop: int) -> dict[str, Floats]:
    """The product of all quantities, last fastest; only the slice is made."""
    quantities = population.quantities()
    places = np.unravel_index(np.arange(first, stop), tuple(q.size for q in quantities))
    columns = {}
    for name, quantity, place in zip(COORDINATES, quantities, places):
        if quantity.kind == "range":
            begin, end = _ends(name, quantity)
            closed = name == "mlt_h" and end - begin == 24.0  # both ends of a full circle are one place
            intervals = quantity.n if closed else max(quantity.n - 1, 1)
            columns[name] = spaced(place / intervals, begin, end, quantity.spacing)
        else:
            columns[name] = np.asarray(quantity.values, dtype=float)[place]
    return columns


def _drawn(population: Population, first: int, stop: int) -> dict[str, Floats]:
    """A column for each quantity: its number, or its range filled from one dimension of the unit cube."""
    quantities = dict(zip(COORDINATES, population.quantities()))
    ranged = [name for name, quantity in quantities.items() if quantity.kind == "range"]
    cube = UNIT_CUBES[population.draw](population, len(ranged), first, stop)
    columns = {}
    for name, quantity in quantities.items():
        if quantity.kind == "list":
            raise InputError("a list in a draw", 'a number, a range, or draw = "grid"', key=f"{population.name}.{name}")
        if quantity.kind == "range":
            begin, end = _ends(name, quantity)
            columns[name] = spaced(cube[:, ranged.index(name)], begin, end, quantity.spacing)
        else:
            columns[name] = np.full(stop - first, quantity.values[0], dtype=float)
    return columns


def _ends(name: str, quantity: Quantity) -> tuple[float, float]:
    """Both ends of a range; local time runs eastward, through midnight when it ends below its start."""
    begin, end = quantity.values
    return (begin, end + 24.0) if name == "mlt_h" and end < begin else (begin, end)


def random_points(population: Population, dimensions: int, first: int, stop: int) -> Floats:
    """Rows `first` to `stop` of ``numpy.random.default_rng(seed).random((count, dimensions))``.

    PCG64 can be advanced: one step for each float64, so no earlier row is made.
    """
    bits = np.random.PCG64(population.seed)
    bits.advance(first * dimensions)
    return np.random.Generator(bits).random((stop - first, dimensions))


def sobol_points(population: Population, dimensions: int, first: int, stop: int) -> Floats:
    """Points `first` to `stop` of scipy's scrambled Sobol sequence, one dimension for each range.

    A population of any count holds the first `count` points: those of the next power of two, cut. Every 2^k
    consecutive points from a multiple of 2^k on are balanced (as a digital net). With a count that is not a power
    of two the last, broken block is not: the mean of a smooth function then errs like 1/count instead of nearly
    count^(-3/2) (Owen 1997, Ann. Stat. 25, 1541; Owen 2020, arXiv:2008.08051), and strata that a whole net fills
    equally differ by some points.

    The state of the generator after n points is the exclusive or of one direction for each set bit of n (Antonov &
    Saleev 1979: the Gray code is linear), so a slice needs the points 0, 1, 2, 4, ... only. They cost one walk over
    the sequence (about a second for 10^8 points); scipy's own `fast_forward` would walk again for every chunk.
    """
    if dimensions == 0 or stop == first:
        return np.empty((stop - first, dimensions))
    bits = SOBOL_BITS if population.count <= 2**SOBOL_BITS else SOBOL_BITS_LARGE
    origin, directions = _sobol_directions(dimensions, population.seed, bits, (stop - 1).bit_length())
    index = np.arange(first, stop, dtype=np.uint64)
    points = np.repeat(origin[np.newaxis], stop - first, axis=0)
    for bit, direction in enumerate(directions):
        points ^= ((index >> np.uint64(bit)) & np.uint64(1))[:, np.newaxis] * direction
    return points * 2.0**-bits


@lru_cache(maxsize=64)
def _sobol_directions(dimensions: int, seed: int, bits: int, levels: int) -> tuple[np.ndarray, np.ndarray]:
    """Point 0 and (point 2^k) ^ (point 0) for k < `levels`, as integers of `bits` bits."""
    from scipy.stats import qmc  # takes a second to load

    engine = qmc.Sobol(dimensions, scramble=True, bits=bits, rng=seed)

    def next_point() -> np.ndarray:
        return np.asarray(engine.random(1)[0] * 2.0**bits).astype(np.uint64)

    origin = next_point()
    directions = np.empty((levels, dimensions), dtype=np.uint64)
    for level in range(levels):
        while engine.num_generated < 2**level:  # not fast_forward: scipy 1.17 refuses it above 32 bits
            engine.random(min(2**level - engine.num_generated, SOBOL_STRIDE))
        directions[level] = next_point() ^ origin
    return origin, directions


UNIT_CUBES: dict[str, Callable[[Population, int, int, int], Floats]] = {
    "sobol": sobol_points,
    "random": random_points,
}


def spaced(u: Floats, begin: float, end: float, spacing: str) -> Floats:
    """The value at the fraction `u` of a range, 0 to 1; both ends come out exactly.

    ``linear``: uniform; ``area``: uniform in the square; ``log``: uniform in the logarithm; ``isotropic``: angles in
    degrees, uniform in their cosine.
    """
    between = SPACINGS[spacing](u, begin, end)
    inside = np.clip(between, min(begin, end), max(begin, end))
    return np.where(u <= 0.0, begin, np.where(u >= 1.0, end, inside))


def _linear(u: Floats, begin: float, end: float) -> Floats:
    return begin + (end - begin) * u


def _area(u: Floats, begin: float, end: float) -> Floats:
    return np.sqrt(begin * begin + (end - begin) * (end + begin) * u)


def _log(u: Floats, begin: float, end: float) -> Floats:
    return np.asarray(begin * np.exp(u * np.log(end / begin)))


def _isotropic(u: Floats, begin: float, end: float) -> Floats:
    """cos a uniform: from the complement near 90 degrees, from 1 - cos a = 2 sin^2(a/2) near 0, so no digits
    cancel."""
    cosine = _linear(u, *np.sin(np.radians([90.0 - begin, 90.0 - end])))
    half_versine = _linear(u, *np.sin(np.radians([begin / 2, end / 2])) ** 2)
    near_90 = 90.0 - np.degrees(np.arcsin(np.clip(cosine, -1.0, 1.0)))
    near_0 = 2.0 * np.degrees(np.arcsin(np.sqrt(np.clip(half_versine, 0.0, 1.0))))
    return np.where(cosine < 0.5, near_90, near_0)


SPACINGS: dict[str, Callable[[Floats, float, float], Floats]] = {
    "linear": _linear,
    "area": _area,
    "log": _log,
    "isotropic": _isotropic,
}
