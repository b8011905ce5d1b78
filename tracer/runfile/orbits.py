"""``[[orbit]]`` tables to requests: their sources read and held against the Earth and the run."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path as FilePath

import numpy as np

from fields.clock import MICROS_PER_DAY, MICROS_PER_HOUR, Micros, micros, utc_text
from fields.errors import InputError
from tracer.access_plan import OrbitRequest, sample_times
from tracer.ephemeris.elements import Elements
from tracer.ephemeris.oem import read_oem
from tracer.ephemeris.sampled import Ephemeris, EquatorialTable
from tracer.ephemeris.source import Source
from tracer.ephemeris.table import read_table
from tracer.ephemeris.twoline import TwoLine, read_two_line
from tracer.runfile.places import Path, fault, key_text
from tracer.runfile.schema import ElementsTable, OrbitTable

SOURCES = ("elements", "tle", "oem", "csv")
MOST_TIMES = 10**6  # of one orbit: the rotation to SM takes some 0.1 ms of each
STALE_DAYS = 7.0


@dataclass(frozen=True)
class Orbits:
    """The orbits of a run.

    Attributes
    ----------
    requests : tuple of OrbitRequest
    input_sha256 : dict
        Hashes of their files, by the path as written.
    remarks : tuple of str
        What the user should know.
    """

    requests: tuple[OrbitRequest, ...]
    input_sha256: dict[str, str]
    remarks: tuple[str, ...]


def read_orbits(tables: Sequence[OrbitTable], base: FilePath, start: datetime, end_h: float) -> Orbits:
    """All orbits of a run, in the order of the file.

    Parameters
    ----------
    tables : sequence of OrbitTable
    base : path
        The folder that file names are relative to.
    start : datetime
    end_h : float
        Signed hours at which the run ends.

    Raises
    ------
    InputError
        For a name given twice, no source or several, a file that cannot be read, an orbit inside the Earth, or one that
        does not overlap the run.
    """
    requests: list[OrbitRequest] = []
    hashes: dict[str, str] = {}
    remarks: list[str] = []
    for i, table in enumerate(tables):
        path: Path = ("orbit", i)
        _check_name((*path, "name"), table.name, [request.name for request in requests])
        kind = _kind(path, table)
        source = _source((*path, kind), table, base)
        request = OrbitRequest(table.name, table.every_min, source, key_text((*path, kind)))
        remark = _against_run((*path, kind), request, getattr(table, kind), start, end_h)
        remarks += [f"orbit {table.name}: {remark}"] if remark else []
        requests.append(request)
        if not isinstance(source, Elements):
            hashes[source.file] = source.sha256
    return Orbits(tuple(requests), hashes, tuple(remarks))


def _check_name(path: Path, name: str, earlier: Sequence[str]) -> None:
    if "/" in name or name in (".", ".."):
        raise fault(path, name, "names a group of the result", "a name without a slash, and not dots alone")
    if name in earlier:
        raise fault(path, name, "given to two orbits", "a name of its own")


def _kind(path: Path, table: OrbitTable) -> str:
    given = [kind for kind in SOURCES if getattr(table, kind) is not None]
    words = "one of " + ", ".join(SOURCES)
    if not given:
        raise fault((*path, "elements"), None, "missing", words)
    if len(given) > 1:
        raise fault((*path, given[1]), None, f"given beside {given[0]}", words)
    if table.frame is not None and given != ["csv"]:
        raise fault((*path, "frame"), table.frame, "belongs to csv", f"no frame beside {given[0]}, which has its own")
    return given[0]


def _source(path: Path, table: OrbitTable, base: FilePath) -> Elements | TwoLine | Ephemeris | EquatorialTable:
    key = key_text(path)
    if table.elements is not None:
        return _elements(path, table.elements)
    if table.tle is not None:
        return _outside(read_two_line(base / table.tle, file=table.tle, key=key))
    if table.oem is not None:
        return read_oem(base / table.oem, file=table.oem, key=key)
    assert table.csv is not None
    return read_table(base / table.csv, table.frame, file=table.csv, key=key)


def _elements(path: Path, table: ElementsTable) -> Elements:
    values = table.model_dump()
    found = Elements(micros(values.pop("epoch")), **{key: float(value) for key, value in values.items()})
    if found.perigee_re < 1.0:
        problem = f"perigee a (1 - e) = {found.perigee_re:.4g} R_E: inside the Earth"
        raise fault((*path, "e"), table.e, problem, "a_re and e with a perigee from 1 R_E")
    return found


def _outside(found: TwoLine) -> TwoLine:
    if found.perigee_re < 1.0:
        problem = f"perigee {found.perigee_re:.4g} R_E from the Earth's centre: inside the Earth"
        raise InputError(problem, "elements with a perigee from 1 R_E", key="line 2", file=found.file)
    return found


def _against_run(path: Path, request: OrbitRequest, given: object, start: datetime, end_h: float) -> str:
    """What the user should know about how the orbit and the run overlap.

    Raises
    ------
    InputError
        When they do not, or when there would be more places than any use.
    """
    if abs(end_h) * 60.0 / request.every_min > MOST_TIMES:
        problem = f"gives {abs(end_h) * 60.0 / request.every_min:.3g} places"
        remedy = f"at least {abs(end_h) * 60.0 / MOST_TIMES:.3g} min"
        raise fault((*path[:-1], "every_min"), request.every_min, problem, remedy)
    stamps = sample_times(request.every_min, start, end_h)[0]
    covered = request.source.covered(stamps)
    if isinstance(request.source, (Ephemeris, EquatorialTable)) and not covered.any():
        span = " to ".join(utc_text(stamp) for stamp in request.source.cover)
        run = f"{utc_text(stamps[0])} to {utc_text(stamps[-1])} every {request.every_min:g} min"
        raise fault(path, given, f"covers no time of the run: {span}", f"an orbit that covers some of {run}")
    if not covered.all():
        hours = (stamps[covered] - micros(start)) / MICROS_PER_HOUR
        return f"covers {covered.sum()} of the run's {covered.size} times, from {hours[0]:g} to {hours[-1]:g} h"
    return _staleness(request.source, stamps)


def _staleness(source: Source | EquatorialTable, stamps: Micros) -> str:
    if not isinstance(source, TwoLine):
        return ""
    days = float(np.max(np.abs(stamps - source.epoch))) / MICROS_PER_DAY
    if days <= STALE_DAYS:
        return ""
    # common practice, from memory
    return f"two-line elements {days:.1f} days from their epoch; SGP4 errs by some 1 to 3 km more each day"
