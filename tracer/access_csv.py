"""The tables beside an access file, as CSV with UTC: a comment line with the caution, a header, rows."""

from __future__ import annotations

import csv
from collections.abc import Iterable, Iterator
from datetime import datetime
from itertools import chain, product
from typing import Any, TextIO

import numpy as np

from fields.clock import hours_later, micros, utc_text
from tracer.access_records import EXPOSURE, AccessResult
from tracer.analysis.boundary_history import spells
from tracer.analysis.windows import windows
from tracer.records import CAUTION

SECOND = 1_000_000
Row = Iterable[object]

EXPOSURE_HEADER = (
    "orbit", "species", "energy_keV", "pitch_deg", "share_open", "share_unknown", "share_in_reach", "passes",
    "first_open_utc", "last_open_utc", "longest_closed_h", "worst_pass_h", "worst_pass_begin_utc",
)  # fmt: skip
WINDOWS_HEADER = (
    "species", "time_utc", "time_h", "r_re", "mlt_h", "pitch_deg",
    "closed_below_keV", "lowest_keV", "highest_keV", "closed_above_keV",
)  # fmt: skip
OPENINGS_HEADER = (
    "species", "energy_keV", "pitch_deg", "r_re", "mlt_h",
    "closed_before_utc", "first_open_utc", "last_open_utc", "closed_after_utc",
)  # fmt: skip
BOUNDARY_HEADER = (
    "species", "time_utc", "time_h", "energy_keV", "pitch_deg", "mlt_h", "innermost_re", "next_inward_re",
)  # fmt: skip


def stem(path: str) -> str:
    """What the names of the tables of an access file begin with: its own name without ``.h5``."""
    return path.removesuffix(".h5")


def names(path: str, has_map: bool, few_places: bool, has_orbits: bool) -> dict[str, str]:
    """The tables that go with an access file, and their names."""
    wanted = {"boundary": has_map, "openings": few_places, "windows": few_places, "exposure": has_orbits}
    return {table: f"{stem(path)}.{table}.csv" for table, made in wanted.items() if made}


def written(result: AccessResult, path: str) -> list[str]:
    """The names of the tables beside the file of a result."""
    return list(names(path, result.has_map, result.few_places, bool(result.orbits)).values())


def tables(result: AccessResult) -> Iterator[tuple[str, Row, Iterable[Row]]]:
    """The tables that a result has: name, header and rows."""
    utc = Clock(result.attrs["start"])
    if result.has_map:
        yield "boundary", BOUNDARY_HEADER, _boundary(result, utc)
    if result.few_places:
        yield "openings", OPENINGS_HEADER, _openings(result, utc)
        yield "windows", WINDOWS_HEADER, _windows(result, utc)
    if result.orbits:
        yield "exposure", EXPOSURE_HEADER, _exposure(result, utc)


def write(stream: TextIO, header: Row, rows: Iterable[Row]) -> None:
    """Write one table."""
    stream.write(f"# {CAUTION}\n")
    csv.writer(stream, lineterminator="\n").writerows(chain([header], rows))


class Clock:
    """Run times as UTC, to the second; nothing for NaN."""

    def __init__(self, start: str) -> None:
        self._start = micros(datetime.fromisoformat(start))

    def __call__(self, time_h: float) -> str:
        """ISO 8601."""
        if np.isnan(time_h):
            return ""
        return utc_text(round(hours_later(self._start, time_h) / SECOND) * SECOND)


def _number(value: Any) -> str:
    """Nine digits; nothing for NaN."""
    return "" if np.isnan(value) else f"{float(value):.9g}"


def _exposure(result: AccessResult, utc: Clock) -> Iterator[Row]:
    table = result.exposure
    for at in np.ndindex(*table["passes"].shape):
        orbit, species, energy, pitch = at
        found = {column.name: float(table[column.name][at]) for column in EXPOSURE}
        yield (
            result.orbits[orbit].name,
            result.species_names[species],
            _number(result.energy_keV[energy]),
            _number(result.pitch_deg[pitch]),
            *(_number(found[name]) for name in ("share_open", "share_unknown", "share_in_reach", "passes")),
            *(utc(found[name]) for name in ("first_open_h", "last_open_h")),
            *(_number(found[name]) for name in ("longest_closed_h", "worst_pass_h")),
            utc(found["worst_pass_begin_h"]),
        )


def _windows(result: AccessResult, utc: Clock) -> Iterator[Row]:
    for one in windows(result):
        place = (one.time_h, one.r_re, one.mlt_h, one.pitch_deg)
        edges = (one.closed_below_keV, one.lowest_keV, one.highest_keV, one.closed_above_keV)
        yield (one.species, utc(one.time_h), *map(_number, (*place, *edges)))


def _openings(result: AccessResult, utc: Clock) -> Iterator[Row]:
    for one in spells(result):
        place = (one.energy_keV, one.pitch_deg, one.r_re, one.mlt_h)
        times = (one.closed_before_h, one.first_h, one.last_h, one.closed_after_h)
        yield (one.species, *map(_number, place), *map(utc, times))


def _boundary(result: AccessResult, utc: Clock) -> Iterator[Row]:
    when = [utc(float(time)) for time in result.time_h]
    time_h, energy_keV, pitch_deg, mlt_h = (
        [_number(value) for value in axis]
        for axis in (result.time_h, result.energy_keV, result.pitch_deg, result.mlt_h)
    )
    place = {float(r): _number(r) for r in result.r_re}  # a map may have a million rows, and few places
    found = zip(result.boundary["innermost_re"].ravel().tolist(), result.boundary["next_inward_re"].ravel().tolist())
    axes = (result.species_names, range(len(when)), energy_keV, pitch_deg, mlt_h)
    for (species, time, energy, pitch, mlt), (innermost, below) in zip(product(*axes), found):
        r = (place.get(innermost, ""), place.get(below, ""))  # NaN is no place
        yield (species, when[time], time_h[time], energy, pitch, mlt, *r)
