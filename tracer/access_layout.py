"""The datasets of a result about access, their axes and shapes: the same in memory and in a file."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from fields.units import Floats
from tracer.access_records import (
    ACCESS,
    AXES,
    BOUNDARY,
    BOUNDARY_AXES,
    EXPOSURE,
    EXPOSURE_AXES,
    FEW_PLACES,
    OPENING,
    ORBIT_AXES,
    PLACE,
    PLACE_AXES,
)
from tracer.records import Column
from tracer.targets import Targets

TOGETHER = 2**20  # targets that are put at their places in one go
ORBIT_TIME = Column("orbit", "orbit_time", "h", "run time")


@dataclass(frozen=True)
class Planned:
    """One dataset: where it stands, what it holds, along which axes and how far."""

    path: str
    column: Column
    axes: tuple[str, ...]
    shape: tuple[int, ...]


def scales(targets: Targets) -> dict[str, np.ndarray]:
    """The values along the axes that several groups share, by axis."""
    asked = targets.request
    found: dict[str, np.ndarray] = {"species": np.arange(len(asked.species), dtype=np.int32)}
    if targets.map is not None:
        found |= {"time": asked.time_h}
    found |= {"energy": asked.energy_keV, "pitch": asked.pitch_deg}
    if targets.map is not None:
        found |= {"r": asked.r_re, "mlt": asked.mlt_h}
    if targets.orbits:
        found |= {"spacecraft": np.arange(len(targets.orbits), dtype=np.int32)}
    return found


def few_places(targets: Targets) -> bool:
    """Whether the map has so few places that times of opening are told one by one."""
    return targets.map is not None and targets.map.shape[4] <= FEW_PLACES


def datasets(targets: Targets) -> Iterator[Planned]:
    """All datasets but the axes themselves."""
    sizes = {axis: values.size for axis, values in scales(targets).items()}

    def planned(
        parent: str, columns: tuple[Column, ...], axes: tuple[str, ...], more: dict[str, int]
    ) -> Iterator[Planned]:
        known = {**sizes, **more}
        for column in columns:
            yield Planned(f"{parent}/{column.name}", column, axes, tuple(known[axis] for axis in axes))

    if targets.map is not None:
        yield from planned("access", ACCESS, AXES, {})
        yield from planned("boundary", BOUNDARY, BOUNDARY_AXES, {})
        if few_places(targets):
            yield from planned("boundary", OPENING, PLACE_AXES, {})
    for orbit in targets.orbits:
        time = {"orbit_time": orbit.time_h.size}
        yield from planned(f"orbit/{orbit.name}", PLACE, ("orbit_time",), time)
        yield from planned(f"orbit/{orbit.name}", ACCESS, ORBIT_AXES, time)
    if targets.orbits:
        yield from planned("exposure", EXPOSURE, EXPOSURE_AXES, {})


def places_along(targets: Targets, number: int) -> dict[str, Floats]:
    """The columns of `PLACE` of an orbit."""
    orbit = targets.orbits[number]
    return {"r_re": orbit.r_re, "mlt_h": orbit.mlt_h, "b_ratio": orbit.b_ratio}


def depth(shape: tuple[int, ...], most: int = TOGETHER) -> int:
    """How many leading axes to go along so that what remains is at most `most`, or one row of the last two axes."""
    for axes in range(max(len(shape) - 2, 0)):
        if math.prod(shape[axes:]) <= most:
            return axes
    return max(len(shape) - 2, 0)
