"""From tables to the scenario: one check after the other, the first fault ends it."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import UTC, datetime, timedelta
from os import PathLike
from pathlib import Path as FilePath
from typing import Any

import tomli_w
from pydantic import ValidationError

from fields.errors import InputError
from tracer.access_plan import OrbitRequest
from tracer.runfile.access import access_request
from tracer.runfile.faults import Fault, first, translated
from tracer.runfile.histories import read_histories, written_out
from tracer.runfile.models import build_field, model_faults, references
from tracer.runfile.orbits import read_orbits
from tracer.runfile.places import fault
from tracer.runfile.populations import populations, refuse_lost
from tracer.runfile.quantities import rules
from tracer.runfile.reading import parse, plain_tables, read_text
from tracer.runfile.schema import AccessTable, DomainTable, RunTables, TimeTable
from tracer.runfile.size import refuse_absurd
from tracer.scenario import Domain, Origin, Output, Scenario


def load(path: str | PathLike[str]) -> Scenario:
    """The scenario of a run file.

    Parameters
    ----------
    path : str or path
        A TOML file; the paths in it are relative to its folder.

    Raises
    ------
    InputError
        For the first fault in the file: of syntax, then of keys and types in the order of the file, then of what
        the keys say together.
    """
    text = read_text(path)
    try:
        return _scenario(parse(text), FilePath(path).parent, str(path), text)
    except InputError as error:
        raise error.placed(file=str(path)) from None


def build(tables: Mapping[str, Any], *, base: str | PathLike[str] | None = None) -> Scenario:
    """The scenario of tables put together in code: the keys, checks and error texts of a run file.

    Parameters
    ----------
    tables : mapping
        As ``tomllib`` would give a run file. Under ``series`` a `fields.Series` may stand in place of a table; numpy
        numbers and arrays are taken as Python's, entries of None as left out.
    base : path, optional
        The folder that file names are relative to; the current one if left out.

    Raises
    ------
    InputError
        As `load` does, without a file name.
    """
    plain = plain_tables(tables)
    return _scenario(plain, FilePath() if base is None else FilePath(base), "", "")


def _scenario(tables: dict[str, Any], base: FilePath, file: str, text: str) -> Scenario:
    checked = _checked(tables)
    start = _start(checked.time)
    end_h = -checked.time.hours if checked.time.backward else checked.time.hours
    domain = _domain(checked.domain)
    histories = read_histories(checked.series, references(tables), base, start, end_h)
    field = build_field(tables, histories.drivers)
    allowed = rules(domain.inner_re, domain.outer_re, end_h)
    found = populations(checked.population, allowed)
    orbits = read_orbits(checked.orbit, base, start, end_h)
    asked = checked.access
    access = None if asked is None else access_request(asked, allowed, domain, len(orbits.requests))
    output = Output(**checked.output.model_dump())
    refuse_absurd(found, checked.time.hours, output)
    if checked.losses.loss_cone == "stop":
        refuse_lost(found, field, domain)
    text = text or tomli_w.dumps(written_out(tables))
    return Scenario(
        title=checked.title,
        start=start,
        hours=checked.time.hours,
        backward=checked.time.backward,
        domain=domain,
        field=field,
        populations=found,
        loss_cone=checked.losses.loss_cone,
        output=output,
        origin=Origin(
            file,
            text,
            {**histories.input_sha256, **orbits.input_sha256},
            (*histories.remarks(), *orbits.remarks, *_unused(asked, orbits.requests)),
        ),
        access=access,
        orbits=orbits.requests,
    )


def _checked(tables: dict[str, Any]) -> RunTables:
    faults = model_faults(tables)
    checked = None
    try:
        checked = RunTables.model_validate(tables)
    except ValidationError as error:
        faults += translated(tables, error)
    worst = first(tables, faults + _nothing_asked(tables))
    if worst is not None:
        raise worst
    assert checked is not None
    return checked


def _nothing_asked(tables: dict[str, Any]) -> list[Fault]:
    if "access" in tables or tables.get("population", []) != []:
        return []
    place = ("population",)
    return [(place, fault(place, None, "missing", "at least one [[population]], or [access]"))]


def _unused(access: AccessTable | None, orbits: tuple[OrbitRequest, ...]) -> tuple[str, ...]:
    return () if access is not None else tuple(f"orbit {orbit.name} is used by [access] only" for orbit in orbits)


def _start(table: TimeTable) -> datetime:
    """The start in UTC; a time without an offset is taken as UTC."""
    start = table.start.replace(tzinfo=UTC) if table.start.tzinfo is None else table.start
    try:
        hours = timedelta(hours=table.hours)
        start, _, _ = start.astimezone(UTC), start + hours, start - hours
    except OverflowError:
        raise fault(("time", "start"), table.start, "out of range", "a run within the years 1 to 9999") from None
    return start


def _domain(table: DomainTable) -> Domain:
    domain = Domain(float(table.outer_re), float(table.inner_re), float(table.foot_altitude_km))
    if domain.inner_re < domain.foot_re:
        problem = f"below foot_altitude_km = {domain.foot_altitude_km:g}"
        raise fault(("domain", "inner_re"), domain.inner_re, problem, f"at least {domain.foot_re:.6f}")
    if domain.outer_re <= domain.inner_re:
        raise fault(("domain", "outer_re"), domain.outer_re, "not outside inner_re", f"above {domain.inner_re:g}")
    return domain
