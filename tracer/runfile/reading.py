"""From a file to its tables: text, TOML, and only plain values."""

from __future__ import annotations

import math
import re
import tomllib
from collections.abc import Mapping
from datetime import date, datetime, time
from os import PathLike
from typing import Any
from unicodedata import category

import numpy as np

from fields.errors import InputError
from fields.series import Series
from tracer.runfile.places import Path, fault

HDF5_SIGNATURE = b"\x89HDF\r\n\x1a\n"
LARGEST_BYTES = 64 * 2**20  # a run file is written by hand; a history of centuries belongs in a CSV
DEEPEST = 8
UNPRINTABLE = ("Cc", "Cs", "Zl", "Zp")  # control characters, lone surrogates, line and paragraph separators


def read_text(path: str | PathLike[str]) -> str:
    """The text of a run file.

    Raises
    ------
    InputError
        When it is missing, a folder, unreadable, a trajectory file, or not text.
    """
    name = str(path)
    try:
        with open(path, "rb") as stream:
            raw = stream.read(LARGEST_BYTES + 1)
    except FileNotFoundError:
        raise InputError("no such file", "a run file, as driftrose new FILE writes one", file=name) from None
    except IsADirectoryError:
        raise InputError("is a folder", "the name of a run file", file=name) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(f"cannot be read: {reason}", "a run file that may be read", file=name) from None
    if raw.startswith(HDF5_SIGNATURE):
        raise InputError("is an HDF5 file, a result and not a run file", "a run file in TOML", file=name)
    if len(raw) > LARGEST_BYTES:
        raise InputError("is larger than 64 MiB", "a run file in TOML, long histories in CSV files", file=name)
    try:
        return raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        raise InputError("is not UTF-8 text", "a run file in TOML", file=name, key=f"line {line}") from None


def parse(text: str) -> dict[str, Any]:
    """The tables of a TOML text.

    Raises
    ------
    InputError
        With line and column when the syntax is wrong.
    """
    try:
        tables = tomllib.loads(text.replace("\r\n", "\n"))
    except tomllib.TOMLDecodeError as error:
        found = re.fullmatch(r"(?s)(.*) \(at (?:line (\d+), column (\d+)|end of document)\)", str(error))
        what = re.sub(r"\((.*?),?\)", _dotted, found[1] if found else str(error))
        place = f"line {found[2]}, column {found[3]}" if found and found[2] else _end_of(text)
        raise InputError(f"TOML syntax: {what[:1].lower()}{what[1:]}", "correct the syntax there", key=place) from None
    except (ValueError, RecursionError):
        raise InputError("TOML syntax: a number or a nesting beyond all use", "a run file written by hand") from None
    return plain_tables(tables)


def _dotted(keys: re.Match[str]) -> str:
    return keys[1].replace("', '", ".").strip("'")


def _end_of(text: str) -> str:
    lines = text.splitlines() or [""]
    return f"line {len(lines)}, column {len(lines[-1]) + 1}"


def plain_tables(tables: Mapping[str, Any]) -> dict[str, Any]:
    """A copy made of plain values only, numpy's turned into Python's, entries of None left out.

    Raises
    ------
    InputError
        For what a run file cannot hold: other types, control characters, integers beyond 64 bits, deep nesting.
    """
    copy = _plain((), tables)
    assert isinstance(copy, dict)
    return copy


def _plain(path: Path, value: Any) -> Any:
    if len(path) > DEEPEST:
        raise fault(path[:1], None, "nested too deep", "tables as in the reference")
    if isinstance(value, np.generic):
        value = value.item()
    if isinstance(value, Mapping):
        return {_key(path, key): _plain((*path, key), member) for key, member in value.items() if member is not None}
    if isinstance(value, (list, tuple, np.ndarray)):
        return [_plain((*path, i), member) for i, member in enumerate(value)]
    if isinstance(value, str):
        return _text(path, value)
    if isinstance(value, int) and not isinstance(value, bool) and not -(2**63) <= value < 2**63:
        raise fault(path, _rough(value), "more than 64 bits", "a smaller whole number, or one with a decimal point")
    if isinstance(value, (bool, int, float, datetime, date, time, Series)):
        return value
    raise fault(path, type(value).__name__, "wrong type", "a number, text, a date and time, a list or a table")


def _key(path: Path, key: Any) -> str:
    if not isinstance(key, str):
        raise fault(path, repr(key), "has a key that is not text", "keys as in a run file")
    _text((*path, key), key)
    return key


def _text(path: Path, text: str) -> str:
    bad = next((c for c in text if category(c) in UNPRINTABLE), None)
    if bad is not None:
        code = f"U+{ord(bad):04X}"
        raise fault(path, None, f"holds the character {code}", "one line of printable text")
    return text


def _rough(number: int) -> float:
    """A size to show: the digits of an integer may fill pages."""
    return float(number) if number.bit_length() < 1024 else math.inf if number > 0 else -math.inf
