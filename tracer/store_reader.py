"""Reading a trajectory file: is it one, is it whole, and its columns on demand."""

from __future__ import annotations

import json
import os
import re
import tomllib
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import Any, Literal

import h5py
import numpy as np

from fields.drivers import Driver
from fields.errors import InputError
from tracer.records import GROUPS, Column, Result
from tracer.store_attrs import ACCESS_FORMAT, DIGEST, FORMAT, FORMAT_VERSION, digest, plain_value
from tracer.store_seal import fault

SIGNATURE = b"\x89HDF\r\n\x1a\n"
TABLE_HEADER = re.compile(r"^\s*\[{1,2}\s*[A-Za-z_\"'][^\[\]]*\]{1,2}\s*(#.*)?$", re.MULTILINE)
LOOKED_AT = 2**20  # bytes by which a text file is told
MAKE_ONE = "a file made by driftrose trace"
MADE_BY = {FORMAT: MAKE_ONE, ACCESS_FORMAT: "a file made by driftrose access"}
NAMED = {FORMAT: "a trajectory file", ACCESS_FORMAT: "an access file"}
FIRST = {
    FORMAT: "trace it first, then name the .h5 file",
    ACCESS_FORMAT: "driftrose access on it first, then name the .access.h5 file",
}
AGAIN = "trace the run again"
KINDS: dict[Any, Literal["trajectories", "access"]] = {FORMAT: "trajectories", ACCESS_FORMAT: "access"}


def kind(path: str | os.PathLike[str]) -> Literal["run file", "trajectories", "access", "other"]:
    """What a file is, by its content: TOML (faulty or not), a trajectory file of any state, a result about access, or
    something else.

    Raises
    ------
    InputError
        When there is no such file, or it cannot be read.
    """
    head = _head(path)
    if head.startswith(SIGNATURE):
        try:
            if fault(path):
                return "other"
            with h5py.File(path, "r", locking=False) as file:
                return KINDS.get(plain_value(file.attrs.get("format")), "other")
        except (OSError, RuntimeError, KeyError, ValueError, TypeError):
            return "other"
    return "run file" if _looks_like_toml(head) else "other"


def open(path: str | os.PathLike[str]) -> Result:
    """A trajectory file as a Result whose columns are read when asked for.

    Raises
    ------
    InputError
        When it is missing, no trajectory file, of a newer format, incomplete, truncated or damaged. A column whose
        checksum does not fit raises when it is read.
    """
    refuse_content(path)
    with readable(path, "") as file:
        attrs = checked_attrs(file, str(path))
        count = _checked_shapes(file, str(path))
        time = np.asarray(_read(path, file, "time")) if "time" in file else np.empty(0)
        drivers = tuple(_driver(path, file, n, **texts) for n, texts in enumerate(json.loads(attrs["drivers"])))
    kept = {name: columns if time.size or name != "track" else () for name, columns in GROUPS.items()}
    groups = {name: Columns(path, columns, count) for name, columns in kept.items()}
    return Result(
        time_h=time,
        particle=groups["particle"],
        track=groups["track"],
        end=groups["end"],
        attrs=attrs,
        population_names=tuple(json.loads(attrs["population_names"])),
        species_names=tuple(json.loads(attrs["species_names"])),
        drivers=drivers,
    )


class Columns(Mapping[str, np.ndarray]):
    """The columns of one group, read from the file when asked for.

    A column over particles is kept once read; a track, which may be larger than memory, is not.
    """

    def __init__(self, path: str | os.PathLike[str], columns: tuple[Column, ...], count: int) -> None:
        self._shown = str(path)
        self._path = Path(path).resolve()
        self._columns = {column.name: column for column in columns}
        self._count = count
        self._kept: dict[str, np.ndarray] = {}

    def __getitem__(self, name: str) -> np.ndarray:
        column = self._columns[name]
        if name in self._kept:
            return self._kept[name]
        data = self._at(column, slice(None))
        if data.ndim == 1:
            self._kept[name] = data
        return data

    def rows(self, name: str, index: np.ndarray | slice) -> np.ndarray:
        """Some rows of a column, without reading the others."""
        column = self._columns[name]
        if isinstance(index, slice):
            return self._at(column, index)
        wanted = np.arange(self._count)[index]  # negative numbers and masks as numpy has them
        sorted_rows, places = np.unique(wanted, return_inverse=True)
        return self._at(column, sorted_rows)[places]

    def __iter__(self) -> Iterator[str]:
        return iter(self._columns)

    def __len__(self) -> int:
        return len(self._columns)

    def _at(self, column: Column, rows: np.ndarray | slice) -> np.ndarray:
        name = f"{column.group}/{column.name}"
        with readable(self._path, f"/{name}", self._shown) as file:
            data = np.asarray(file[name][rows])
            return data.astype(np.uint8) if column.name == "cause" else data


