"""Places in a run file: a path through its tables, and how it is written in an error line.

A place reads as in TOML, with list members counted from 1: ``time.hours``, ``population[1].energy_keV.from`` for a
key of the first ``[[population]]``, ``electric[2].gamma``, ``population[1].pitch_deg[3]`` for the third member of a
list.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from typing import Any

from fields.errors import InputError

Path = tuple[str | int, ...]

BARE_KEY = re.compile(r"[A-Za-z0-9_-]+\Z")


def key_text(path: Path) -> str:
    """The path as the user would write it."""
    text = ""
    for part in path:
        if isinstance(part, int):
            text += f"[{part + 1}]"
        else:
            name = part if BARE_KEY.match(part) else '"' + part.encode("unicode_escape").decode() + '"'
            text += f".{name}" if text else name
    return text


def value_at(tables: Any, path: Path) -> Any:
    """What stands at `path`, None when nothing does."""
    here = tables
    for part in path:
        named = isinstance(here, Mapping) and part in here
        listed = isinstance(here, list) and isinstance(part, int) and part < len(here)
        if not (named or listed):
            return None
        here = here[part]
    return here


def file_order(tables: Any, path: Path) -> tuple[int, ...]:
    """A key that sorts paths as they stand in the file; what is missing stands at the end of its table."""
    order: list[int] = []
    here = tables
    for part in path:
        if isinstance(here, Mapping):
            keys = list(here)
            order.append(keys.index(part) if part in here else len(keys))
            here = here.get(part)
        elif isinstance(part, int):
            order.append(part)
            here = here[part] if isinstance(here, list) and part < len(here) else None
    return tuple(order)


def fault(path: Path, value: Any, problem: str, remedy: str = "") -> InputError:
    """The error for what stands at `path`; a table under a header is not repeated in the line."""
    headed = len(path) == 1 or isinstance(path[-1], int)
    tables = isinstance(value, Mapping) or (isinstance(value, list) and any(isinstance(m, Mapping) for m in value))
    return InputError(problem, remedy, key=key_text(path), value=None if headed and tables else value)


def under(path: Path, error: InputError) -> InputError:
    """An error that names a key of its own, moved to where that key stands."""
    if error.file:
        return error
    key = f"{key_text(path)}.{error.key}" if error.key else key_text(path)
    return InputError(error.problem, error.remedy, key=key, value=error.value)
