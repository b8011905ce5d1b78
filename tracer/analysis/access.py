"""What reaches where and when: from the origins of targets to the arrays of an `AccessResult`.

An `AccessResult` (`tracer.access_records`; from `tracer.access`, or from `tracer.open` of its file) holds, in user
units:

- axes: ``species_names``, ``energy_keV``, ``pitch_deg`` (equatorial); of the map ``time_h`` (run time), ``r_re``,
  ``mlt_h``, all in the order of the run file and empty without a map; ``source``, the sector of the outer boundary.
- ``access[name]`` on (species, time, energy, pitch, r, mlt): ``region`` (`tracer.outcomes.Outcome`), ``entry_time_h``,
  ``entry_mlt_h``, ``entry_energy_keV``, ``transit_h``; NaN where the region is neither open nor open outside the
  source. ``result.part(name, index)`` gives a part of one, and reads no more from a file.
- ``boundary["innermost_re"]`` on (species, time, energy, pitch, mlt): the innermost place open to the source, NaN where
  no place on that local time is; ``next_inward_re``: its neighbour on the inner side, which is not open, NaN where the
  map begins with the innermost. The boundary lies between the two. At energy 0 it is the plasmapause. Up to
  `FEW_PLACES` places also ``first_open_h``, ``last_open_h``, ``spells`` on (species, energy, pitch, r, mlt).
- ``orbits``: for each spacecraft ``time_h``, ``r_re``, ``mlt_h``, ``b_ratio`` by time, and ``access[name]`` as above on
  (species, time, energy, pitch).
- ``exposure[name]`` on (spacecraft, species, energy, pitch): see `tracer.analysis.exposure`.
- ``attrs``: provenance; ``result.attrs["start"]`` is the UTC of run time 0.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from typing import Any, Protocol

import numpy as np

from tracer.access_layout import datasets, depth, few_places, places_along
from tracer.access_records import ACCESS, AccessResult, OrbitAccess
from tracer.analysis.boundary_history import innermost, openings
from tracer.analysis.exposure import exposure
from tracer.outcomes import Outcome
from tracer.targets import Block, Targets

Put = Callable[[str, Any, np.ndarray], None]


class Rows(Protocol):
    """Origins by the index of their targets."""

    def rows(self, first: int, stop: int, names: Sequence[str] = ...) -> dict[str, np.ndarray]:
        """Columns of targets `first` to `stop` - 1."""
        ...


def reduce(targets: Targets, origins: Rows, put: Put) -> None:
    """Make all datasets of `tracer.access_layout.datasets`, part by part.

    Parameters
    ----------
    targets : Targets
    origins : Rows
    put : callable
        Takes the path of a dataset, an index into it, and the numbers that belong there.
    """
    for number, (block, offset) in enumerate(zip(targets.blocks, targets.offsets)):
        if block is targets.map:
            _map(targets, block, origins, put)
        else:
            _orbit(targets, number - (targets.map is not None), block, offset, origins, put)


def gathered(targets: Targets, origins: Rows, attrs: dict[str, Any]) -> AccessResult:
    """The result in memory."""
    arrays = {planned.path: np.empty(planned.shape, planned.column.dtype) for planned in datasets(targets)}

    def put(path: str, index: Any, values: np.ndarray) -> None:
        arrays[path][index] = values

    reduce(targets, origins, put)

    def group(name: str) -> dict[str, np.ndarray]:
        return {path.rpartition("/")[2]: values for path, values in arrays.items() if path.rpartition("/")[0] == name}

    asked = targets.request
    return AccessResult(
        tuple(species.name for species in asked.species),
        asked.energy_keV,
        asked.pitch_deg,
        asked.time_h,
        asked.r_re,
        asked.mlt_h,
        asked.source,
        group("access"),
        group("boundary"),
        tuple(
            OrbitAccess(
                orbit.name,
                orbit.every_min,
                orbit.time_h,
                orbit.r_re,
                orbit.mlt_h,
                orbit.b_ratio,
                {column.name: arrays[f"orbit/{orbit.name}/{column.name}"] for column in ACCESS},
            )
            for orbit in targets.orbits
        ),
        group("exposure"),
        attrs,
    )


def _map(targets: Targets, block: Block, origins: Rows, put: Put) -> None:
    asked = targets.request
    sizes = (*block.shape[:4], asked.r_re.size, asked.mlt_h.size)
    for at, columns in _slabs(block, sizes, 0, origins):
        for name, values in columns.items():
            put(f"access/{name}", at, values)
        for name, values in innermost(columns["region"] == Outcome.OPEN, asked.r_re).items():
            put(f"boundary/{name}", at, values)
    if few_places(targets):
        one = block.count // block.shape[0]
        for species in range(block.shape[0]):
            region = origins.rows(species * one, (species + 1) * one, ("region",))["region"].reshape(sizes[1:])
            for name, values in openings(region == Outcome.OPEN, asked.time_h).items():
                put(f"boundary/{name}", species, values)


def _orbit(targets: Targets, number: int, block: Block, offset: int, origins: Rows, put: Put) -> None:
    orbit = targets.orbits[number]
    for name, values in places_along(targets, number).items():
        put(f"orbit/{orbit.name}/{name}", ..., values)
    for at, columns in _slabs(block, block.shape[:4], offset, origins):
        for name, values in columns.items():
            put(f"orbit/{orbit.name}/{name}", at, values)
    one = block.count // block.shape[0]
    for species in range(block.shape[0]):
        first = offset + species * one
        region = origins.rows(first, first + one, ("region",))["region"].reshape(block.shape[1:4])
        for name, values in exposure(region, orbit.time_h, orbit.every_min).items():
            put(f"exposure/{name}", (number, species), values)


def _slabs(
    block: Block, sizes: tuple[int, ...], offset: int, origins: Rows
) -> Iterator[tuple[tuple[int, ...], dict[str, np.ndarray]]]:
    """The columns of a block in parts that fit into memory: where each belongs, and its numbers, transit included."""
    leading = depth(sizes)
    size = int(np.prod(sizes[leading:]))
    for number, at in enumerate(np.ndindex(*sizes[:leading])):
        first = offset + number * size
        columns = origins.rows(first, first + size)
        start = first - offset + np.arange(size)
        time = block.time_h[np.unravel_index(start, block.shape)[1]]
        columns["transit_h"] = time - columns["entry_time_h"]
        yield at, {name: values.reshape(sizes[leading:]) for name, values in columns.items()}
