"""What the tests of worker processes share: a small run in many chunks, and those as this process computes them."""

from __future__ import annotations

from collections.abc import Iterable
from functools import lru_cache
from pathlib import Path

import h5py
from small_runs import population, span
from storm_runs import storm

from tracer.integrate import compile_kernel, run_chunk
from tracer.records import Chunk

RUN = storm(
    population(count=130, pitch_deg=span(3.0, 90.0)),
    population("electrons", "e-", count=70, draw="random", release_h=span(0.0, 2.0)),
    hours=8.0,
)
SPANS = tuple((first, min(first + 9, RUN.count)) for first in range(0, RUN.count, 9))
TOLERANCE = 1e-10  # local, R_E


def bits(chunk: Chunk) -> dict[str, bytes]:
    """Every column of a chunk by its place."""
    groups = {"particle": chunk.particle, "track": chunk.track, "end": chunk.end}
    return {f"{group}/{name}": column.tobytes() for group, found in groups.items() for name, column in found.items()}


@lru_cache(maxsize=1)
def by_this_process() -> dict[int, dict[str, bytes]]:
    kernel = compile_kernel(RUN)
    return {first: bits(run_chunk(RUN, kernel, first, stop, TOLERANCE)) for first, stop in SPANS}


def assert_all_there(chunks: Iterable[Chunk]) -> None:
    """Each chunk of the run once, with the same bits."""
    found = [(chunk.first, bits(chunk)) for chunk in chunks]
    assert sorted(first for first, _ in found) == [first for first, _ in SPANS]
    assert dict(found) == by_this_process()


def datasets(path: Path) -> dict[str, bytes]:
    """Every dataset of a file by its place."""
    found: dict[str, bytes] = {}
    with h5py.File(path) as file:
        file.visititems(
            lambda name, item: found.update({name: item[...].tobytes()}) if isinstance(item, h5py.Dataset) else None
        )
    return found
