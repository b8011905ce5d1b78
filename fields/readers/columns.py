"""Several value columns of one CSV, chosen by name."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from fields.clock import Micros, iso_micros
from fields.errors import InputError
from fields.readers.csvtable import TIME, table_rows
from fields.readers.rows import check_order, line_fault, number
from fields.readers.textfile import TextFile
from fields.units import Floats


@dataclass(frozen=True, eq=False)
class Columns:
    """Rows of several values.

    Attributes
    ----------
    names : tuple of str
    lines : list of int, length n
        Where each row stands in the file.
    times : ndarray of int64, shape (n,)
        Microseconds since 1970-01-01 UTC, rising.
    values : ndarray, shape (n, len(names))
        Finite.
    """

    names: tuple[str, ...]
    lines: list[int]
    times: Micros
    values: Floats


def read_columns(text: TextFile, choices: Sequence[tuple[str, ...]]) -> Columns:
    """The columns of the first of `choices` that the header holds whole; others in the file are passed over.

    Blank lines and ``#`` comments are skipped.

    Raises
    ------
    InputError
        Naming the line and what stands there.
    """
    table = table_rows(text)
    line, header = next(table, (1, [""]))
    found = [cell.lower() for cell in header]
    names = next((names for names in choices if {TIME, *names} <= set(found)), None)
    wanted = " or ".join(",".join((TIME, *names)) for names in choices)
    if names is None:
        raise line_fault(text.file, line, ",".join(header), "not the columns of an orbit", f"a header with {wanted}")
    for name in (TIME, *names):
        if found.count(name) > 1:
            raise line_fault(text.file, line, ",".join(header), f"two columns called {name}", "one of each name")
    at = [found.index(name) for name in (TIME, *names)]
    lines: list[int] = []
    times: list[int] = []
    values: list[list[float]] = []
    for line, row in table:
        if len(row) != len(header):
            raise line_fault(text.file, line, None, f"{len(row)} cells", f"{len(header)}, as in the header")
        time = iso_micros(row[at[0]])
        if time is None:
            raise line_fault(text.file, line, row[at[0]], "not a time", "ISO 8601 in UTC, as 2027-03-04T03:00:00Z")
        lines.append(line)
        times.append(time)
        values.append([_number(text.file, line, name, row[i]) for name, i in zip(names, at[1:])])
    if len(lines) < 2:
        raise InputError(f"too few rows: {len(lines)}", "two or more under the header", file=text.file)
    stamps = np.array(times, dtype=np.int64)
    check_order(stamps, file=text.file, lines=lines)
    return Columns(names, lines, stamps, np.array(values, dtype=np.float64))


def _number(file: str, line: int, name: str, cell: str) -> float:
    value = number(cell)
    if value is None or not math.isfinite(value):
        raise line_fault(file, line, cell, f"{name} is not a finite number", "a number such as 4.5")
    return value
