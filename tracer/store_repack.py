"""A finished trajectory file once more, compressed."""

from __future__ import annotations

import os
from contextlib import suppress
from pathlib import Path
from typing import Any

import h5py

from fields.errors import InputError
from tracer.store_layout import LIBVER
from tracer.store_log import write_at
from tracer.store_output import PART, check_replaced, locked, publish, room_for
from tracer.store_overlay import Overlay
from tracer.store_patient import Patient
from tracer.store_places import places_of
from tracer.store_reader import open as read
from tracer.store_seal import seal

LEVELS = range(1, 10)
SCALES = ("DIMENSION_LIST", "REFERENCE_LIST", "CLASS", "NAME")  # made anew, for they point into the file


def repack(
    path: str | os.PathLike[str], out: str | os.PathLike[str], *, level: int = 4, overwrite: bool = False
) -> tuple[int, int]:
    """Copy a trajectory file with its columns compressed (shuffle and gzip); all numbers and attributes stay.

    Parameters
    ----------
    path, out : path
    level : int
        1, fastest, to 9, smallest.
    overwrite : bool
        Replace an existing file, once the new one is whole.

    Returns
    -------
    before, after : int
        Bytes.

    Raises
    ------
    InputError
        When `path` is no whole trajectory file, or `out` cannot be written.
    Stopped
        When the disk is full.
    """
    if level not in LEVELS:
        raise InputError("not a level", "a whole number from 1 to 9", key="level", value=level)
    read(path)
    target = Path(out)
    check_replaced(target, overwrite)
    if target.exists() and target.samefile(path):
        raise InputError("is the file to repack", "another name for the output", file=str(out))
    if not target.parent.is_dir():
        raise InputError(f"the directory {target.parent} does not exist", "an existing directory", file=str(out))
    handle, part = locked(target, existing=False), Path(f"{target}{PART}")
    try:
        with room_for(target, os.stat(path).st_size, "repack it again"):
            _copied(path, handle, level)
            os.fsync(handle)
        publish(part, target, overwrite)
    finally:
        with suppress(FileNotFoundError):
            part.unlink()
        os.close(handle)
    return os.stat(path).st_size, os.stat(out).st_size


def _copied(path: str | os.PathLike[str], handle: int, level: int) -> None:
    stream = Patient(handle)
    with h5py.File(path, "r", locking=False) as source, h5py.File(stream, "w", libver=LIBVER, locking=False) as copy:
        _copy_group(source, copy, level)
        if "time" in source:
            copy["track/time"] = copy["time"]
        for name, dataset in _datasets(source).items():
            if dataset.is_scale:
                copy[name].make_scale(name.rpartition("/")[2])
        for name, dataset in _datasets(source).items():
            for axis, scales in zip(copy[name].dims, dataset.dims):
                for scale in scales.values():
                    axis.attach_scale(copy[scale.name])
    if stream.error is not None:
        raise stream.error
    os.ftruncate(handle, stream.size)
    written = Overlay(handle)
    with h5py.File(written, "r", locking=False) as copy:
        places = places_of(copy)
    write_at(handle, [seal(written, places)], stream.size)


def _datasets(file: h5py.File) -> dict[str, h5py.Dataset]:
    """All, each under one name."""
    found: dict[str, h5py.Dataset] = {}
    file.visititems(lambda _, item: found.update({item.name: item} if isinstance(item, h5py.Dataset) else {}))
    return found


def _copy_group(source: h5py.Group, copy: h5py.Group, level: int) -> None:
    _copy_attrs(source, copy)
    for name, item in source.items():
        if isinstance(item, h5py.Group):
            _copy_group(item, copy.create_group(name), level)
        elif item.name != "/track/time":  # another name of /time
            _copy_dataset(item, copy, name, level)


def _copy_dataset(source: h5py.Dataset, parent: h5py.Group, name: str, level: int) -> None:
    copy = parent.create_dataset(
        name, source.shape, source.dtype, chunks=source.chunks, fillvalue=source.fillvalue,
        shuffle=True, compression="gzip", compression_opts=level, fletcher32=True,
    )  # fmt: skip
    for begin in range(0, source.shape[0], source.chunks[0]):
        rows = slice(begin, begin + source.chunks[0])
        copy[rows] = source[rows]
    _copy_attrs(source, copy)


def _copy_attrs(source: Any, copy: Any) -> None:
    for name, value in source.attrs.items():
        if name not in SCALES:
            copy.attrs.create(name, value, dtype=source.attrs.get_id(name).dtype)
