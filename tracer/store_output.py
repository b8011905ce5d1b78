"""Where a trajectory file may be written, how large it will be, and how it comes to stand there."""

from __future__ import annotations

import errno
import fcntl
import os
import shutil
from collections.abc import Iterator, Mapping
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import Any

import h5py

from fields.errors import InputError
from tracer.records import Result
from tracer.scenario import Scenario
from tracer.stopping import Stopped
from tracer.store_attrs import processor, provenance, versions
from tracer.store_layout import LIBVER, amend, build_skeleton, padded_bytes, skeleton
from tracer.store_log import Log
from tracer.store_places import places_of
from tracer.store_reader import kind
from tracer.store_reader import open as read
from tracer.store_seal import seal

PART, LOG = ".part", ".part.log"
MEASURED_WHOLE = 2**20  # bytes of numbers
BYTES_PER_INDEXED_CHUNK = 16  # address, size and filter mask in the fixed array by which HDF5 finds a chunk
FULL = (errno.ENOSPC, errno.EDQUOT, errno.EFBIG)


def expected_bytes(scenario: Scenario) -> int:
    """Size of the scenario's trajectory file, measured on a skeleton in memory."""
    sizes: list[tuple[int, int]] = []
    attrs = provenance(scenario)
    with h5py.File("memory", "w", driver="core", block_size=1, backing_store=False, libver=LIBVER) as file:
        build_skeleton(file, scenario, attrs, allocate=False)
        file.flush()
        file.visititems(lambda _, item: sizes.append(padded_bytes(item)) if isinstance(item, h5py.Dataset) else None)
        empty = int(file.id.get_filesize())
    numbers = sum(size for size, _ in sizes)
    if numbers < MEASURED_WHOLE:  # there the odd bytes by which HDF5 rounds count
        whole = skeleton(scenario, attrs)
        amend(whole, {"complete": True})
        with h5py.File(whole, "r") as file:
            places = places_of(file)
        return whole.size + len(seal(whole, places))
    return empty + numbers + sum(chunks for _, chunks in sizes if chunks > 1) * BYTES_PER_INDEXED_CHUNK


def size_text(size: float) -> str:
    """A number of bytes to three digits: ``12.3 GB``."""
    for unit in ("bytes", "kB", "MB", "GB", "TB", "PB", "EB", "ZB"):
        if size < 999.5 or unit == "ZB":
            break
        size /= 1000.0
    return f"{size:.3g} {unit}"


def check_output(
    path: str | os.PathLike[str], scenario: Scenario, overwrite: bool = False, resume: bool = False
) -> None:
    """See that the file of a scenario can be written at `path`. Writes nothing.

    Raises
    ------
    InputError
        See `check_place` and `check_room`.
    """
    check_place(path, overwrite, resume)
    check_room(path, expected_bytes(scenario), 'fewer particles, a larger every_min, or tracks = "single"')


def check_place(path: str | os.PathLike[str], overwrite: bool = False, resume: bool = False) -> None:
    """See that an output may stand at `path`. Writes nothing.

    Raises
    ------
    InputError
        When it exists and `overwrite` is false, is no regular file or a run file; when its directory is missing or
        read-only. When the file of an interrupted run stands there and neither `overwrite` nor `resume` says what is
        to become of it; when there is none and `resume` is true.
    """
    target, name = Path(path), str(path)
    check_replaced(target, overwrite or resume)
    parent = target.parent
    if not parent.is_dir():
        raise InputError(f"the directory {parent} does not exist", "an existing directory", file=name)
    if not os.access(parent, os.W_OK | os.X_OK):
        raise InputError(f"the directory {parent} is read-only", "a directory that can be written", file=name)
    _check_leftover(name, overwrite, resume)


def check_room(path: str | os.PathLike[str], needed: int, smaller: str) -> None:
    """See that the disk has room for an output of `needed` bytes; `smaller` says how to make do with less.

    Raises
    ------
    InputError
        When it has not.
    """
    name = str(path)
    free = shutil.disk_usage(Path(path).parent).free
    with suppress(OSError):
        free += os.stat(name + PART).st_blocks * 512  # a leftover gives its room back, or has it already
    if free < needed:
        problem = f"the file takes {size_text(needed)}, the disk has {size_text(free)} free"
        raise InputError(problem, f"another disk, {smaller}", file=name)


def finished(path: str | os.PathLike[str], scenario: Scenario) -> Result | None:
    """The file of a scenario when it is complete, so that there is nothing to resume; else None.

    Raises
    ------
    InputError
        When what stands there is the file of another run, and nothing of this one waits beside it.
    """
    target, name = Path(path), str(path)
    part, log = Path(name + PART), Path(name + LOG)
    if not target.exists() or (part.exists() and log.exists() and not part.samefile(target)):
        return None
    result = read(target)
    refuse_other_run(result.attrs, provenance(scenario), name)
    if part.exists() and part.samefile(target):  # a kill between the last two steps
        part.unlink()
    if not part.exists():
        log.unlink(missing_ok=True)
    return result


