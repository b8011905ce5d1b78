"""The unfinished file of an access run: what is known of the targets so far, chunk by chunk, and the log beside it.

It holds plain columns, a chunk of targets after the other, and is no HDF5. A chunk counts as finished only when its
bytes give the digest that the log has, so whatever the moment of a kill, what stands in the log can be taken up again.
The result is made from it when all targets are known, under a third name.
"""

from __future__ import annotations

import hashlib
import os
from collections.abc import Callable, Mapping, Sequence
from contextlib import suppress
from pathlib import Path
from types import TracebackType
from typing import Any, Self

import numpy as np

from tracer.access_records import TARGET
from tracer.origins import Origins
from tracer.spans import Span, joined
from tracer.stopping import Stopped
from tracer.store_identity import damaged, refuse_other
from tracer.store_log import Log, reserve, write_at
from tracer.store_output import LOG, PART, check_replaced, locked, room_for, sync_directory

LOG_FORMAT = "driftrose access log 1"
ROWS = 4096  # targets of a chunk
WHOLE = "whole"  # the record before the result is moved into place
DTYPES = {column.name: np.dtype(column.dtype) for column in TARGET}
ROW_BYTES = sum(dtype.itemsize for dtype in DTYPES.values())
DIGEST_LETTERS = 32

Columns = dict[str, np.ndarray]


class OriginsKept:
    """Origins in memory: the same steps as with a file, without one."""

    def __init__(self, count: int) -> None:
        self.begun: dict[str, Any] | None = None
        self._count = count
        self._columns = {name: np.empty(count, dtype) for name, dtype in DTYPES.items()}

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        pass

    def begin(self, attrs: Mapping[str, Any]) -> None:
        """Take what is known at the start."""
        self.begun = dict(attrs)

    def missing(self) -> list[Span]:
        """The targets to trace, as spans: all of them."""
        return [(0, self._count)] if self._count else []

    def stopped(self) -> str:
        """What to say of a run that was stopped."""
        return "stopped before the end; nothing was kept"

    def write(self, chunk: Origins) -> None:
        """Put the columns of some consecutive targets at their place."""
        rows = slice(chunk.first, chunk.first + chunk.columns["region"].size)
        for name, column in self._columns.items():
            column[rows] = chunk.columns[name]

    def rows(self, first: int, stop: int, names: Sequence[str] = tuple(DTYPES)) -> Columns:
        """Columns of targets `first` to `stop` - 1."""
        return {name: self._columns[name][first:stop] for name in names}


