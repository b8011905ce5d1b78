"""A result kept in memory: the same steps as writing a file, without one."""

from __future__ import annotations

from collections.abc import Mapping
from types import TracebackType
from typing import Any, Self

import numpy as np

from tracer.records import GROUPS, Chunk, Result
from tracer.scenario import Scenario
from tracer.store_attrs import provenance
from tracer.store_writer import stored


class Collector:
    """Gathers chunks into one `Result`."""

    def __init__(self, scenario: Scenario) -> None:
        self.begun: dict[str, Any] | None = None
        self._scenario = scenario
        self._attrs: dict[str, Any] = {}
        count, times = scenario.count, scenario.save_times_h.size
        shapes = {"particle": (count,), "track": (count, times), "end": (count,)}
        width = {"track": "f4"} if scenario.output.tracks == "single" else {}
        self._columns = {
            group: {c.name: np.empty(shapes[group], width.get(group, c.dtype)) for c in columns}
            for group, columns in GROUPS.items()
            if group != "track" or times
        }

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        pass

    def begin(self, attrs: Mapping[str, Any]) -> None:
        """Take the attributes that are known at the start."""
        self.begun = dict(attrs)
        self._attrs = {**provenance(self._scenario), **attrs}

    def missing(self) -> list[tuple[int, int]]:
        """The particles to trace, as spans: all of them."""
        return [(0, self._scenario.count)]

    def stopped(self) -> str:
        """What to say of a run that was stopped."""
        return "stopped before the end; nothing was kept"

    def write(self, chunk: Chunk) -> None:
        """Put the columns of some consecutive particles at their place."""
        rows = slice(chunk.first, chunk.first + chunk.end["cause"].size)
        for group, columns in self._columns.items():
            for name, column in columns.items():
                column[rows] = stored(getattr(chunk, group)[name], name, column.dtype)

    def finish(self, extra_attrs: Mapping[str, Any]) -> None:
        """Add what is known at the end only."""
        self._attrs.update(extra_attrs, complete=True)

    def result(self) -> Result:
        """The result."""
        scenario = self._scenario
        return Result(
            time_h=scenario.save_times_h,
            particle=self._columns["particle"],
            track=self._columns.get("track", {}),
            end=self._columns["end"],
            attrs=self._attrs,
            population_names=tuple(p.name for p in scenario.populations),
            species_names=tuple(s.name for s in scenario.species),
            drivers=scenario.field.drivers,
        )