def refuse_other_run(found: Mapping[str, Any], wanted: Mapping[str, Any], name: str) -> None:
    """See that the root attributes of a complete file are those of a run; what it was computed with may differ.

    Raises
    ------
    InputError
        Naming the first that is not.
    """
    computed_with = {**versions(), **processor()}
    for key, value in wanted.items():
        if key not in computed_with and found.get(key) != value:
            remedy = "another name for the output, or --overwrite in place of --resume"
            raise InputError("is complete, but of another run", remedy, key=key, file=name)


def check_replaced(target: Path, allowed: bool) -> None:
    """Refuse what no output replaces: anything that exists unless `allowed`, and never a run file."""
    other = "another name for the output"
    if not os.path.lexists(target):
        return
    if not target.is_file():
        raise InputError("exists and is not a file", other, file=str(target))
    if not allowed:
        raise InputError("exists", f"{other}, or --overwrite to replace it", file=str(target))
    if kind(target) == "run file":
        raise InputError("is a run file, which no output replaces", other, file=str(target))


def _check_leftover(name: str, overwrite: bool, resume: bool) -> None:
    part = name + PART
    if not os.path.lexists(part):
        if resume:
            raise InputError("nothing to resume", "the same command without --resume", file=name)
        return
    if not Path(part).is_file():
        raise InputError("exists and is not a file", "another name for the output", file=part)
    handle = os.open(part, os.O_RDONLY | os.O_CLOEXEC)
    try:
        lock(handle, name)
    finally:
        os.close(handle)
    if overwrite or resume:
        return
    log = Log.read(Path(name + LOG))
    if log is not None:
        log.close()
        remedy = "--resume to go on with it, or --overwrite to start again"
        raise InputError("an interrupted run has left what it finished", remedy, file=part)


def locked(path: Path, existing: bool) -> int:
    """Descriptor of the unfinished file of `path`, which no other process writes from here on.

    Parameters
    ----------
    existing : bool
        Open what stands there; else make it anew.
    """
    part, name = Path(f"{path}{PART}"), str(path)
    while True:
        try:
            handle = os.open(part, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o666)
        except PermissionError as error:
            remedy = "a directory that can be written"
            raise InputError(f"the directory {path.parent} is read-only", remedy, file=name) from error
        except FileNotFoundError as error:
            raise InputError(f"cannot be made in {path.parent}", "another directory", file=name) from error
        try:
            lock(handle, name)
            if _is_at(handle, part):
                if existing or os.fstat(handle).st_size == 0:
                    return handle
                # Not emptied but unlinked: a run killed at its last step may have left one file under both names.
                with suppress(FileNotFoundError):
                    Path(f"{path}{LOG}").unlink()
                part.unlink()
        except BaseException:
            os.close(handle)
            raise
        os.close(handle)


def lock(handle: int, name: str) -> None:
    """Keep other processes from a file.

    Raises
    ------
    InputError
        When one is there already.
    """
    try:
        fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError as error:
        raise InputError("another run is writing it", "wait for that run, or another name", file=name) from error
    except OSError:
        pass  # a file system without locks


def _is_at(handle: int, path: Path) -> bool:
    try:
        return os.path.samestat(os.fstat(handle), os.stat(path))
    except FileNotFoundError:
        return False


@contextmanager
def room_for(path: Path, needed: int, then: str = "the same command with --resume goes on") -> Iterator[None]:
    """A full disk, a quota or a limit on the size of files, met inside, stops the run.

    Raises
    ------
    Stopped
        Saying how many bytes are missing of the `needed` ones of `path`.
    """
    try:
        yield
    except OSError as error:
        if error.errno not in FULL:
            raise
        missing = _missing(path, needed, error.errno == errno.EFBIG)
        problem = "is larger than a file may be" if error.errno == errno.EFBIG else "the disk is full"
        size = size_text(missing)
        amount = f"{missing} bytes are missing" + ("" if size.endswith("bytes") else f" ({size})")
        raise Stopped(f"{path}: {problem}: {amount}; make room, then {then}") from error


def _missing(path: Path, needed: int, limited: bool) -> int:
    if limited:
        import resource

        limit = resource.getrlimit(resource.RLIMIT_FSIZE)[0]
        return max(needed - limit, 1) if limit != resource.RLIM_INFINITY else needed
    taken = os.stat(f"{path}{PART}").st_blocks * 512
    return max(needed - taken - shutil.disk_usage(path.parent).free, 1)


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
    sync_directory(path)


def sync_directory(path: Path) -> None:
    """Bring the names beside a file to the disk."""
    directory = os.open(path.parent, os.O_RDONLY)
    try:
        os.fsync(directory)
    finally:
        os.close(directory)