def _head(path: str | os.PathLike[str]) -> bytes:
    try:
        with Path(path).open("rb") as stream:
            return stream.read(LOOKED_AT)
    except FileNotFoundError:
        raise InputError("no such file", "the name of an existing file", file=str(path)) from None
    except IsADirectoryError:
        raise InputError("is a directory", "the name of a file", file=str(path)) from None
    except OSError as error:
        raise InputError(f"cannot be read ({error.strerror})", "a readable file", file=str(path)) from None


def _looks_like_toml(head: bytes) -> bool:
    try:
        text = head.decode("utf-8")
    except UnicodeDecodeError as error:
        if len(head) < LOOKED_AT or error.start < len(head) - 4:  # else a character cut in two
            return False
        text = head[: error.start].decode("utf-8")
    if "\0" in text:
        return False
    if TABLE_HEADER.search(text):
        return True
    try:
        return bool(tomllib.loads(text))
    except tomllib.TOMLDecodeError:
        return False


def refuse_content(path: str | os.PathLike[str], wanted: str = FORMAT, again: str = AGAIN) -> None:
    """See that a file is HDF5, with its seal unbroken where it has one."""
    head = _head(path)
    if head.startswith(SIGNATURE):
        if problem := fault(path):
            raise InputError(problem, again, file=str(path))
        return
    named = NAMED[wanted]
    if _looks_like_toml(head):
        problem = f"a run file where {named} belongs"
        raise InputError(problem, FIRST[wanted], file=str(path))
    problem = f"empty, not {named}" if not head else f"not {named}"
    raise InputError(problem, MADE_BY[wanted], file=str(path))


@contextmanager
def readable(path: str | os.PathLike[str], key: str, shown: str = "", again: str = AGAIN) -> Iterator[h5py.File]:
    """The open file; whatever HDF5 says of a damaged one becomes one clear line."""
    name = shown or str(path)
    try:
        with h5py.File(path, "r", locking=False) as file:
            yield file
    except InputError:
        raise
    except FileNotFoundError:
        raise InputError("no such file", "the name of an existing file", file=name) from None
    except (OSError, RuntimeError, KeyError, ValueError, TypeError, AttributeError) as error:
        raise InputError(_fault(str(error)), again, key=key, file=name) from error


def _fault(text: str) -> str:
    if "truncated file" in text:
        return "truncated: it ends before its data do"
    if "Fletcher32" in text or "filter returned failure" in text or "checksum" in text.lower():
        return "damaged: a checksum does not fit"
    return f"damaged: {' '.join(text.split())}"


def _read(path: str | os.PathLike[str], file: h5py.File, name: str) -> np.ndarray:
    try:
        return np.asarray(file[name][...])
    except (OSError, RuntimeError, KeyError) as error:
        raise InputError(_fault(str(error)), AGAIN, key=f"/{name}", file=str(path)) from error


def checked_attrs(
    file: h5py.File, name: str, wanted: str = FORMAT, version: int = FORMAT_VERSION, again: str = AGAIN
) -> dict[str, Any]:
    """The root attributes of a complete file of a format, once they are as they were written."""
    attrs = {key: plain_value(value) for key, value in file.attrs.items()}
    made_by = attrs.get("format")
    if made_by != wanted:
        is_ours = isinstance(made_by, str) and made_by.startswith("driftrose ")
        content = wanted.removeprefix("driftrose ")
        problem = f"holds {made_by}, not {content}" if is_ours else "an HDF5 file from elsewhere"
        raise InputError(problem, MADE_BY[wanted], file=name)
    if attrs.get(DIGEST) != digest(attrs):
        raise InputError("its attributes were changed after it was made", again, key=DIGEST, file=name)
    if attrs["format_version"] > version:
        remedy = f"a newer driftrose; this one reads up to {version}"
        raise InputError("unknown", remedy, key="format_version", value=attrs["format_version"], file=name)
    if not attrs["complete"]:
        raise InputError("incomplete: its run was stopped", again, file=name)
    return attrs


def _checked_shapes(file: h5py.File, name: str) -> int:
    """The number of particles, once every column stands where it belongs."""
    shape: tuple[int, ...] = file["particle_index"].shape
    wanted = dict.fromkeys(GROUPS, shape)
    if "time" in file:
        wanted["track"] = (*shape, *file["time"].shape)
    elif "track" not in file:
        del wanted["track"]
    for group, expected in wanted.items():
        for column in GROUPS[group]:
            found = file.get(f"{group}/{column.name}")
            if found is None or found.shape != expected:
                problem = "missing" if found is None else f"has shape {found.shape}, not {expected}"
                raise InputError(f"damaged: {problem}", AGAIN, key=f"/{group}/{column.name}", file=name)
    return shape[0]


def _driver(path: str | os.PathLike[str], file: h5py.File, number: int, name: str, hold: str) -> Driver:
    group = f"driver/{number}"
    start, value, slope = (_read(path, file, f"{group}/{key}") for key in ("start_h", "value", "slope"))
    return Driver(name, start, value, slope, float(file[group].attrs["end_h"]), hold)
