"""What pydantic finds wrong, as the one error line of a run file."""

from __future__ import annotations

import re
from collections.abc import Iterable
from datetime import date
from typing import Any, Literal, get_args, get_origin

from pydantic import ValidationError
from pydantic.fields import FieldInfo
from pydantic_core import ErrorDetails

from fields.errors import InputError, nearest
from tracer.runfile.places import Path, fault, file_order, value_at
from tracer.runfile.schema import TABLES, keys_of

Fault = tuple[Path, InputError]

WRONG_TYPE = {
    "float_type": "a number",
    "int_type": "a whole number",
    "bool_type": "true or false",
    "string_type": 'text in "quotes"',
    "dict_type": "a table",
    "model_type": "a table",
    "datetime_type": "a date and time such as 2027-03-04T00:00:00Z, without quotes",
    "list_type": "a list in [ ]",
}
WITH_EXAMPLE = ("float_type", "int_type", "model_type", "dict_type")
UNIONS = {
    "species": 'a name such as "H+", or { mass_u = 16.0, charge = 1 }',
    "series": 'a table, for example file = "kp.csv"',
}
QUANTITY = "a number, a range { from = 1.0, to = 2.0 }, or for a grid a list"
WITH_UNIT = re.compile(r"(.+?)_(re|km|h|hours|min|deg|keV|kV|nT|mV_per_m|nT_per_re|u)")
BOUNDS = {
    "greater_than": ("gt", "above"),
    "greater_than_equal": ("ge", "of at least"),
    "less_than": ("lt", "below"),
    "less_than_equal": ("le", "of at most"),
}


def first(tables: dict[str, Any], faults: Iterable[Fault]) -> InputError | None:
    """The fault that stands first in the file."""
    return min(faults, key=lambda item: file_order(tables, item[0]), default=((), None))[1]


def translated(tables: dict[str, Any], error: ValidationError) -> list[Fault]:
    """Every fault that pydantic found, with its place."""
    found = []
    for detail in error.errors(include_url=False):
        # members of a union add a tag to the place, in angle brackets
        path = tuple(part for part in detail["loc"] if not (isinstance(part, str) and part.startswith("<")))
        found.append((path, _worded(path, value_at(tables, path), detail)))
    return found


def unknown_key(path: Path, value: Any, known: Iterable[str]) -> InputError:
    """An unknown key: the same key with another unit, the key of another table, or the nearest name."""
    name, known = str(path[-1]), list(known)
    for key in known:
        united = WITH_UNIT.fullmatch(key)
        if united and (name == united[1] or name.startswith(f"{united[1]}_")):
            return fault(path, value, "unknown key", f"the unit here is {united[2].replace('_per_', '/')}: {key}")
    for place, table in TABLES.items():
        if name in keys_of(table) and place != _pattern(path[:-1]) and name not in ("from", "to", "n", "file", "name"):
            return fault(path, value, "unknown key here", f"it belongs {_home(place)}")
    return fault(path, value, "unknown key", nearest(name, known))


def _worded(path: Path, value: Any, detail: ErrorDetails) -> InputError:
    kind, context = detail["type"], detail.get("ctx", {})
    if kind == "extra_forbidden":
        return unknown_key(path, value, keys_of(TABLES[_pattern(path[:-1])]))
    if kind == "missing":
        return fault(path, None, "missing", _example(path))
    if kind == "finite_number":
        return fault(path, value, "not a finite number", _example(path))
    if kind == "literal_error":
        return fault(path, value, "not one of the choices", nearest(str(value), _choices(path)))
    if kind in BOUNDS:
        name, words = BOUNDS[kind]
        return fault(path, value, "out of range", f"a number {words} {context[name]:g}")
    if kind in ("string_too_short", "too_short"):
        return fault(path, value, "empty", _example(path))
    if kind == "string_too_long":
        return fault(path, value, "too long", f"at most {context['max_length']} characters")
    return fault(path, value, "wrong type", _wanted(path, value, kind))


def _wanted(path: Path, value: Any, kind: str) -> str:
    if kind == "union_tag_not_found":
        return next((UNIONS[str(part)] for part in path if part in UNIONS), QUANTITY)
    if kind == "datetime_type" and isinstance(value, date):
        return f"a date with a time: {value.isoformat()}T00:00:00Z"
    if kind == "list_type" and len(path) == 1:
        return f"double brackets: [[{path[0]}]]"
    if kind in ("model_type", "dict_type") and len(path) == 1:
        return f"a single table [{path[0]}]"
    info, wanted = _field(path), WRONG_TYPE.get(kind, "another value")
    example = f" such as {info.examples[0]}" if info and info.examples and kind in WITH_EXAMPLE else ""
    return wanted + example


def _pattern(path: Path) -> tuple[str, ...]:
    names = tuple(part for part in path if isinstance(part, str))
    return ("series", "*") if names[:1] == ("series",) and len(names) == 2 else names


def _field(path: Path) -> FieldInfo | None:
    table = TABLES.get(_pattern(path[:-1]))
    if table is None:
        return None
    return next((info for name, info in table.model_fields.items() if (info.alias or name) == path[-1]), None)


def _example(path: Path) -> str:
    if path[-1] in ("time", "magnetic") and len(path) == 1:
        return f"a table [{path[-1]}]"
    info = _field(path)
    if info is None or not (info.examples or isinstance(info.default, float)):
        return "a value"
    example = info.examples[0] if info.examples else info.default
    return f"for example {path[-1]} = {example}"


def _choices(path: Path) -> list[str]:
    info = _field(path)
    return [] if info is None else _literals(info.annotation)


def _literals(annotation: Any) -> list[str]:
    """The choices of a Literal, or of one that may be left out."""
    if get_origin(annotation) is Literal:
        return [str(choice) for choice in get_args(annotation)]
    return [choice for member in get_args(annotation) for choice in _literals(member)]


def _home(place: tuple[str, ...]) -> str:
    if not place:
        return "at the top, before the first table"
    double = place[0] in ("population", "electric", "orbit")
    table = ".".join("NAME" if part == "*" else part for part in place)
    return f"in [[{table}]]" if double else f"in [{table}]"
