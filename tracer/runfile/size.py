"""Counts beyond all use, refused before anything is drawn."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from fields.errors import InputError
from tracer.records import END, PARTICLE, TRACK, Column
from tracer.runfile.places import fault
from tracer.scenario import Output, Population

MOST_PARTICLES = 10**9  # the Sobol sequence has 2^30 points, and a billion storm days take a day of two cores
MOST_TIMES = 10**7  # of one time axis: a storm day every 10 ms
MOST_BYTES = 10**14  # of tracks: beyond the disks of a single machine


def refuse_absurd(found: Sequence[Population], hours: float, output: Output) -> None:
    """Raise when the run has more particles, saved times or saved bytes than any machine could take.

    Whether the disk at hand is large enough is asked when a run starts.

    Raises
    ------
    InputError
        Names the memory and the disk that the run would take.
    """
    times = 0.0 if output.every_min == 0.0 else hours * 60.0 / output.every_min + 1.0
    width = 8 if output.tracks == "double" else 4
    per_particle = _bytes(PARTICLE) + _bytes(END) + times * len(TRACK) * width
    total = 0
    for i, population in enumerate(found):
        total += population.count
        if total > MOST_PARTICLES:
            key, value = ("count", population.count) if population.draw != "grid" else ("draw", "grid")
            raise _too_many(("population", i, key), value, total, per_particle)
    if times > MOST_TIMES:
        remedy = f"at least {hours * 60.0 / MOST_TIMES:.3g} min, or 0 for end states only"
        raise fault(("output", "every_min"), output.every_min, f"gives {times:.3g} saved times", remedy)
    if total * per_particle > MOST_BYTES:
        problem = f"{total:,} particles at {times:,.0f} times would take {_size(total * per_particle)} of disk"
        remedy = "a longer interval, 0 for end states only, or fewer particles"
        raise fault(("output", "every_min"), output.every_min, problem, remedy)


def _too_many(path: tuple[str | int, ...], value: object, total: int, per_particle: float) -> InputError:
    memory, disk = _size(total * _bytes(PARTICLE)), _size(total * per_particle)
    problem = f"too many: {total:.4g} particles would take {memory} of memory and {disk} of disk"
    return fault(path, value, problem, f"at most {MOST_PARTICLES:,} particles in a run")


def _bytes(columns: Sequence[Column]) -> int:
    return sum(np.dtype(column.dtype).itemsize for column in columns)


def _size(count: float) -> str:
    for unit in ("B", "kB", "MB", "GB", "TB", "PB"):
        if count < 1000.0:
            return f"{count:.3g} {unit}"
        count /= 1000.0
    return f"{count:.3g} EB"
