"""``[series.NAME]`` tables to drivers over the span of the run."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import UTC, datetime
from pathlib import Path as FilePath
from typing import Any

from fields.drivers import Driver
from fields.errors import nearest
from fields.series import Series, read_series
from tracer.runfile.places import Path, fault
from tracer.runfile.schema import SeriesTable


@dataclass(frozen=True)
class Histories:
    """The series of a run.

    Attributes
    ----------
    drivers : mapping
        Those that a model uses, by name.
    input_sha256 : mapping
        Hashes of the files, by the path as written.
    unused : tuple of str
        Names of those that no model uses.
    """

    drivers: Mapping[str, Driver]
    input_sha256: Mapping[str, str]
    unused: tuple[str, ...]

    def remarks(self) -> tuple[str, ...]:
        """What the user should know."""
        return tuple(f"series.{name} is used by no model" for name in self.unused)


def read_histories(
    given: Mapping[str, SeriesTable | Series],
    used: Sequence[tuple[Path, str]],
    base: FilePath,
    start: datetime,
    end_h: float,
) -> Histories:
    """Read all series, used or not, and cut the used ones to the run.

    Parameters
    ----------
    given : mapping
        Series by name.
    used : sequence of (place, name)
        Where models name series.
    base : path
        The folder that file names are relative to.
    start : datetime
    end_h : float
        Signed hours at which the run ends.

    Raises
    ------
    InputError
    """
    for path, name in used:
        if name not in given:
            remedy = nearest(name, given) if given else f"a table [series.{name}]"
            raise fault(path, f"series:{name}", "no such series", remedy)
    read = {name: _series(name, table, base) for name, table in given.items()}
    names = {name for _, name in used}
    span = min(0.0, end_h), max(0.0, end_h)
    return Histories(
        {name: series.driver(start, *span) for name, series in read.items() if name in names},
        {series.file: series.sha256 for series in read.values() if series.sha256},
        tuple(name for name in read if name not in names),
    )


def written_out(tables: Mapping[str, Any]) -> dict[str, Any]:
    """The tables with every Series written out as a table, so that they can stand in a run file."""
    series = tables.get("series")
    if not isinstance(series, Mapping):
        return dict(tables)
    return {**tables, "series": {k: _as_table(v) if isinstance(v, Series) else v for k, v in series.items()}}


def _series(name: str, given: SeriesTable | Series, base: FilePath) -> Series:
    if isinstance(given, Series):
        return replace(given, name=name)
    path: Path = ("series", name)
    if given.file is not None:
        for key in ("time", "value"):
            if getattr(given, key) is not None:
                raise fault((*path, key), None, "given beside file", "either file, or time and value")
        return read_series(
            base / given.file,
            name=name,
            column=given.column,
            interval_h=given.interval_h,
            hold=given.hold,
            shown_as=given.file,
        )
    if given.time is None and given.value is None:
        raise fault((*path, "file"), None, "missing", 'for example file = "kp.csv", or time and value')
    for key in ("time", "value"):
        if getattr(given, key) is None:
            raise fault((*path, key), None, "missing", "time and value, of the same length")
    if given.column is not None:
        raise fault((*path, "column"), given.column, "belongs to a file", "no column beside time and value")
    times = [t.replace(tzinfo=UTC) if t.tzinfo is None else t for t in given.time or []]
    return Series(name, name, times, given.value, interval_h=given.interval_h, hold=given.hold)  # type: ignore[arg-type]


def _as_table(series: Series) -> dict[str, Any]:
    table: dict[str, Any] = {
        "time": [t.replace(tzinfo=UTC) for t in series.times.astype("datetime64[us]").tolist()],
        "value": series.values.tolist(),
        "hold": series.hold,
    }
    if series.interval_h is not None:
        table["interval_h"] = series.interval_h
    return table
