"""CSV with a header and ISO 8601 times."""

from __future__ import annotations

import csv
import math
from collections.abc import Iterator, Sequence

from fields.clock import iso_micros
from fields.errors import InputError, nearest
from fields.readers.kp import kp_values
from fields.readers.rows import Gathered, Rows, line_fault, number
from fields.readers.textfile import TextFile

TIME = "time"
_DELIMITERS = ",;\t"
_KINDS = "a CSV with a header such as time,kp, a GFZ Kp text file, or a CSSI space-weather text file"


def read_csv(text: TextFile, name: str, column: str | None) -> Rows:
    """Rows of one value column. Blank lines and ``#`` comments are skipped; a column called kp may use any Kp
    notation.

    Parameters
    ----------
    text : TextFile
    name : str
        Of the series, for the messages.
    column : str or None
        Which value column; may be left out when there is only one.

    Raises
    ------
    InputError
        Naming the line and what stands there.
    """
    table = table_rows(text)
    try:
        line, header = next(table)
    except StopIteration:
        raise InputError("holds comments only", _KINDS, file=text.file) from None
    time_at = _time_column(header, line, text.file)
    value_at = _value_column(header, time_at, name, column, text.file)
    lines: list[int] = []
    times: list[int] = []
    cells: list[str] = []
    for line, row in table:
        if len(row) != len(header):
            raise line_fault(text.file, line, None, f"{len(row)} cells", f"{len(header)}, as in the header")
        time = iso_micros(row[time_at])
        if time is None:
            raise line_fault(text.file, line, row[time_at], "not a time", "ISO 8601 in UTC, as 2027-03-04T03:00:00Z")
        lines.append(line)
        times.append(time)
        cells.append(row[value_at])
    if not lines:
        raise InputError("a header and no rows", "at least one row of time and value", file=text.file)
    values = _values(header[value_at], cells, lines, text.file)
    found = Gathered(text.file)
    for line, time, value, cell in zip(lines, times, values, cells):
        if math.isnan(value):
            found.add_void(line, time, f"fill value {cell}")
        else:
            found.add(line, time, value)
    return found.rows(header[value_at])


def table_rows(text: TextFile) -> Iterator[tuple[int, list[str]]]:
    """Line number and stripped cells of every line that holds something; the first one is the header."""
    delimiter = ""
    for line, content in enumerate(text.lines, start=1):
        bare = content.strip()
        if not bare or bare.startswith("#"):
            continue
        delimiter = delimiter or next((mark for mark in _DELIMITERS if mark in bare), ",")
        if '"' in content:
            try:
                cells = next(csv.reader([content], delimiter=delimiter, skipinitialspace=True))
            except csv.Error as fault:
                raise line_fault(text.file, line, None, f"not a CSV line ({fault})") from None
        else:
            cells = content.split(delimiter)
        cells = [cell.strip() for cell in cells]
        if any(cells):
            yield line, cells


def _time_column(header: Sequence[str], line: int, file: str) -> int:
    found = [i for i, cell in enumerate(header) if cell.lower() == TIME]
    if len(found) == 1 and len(header) > 1:
        return found[0]
    what = ",".join(header)
    if found:
        problem = "no value column" if len(header) == 1 else "two columns called time"
        raise line_fault(file, line, what, problem, "a header such as time,kp")
    if iso_micros(header[0]) is not None:
        raise line_fault(file, line, what, "no header", "a first line such as time,kp")
    raise line_fault(file, line, what, "no column called time", _KINDS)


def _value_column(header: Sequence[str], time_at: int, name: str, column: str | None, file: str) -> int:
    others = [i for i in range(len(header)) if i != time_at]
    names = [header[i] for i in others]
    key = f"series.{name}.column"
    if column is None:
        if len(others) == 1:
            return others[0]
        raise InputError(f"missing: {file} has several value columns", "one of " + ", ".join(names), key=key)
    found = [i for i in others if header[i] == column] or [i for i in others if header[i].lower() == column.lower()]
    if not found:
        raise InputError(f"no such value column in {file}", nearest(column, names), key=key, value=column)
    if len(found) > 1:
        raise InputError(f"stands twice in the header of {file}", "columns of different names", key=key, value=column)
    return found[0]


def _values(quantity: str, cells: list[str], lines: list[int], file: str) -> list[float]:
    """Numbers of the column; NaN only where a Kp column holds its fill value."""
    for cell, line in zip(cells, lines):
        if not cell:
            raise line_fault(file, line, cell, f"no value of {quantity}", "a number; leave out rows without a value")
    if quantity.lower() == "kp":
        return [float(value) for value in kp_values(cells, lines, file)]
    values = []
    for cell, line in zip(cells, lines):
        value = number(cell)
        if value is None or not math.isfinite(value):
            problem = "not a number" if value is None else "not a finite number"
            raise line_fault(file, line, cell, problem, "a number such as 4.5; leave out rows without a value")
        values.append(value)
    return values
