"""Which format a file has, by its content alone."""

from __future__ import annotations

from fields.errors import InputError
from fields.readers.cssi import looks_like_cssi, read_cssi
from fields.readers.csvtable import read_csv
from fields.readers.gfz import looks_like_gfz, read_gfz
from fields.readers.rows import Rows
from fields.readers.textfile import TextFile


def read_rows(text: TextFile, name: str, column: str | None, interval_h: float | None) -> Rows:
    """Rows of a CSV, a GFZ Kp text file, or a CSSI space-weather text file.

    Parameters
    ----------
    text : TextFile
    name : str
        Of the series, for the messages.
    column, interval_h : str or None, float or None
        As the user gave them; an index file allows only what it holds.

    Raises
    ------
    InputError
        Naming the line and what stands there, or the key that does not fit the file.
    """
    if looks_like_cssi(text.lines):
        rows = read_cssi(text)
    elif looks_like_gfz(text.lines):
        rows = read_gfz(text)
    else:
        return read_csv(text, name, column)
    if column is not None and column.lower() != rows.quantity:
        problem = f"no such column: {text.file} is read for its {rows.quantity}"
        raise InputError(problem, rows.quantity, key=f"series.{name}.column", value=column)
    if interval_h is not None and interval_h != rows.interval_h:
        problem = f"{text.file} holds values of {rows.interval_h:g} h"
        remedy = f"{rows.interval_h:g}, or leave it out"
        raise InputError(problem, remedy, key=f"series.{name}.interval_h", value=interval_h)
    return rows
