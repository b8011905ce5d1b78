"""Writing a trajectory file: under another name until it is whole, then moved into place."""

from __future__ import annotations

import fcntl
import os
import shutil
from collections.abc import Mapping
from contextlib import suppress
from pathlib import Path
from types import TracebackType
from typing import Any, Self

import h5py
import numpy as np

from fields.errors import InputError
from tracer.records import Chunk
from tracer.scenario import Scenario
from tracer.store_attrs import provenance
from tracer.store_layout import LIBVER, build_skeleton, fill_coordinates, groups_of, padded_bytes, write_attrs
from tracer.store_reader import kind

PART = ".part"
MEASURED_WHOLE = 2**20  # bytes of numbers
BYTES_PER_INDEXED_CHUNK = 16  # address, size and filter mask in the fixed array by which HDF5 finds a chunk


def expected_bytes(scenario: Scenario) -> int:
    """Size of the scenario's trajectory file, measured on a skeleton in memory."""
    empty, sizes = _skeleton_bytes(scenario, allocate=False)
    numbers = sum(size for size, _ in sizes)
    if numbers < MEASURED_WHOLE:  # there the odd bytes by which HDF5 rounds count
        return _skeleton_bytes(scenario, allocate=True)[0]
    return empty + numbers + sum(chunks for _, chunks in sizes if chunks > 1) * BYTES_PER_INDEXED_CHUNK


def _skeleton_bytes(scenario: Scenario, allocate: bool) -> tuple[int, list[tuple[int, int]]]:
    """Size of a skeleton, and what `padded_bytes` says of each of its datasets."""
    sizes: list[tuple[int, int]] = []
    with h5py.File("memory", "w", driver="core", block_size=1, backing_store=False, libver=LIBVER) as file:
        build_skeleton(file, scenario, provenance(scenario), allocate)
        if allocate:  # then as the writer goes on
            fill_coordinates(file, scenario)
            file.flush()
            write_attrs(file, {"complete": True})
        file.flush()
        file.visititems(lambda _, item: sizes.append(padded_bytes(item)) if isinstance(item, h5py.Dataset) else None)
        return file.id.get_filesize(), sizes


def size_text(size: float) -> str:
    """A number of bytes to three digits: ``12.3 GB``."""
    for unit in ("bytes", "kB", "MB", "GB", "TB", "PB", "EB", "ZB"):
        if size < 999.5 or unit == "ZB":
            break
        size /= 1000.0
    return f"{size:.3g} {unit}"


def check_output(path: str | os.PathLike[str], scenario: Scenario, overwrite: bool = False) -> None:
    """See that the file of a scenario can be written at `path`. Writes nothing.

    Raises
    ------
    InputError
        When it exists and `overwrite` is false, is no regular file or a run file; when its directory is missing or
        read-only; when the disk has less room than the file takes.
    """
    target, name = Path(path), str(path)
    if os.path.lexists(target):
        if not target.is_file():
            raise InputError("exists and is not a file", "another name for the output", file=name)
        if not overwrite:
            raise InputError("exists", "another name for the output, or --overwrite to replace it", file=name)
        if kind(target) == "run file":
            raise InputError("is a run file, which no output replaces", "another name for the output", file=name)
    parent = target.parent
    if not parent.is_dir():
        raise InputError(f"the directory {parent} does not exist", "an existing directory", file=name)
    if not os.access(parent, os.W_OK | os.X_OK):
        raise InputError(f"the directory {parent} is read-only", "a directory that can be written", file=name)
    needed, free = expected_bytes(scenario), shutil.disk_usage(parent).free
    with suppress(OSError):
        free += os.stat(str(path) + PART).st_blocks * 512  # a leftover gives its room back
    if free < needed:
        remedy = 'another disk, fewer particles, a larger every_min, or tracks = "single"'
        raise InputError(f"the file takes {size_text(needed)}, the disk has {size_text(free)} free", remedy, file=name)