class OriginsFile:
    """Context manager of the unfinished file; left early it is kept, for another run to resume, when anything is in it
    or the process was told to stop.

    Parameters
    ----------
    path : path
        Of the result; the unfinished file is ``path`` + ``.part``.
    count : int
        Number of targets.
    identity : mapping
        See `tracer.store_identity`.
    overwrite, resume : bool
        As for a trajectory file; `check_place` has passed.

    Attributes
    ----------
    begun : dict or None
        What was known at the start, by this run or the interrupted one; None before `begin`.

    Raises
    ------
    InputError
        When what stands there cannot be resumed, or another run is writing it.
    Stopped
        When the disk is full.
    """

    def __init__(self, path: Path, count: int, identity: Mapping[str, Any], overwrite: bool, resume: bool) -> None:
        self.path = path
        self.part = Path(f"{path}{PART}")
        self.log_path = Path(f"{path}{LOG}")
        self.begun: dict[str, Any] | None = None
        self.overwrite = overwrite
        self._count = count
        self._identity = identity
        self._resume = resume
        self._file = -1
        self._log: Log | None = None
        self._done: set[int] = set()
        self._finished = False

    def __enter__(self) -> Self:
        self._file = locked(self.path, self._resume)
        try:
            if self._resume:
                self._take_up()
        except BaseException as error:
            self._leave(error)
            raise
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._leave(error)

    def begin(self, attrs: Mapping[str, Any]) -> None:
        """Make the file, with its room on the disk, and its log."""
        header = {
            "format": LOG_FORMAT,
            "identity": dict(self._identity),
            "attrs": dict(attrs),
            "overwrite": self.overwrite,
        }
        with self.room():
            try:
                reserve(self._file, max(self._count * ROW_BYTES, 1))
                self._log = Log.create(self.log_path, header, self._chunks + 1)
            except OSError:
                with suppress(OSError):
                    self.log_path.unlink()
                os.ftruncate(self._file, 0)  # gives the room back; a resumed run begins anew
                raise
            sync_directory(self.path)
        self.begun = dict(attrs)

    def missing(self) -> list[Span]:
        """The targets that are not known yet, as spans, rising."""
        return joined(self._span(chunk) for chunk in range(self._chunks) if chunk not in self._done)

    def stopped(self) -> str:
        """What to say of a run that was stopped."""
        known = sum(stop - first for first, stop in map(self._span, self._done))
        kept = f"; {self.part} keeps them" if known else ""
        return f"stopped after {known} of {self._count} targets{kept}; the same command with --resume goes on"

    def write(self, chunk: Origins) -> None:
        """Put the columns of one chunk, whole, at its place."""
        number = chunk.first // ROWS
        first, stop = self._span(number)
        if (chunk.first, chunk.columns["region"].size) != (first, stop - first):
            raise ValueError(f"targets from {chunk.first} on are no chunk")
        data = b"".join(chunk.columns[name].astype(dtype, copy=False).tobytes() for name, dtype in DTYPES.items())
        with self.room():
            write_at(self._file, [data], first * ROW_BYTES)
            self._begun_log().append([number, _digest(data)])
        self._done.add(number)

    def rows(self, first: int, stop: int, names: Sequence[str] = tuple(DTYPES)) -> Columns:
        """Columns of targets `first` to `stop` - 1."""
        found = {name: np.empty(stop - first, DTYPES[name]) for name in names}
        for number in range(first // ROWS, -(-stop // ROWS)):
            low, high = self._span(number)
            begin, end = max(low, first), min(high, stop)
            offset = low * ROW_BYTES
            for name, dtype in DTYPES.items():
                if name in found:
                    at = offset + (begin - low) * dtype.itemsize
                    raw = os.pread(self._file, (end - begin) * dtype.itemsize, at)
                    found[name][begin - first : end - first] = np.frombuffer(raw, dtype)
                offset += (high - low) * dtype.itemsize
        return found

    def room(self) -> Any:
        """A full disk, met inside, stops the run."""
        return room_for(self.path, self._count * ROW_BYTES)

    def publish(self, move: Callable[[bool], None]) -> None:
        """Move the result into place with `move`, which is told whether it may replace; nothing is left besides."""
        log = self._begun_log()
        with self.room():
            log.append(WHOLE)
            log.sync()
        move(self.overwrite or bool(log.records[0]["overwrite"]))
        self._finished = True
        self.part.unlink()
        self.log_path.unlink()

    def _take_up(self) -> None:
        """Read what an interrupted run has left. Without a header it got nowhere, and all begins anew."""
        log = Log.read(self.log_path)
        if log is None:
            check_replaced(self.path, self.overwrite)
            os.ftruncate(self._file, 0)
            return
        self._log = log
        header = log.records[0]
        check_replaced(self.path, self.overwrite or bool(header.get("overwrite")))
        if header.get("format") != LOG_FORMAT:
            raise damaged(str(self.part))
        refuse_other(header["identity"], self._identity, str(self.part))
        if os.fstat(self._file).st_size < self._count * ROW_BYTES:
            raise damaged(str(self.part))
        self.begun = header["attrs"]
        for record in log.records[1:]:
            if isinstance(record, list) and self._stands(*record):
                self._done.add(record[0])

    def _stands(self, number: int, digest: str) -> bool:
        """Whether what was put there is what is there."""
        first, stop = self._span(number)
        return _digest(os.pread(self._file, (stop - first) * ROW_BYTES, first * ROW_BYTES)) == digest

    @property
    def _chunks(self) -> int:
        return -(-self._count // ROWS)

    def _span(self, chunk: int) -> Span:
        return chunk * ROWS, min((chunk + 1) * ROWS, self._count)

    def _begun_log(self) -> Log:
        if self._log is None:
            raise ValueError("the file is not open")
        return self._log

    def _leave(self, error: BaseException | None) -> None:
        """Let go of the files; remove them unless there is something to resume, or the process was told to stop."""
        if self._log is not None:
            self._log.close()
        told = isinstance(error, Stopped) or not (error is None or isinstance(error, Exception))
        if not (self._finished or self._done or told or self._resume):
            for path in (self.log_path, self.part):
                with suppress(OSError):
                    path.unlink()
        if self._file >= 0:
            os.close(self._file)
            self._file = -1


def all_told(path: Path) -> bool:
    """Whether the log at `path` says that its result was about to be moved into place."""
    log = Log.read(path)
    if log is None:
        return False
    log.close()
    return bool(log.records[-1] == WHOLE)


def _digest(data: bytes) -> str:
    return hashlib.sha256(data).hexdigest()[:DIGEST_LETTERS]