class TrajectoryWriter:
    """Context manager that writes one trajectory file, chunk by chunk.

    It stands under `path` + ``.part``, locked, with the space of all datasets taken from the start; `finish`
    completes it and moves it into place. Left without `finish`, by an exception or not, the ``.part`` is removed.

    Parameters
    ----------
    path : path-like
    scenario : Scenario
    attrs : mapping
        Root attributes beyond `tracer.store_attrs.provenance`.
    overwrite : bool
        Replace an existing file, at the final move.

    Raises
    ------
    InputError
        See `check_output`; also when another run is writing the same file.
    """

    def __init__(
        self, path: str | os.PathLike[str], scenario: Scenario, attrs: Mapping[str, Any], overwrite: bool = False
    ) -> None:
        check_output(path, scenario, overwrite)
        self.path = Path(path)
        self.part = Path(str(path) + PART)
        self._scenario = scenario
        self._attrs = dict(attrs)
        self._overwrite = overwrite
        self._written: list[tuple[int, int]] = []
        self._file: h5py.File | None = None
        self._lock = -1

    def __enter__(self) -> Self:
        self._lock = self._locked()
        try:
            # The lock is ours: HDF5 would empty a file that another run is writing before it tried its own.
            self._file = h5py.File(self.part, "w", libver=LIBVER, locking=False)
            attrs = {**provenance(self._scenario), **self._attrs}
            build_skeleton(self._file, self._scenario, attrs, allocate=True)
            fill_coordinates(self._file, self._scenario)
            self._file.flush()
        except BaseException:
            self._discard()
            raise
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._discard()

    def write(self, chunk: Chunk) -> None:
        """Put the columns of some consecutive particles at their place; chunks may come in any order."""
        file = self._opened()
        stop = chunk.first + chunk.end["cause"].size
        for group, columns in groups_of(self._scenario).items():
            values: dict[str, np.ndarray] = getattr(chunk, group)
            for column in columns:
                dataset = file[f"{group}/{column.name}"]
                data = stored(np.asarray(values[column.name]), column.name, dataset.dtype)
                if data.shape != (stop - chunk.first, *dataset.shape[1:]):
                    raise ValueError(f"{group}/{column.name} of particles {chunk.first} to {stop}: shape {data.shape}")
                dataset[chunk.first : stop] = data
        self._written.append((chunk.first, stop))

    def finish(self, extra_attrs: Mapping[str, Any] | None = None) -> Path:
        """Add attributes, mark the file complete, bring it to the disk and move it into place.

        Raises
        ------
        InputError
            When a file has come to stand at the path meanwhile; the finished one then stays under its ``.part`` name.
        """
        file = self._opened()
        self._check_whole()
        write_attrs(file, {**(extra_attrs or {}), "complete": True})
        file.close()
        self._file = None
        os.fsync(self._lock)
        try:
            publish(self.part, self.path, self._overwrite)
        finally:
            os.close(self._lock)
            self._lock = -1
        return self.path

    def _opened(self) -> h5py.File:
        if self._file is None:
            raise ValueError("the writer is not open")
        return self._file

    def _check_whole(self) -> None:
        expected = 0
        for first, stop in sorted(self._written):
            if first != expected:
                raise ValueError(f"particle {min(first, expected)} was not written exactly once")
            expected = stop
        if expected != self._scenario.count:
            raise ValueError(f"{expected} of {self._scenario.count} particles were written")

    def _locked(self) -> int:
        name = str(self.path)
        try:
            handle = os.open(self.part, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o666)
        except PermissionError as error:
            remedy = "a directory that can be written"
            raise InputError(f"the directory {self.path.parent} is read-only", remedy, file=name) from error
        except FileNotFoundError as error:
            raise InputError(f"cannot be made in {self.path.parent}", "another directory", file=name) from error
        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError as error:
            os.close(handle)
            raise InputError("another run is writing it", "wait for that run, or another name", file=name) from error
        except OSError:
            pass  # a file system without locks
        return handle

    def _discard(self) -> None:
        """Remove what is not finished."""
        if self._file is not None:
            with suppress(Exception):  # a full disk fails here once more
                self._file.close()
            self._file = None
        if self._lock >= 0:
            with suppress(OSError):
                self.part.unlink()
            os.close(self._lock)
            self._lock = -1


def stored(data: np.ndarray, name: str, dtype: np.dtype[Any]) -> np.ndarray:
    """`data` in the type of its dataset; local time stays below 24 h where single precision rounds it up."""
    converted = data.astype(dtype)
    if name == "mlt_h" and dtype.itemsize < data.dtype.itemsize:
        converted[converted >= 24.0] = 0.0
    return converted


def publish(part: Path, path: Path, overwrite: bool) -> None:
    """Move a finished file into place in one step, never over a file unless `overwrite`."""
    taken = InputError("exists by now", f"the finished result is in {part}; move it", file=str(path))
    if overwrite:
        os.replace(part, path)
    else:
        try:
            os.link(part, path)  # unlike a rename, it fails when the name is taken
            part.unlink()
        except FileExistsError:
            raise taken from None
        except OSError:  # a file system without hard links
            if os.path.lexists(path):
                raise taken from None
            os.rename(part, path)
    directory = os.open(path.parent, os.O_RDONLY)
    try:
        os.fsync(directory)
    finally:
        os.close(directory)
