"""The log beside an unfinished trajectory file: which run it is, and what of it stands on the disk.

One line for each record, JSON behind a checksum of it: what a killed process left half-written is told from what
it finished. The room for all lines is taken at the start, so that a disk that fills up later does not stop a run whose
numbers have their room already.
"""

from __future__ import annotations

import json
import os
import zlib
from pathlib import Path
from typing import Any, Self

LINE_BYTES = 80  # of a row record, at most
CLOSING_BYTES = 2**17  # the last change to the file, as it stands in the log; more than the file grows by then


class Log:
    """Records in the order of writing.

    Attributes
    ----------
    records : list
        JSON values read or appended so far; the first is the header.
    """

    def __init__(self, path: Path, handle: int, records: list[Any], end: int) -> None:
        self._path = path
        self._handle = handle
        self._end = end
        self.records = records

    @classmethod
    def create(cls, path: Path, header: Any, lines: int) -> Self:
        """A new log with room for `lines` records besides its header and a closing one."""
        handle = os.open(path, os.O_RDWR | os.O_CREAT | os.O_TRUNC | os.O_CLOEXEC, 0o666)
        log = cls(path, handle, [], 0)
        try:
            reserve(handle, len(_line(header)) + LINE_BYTES * lines + CLOSING_BYTES)
            log.append(header)
            log.sync()
        except BaseException:
            log.close()
            raise
        return log

    @classmethod
    def read(cls, path: Path) -> Self | None:
        """An existing log, to be continued after its last whole line; None when there is no header."""
        try:
            handle = os.open(path, os.O_RDWR | os.O_CLOEXEC)
        except FileNotFoundError:
            return None
        records, end = [], 0
        with open(handle, "rb", closefd=False) as stream:
            for line in stream:
                record = _record(line)
                if record is None:
                    break
                records.append(record)
                end += len(line)
        if not records:
            os.close(handle)
            return None
        return cls(path, handle, records, end)

    def append(self, record: Any) -> None:
        """Add a record; the log is then as before or longer by all of it, whatever happens meanwhile."""
        line = _line(record)
        write_at(self._handle, [line], self._end)
        self._end += len(line)
        self.records.append(record)

    def sync(self) -> None:
        """Bring it to the disk."""
        os.fsync(self._handle)

    def close(self) -> None:
        """Let go of it."""
        if self._handle >= 0:
            os.close(self._handle)
            self._handle = -1


def _line(record: Any) -> bytes:
    text = json.dumps(record, ensure_ascii=False, separators=(",", ":")).encode("utf-8", "surrogatepass")
    return b"%08x %s\n" % (zlib.crc32(text), text)


def _record(line: bytes) -> Any:
    """What a line says; None when it is not whole."""
    mark, _, text = line.rstrip(b"\n").partition(b" ")
    if not line.endswith(b"\n") or mark != b"%08x" % zlib.crc32(text):
        return None
    return json.loads(text.decode("utf-8", "surrogatepass"))


def reserve(handle: int, size: int) -> None:
    """Give a file its length and, where the system can, its room on the disk."""
    os.ftruncate(handle, size)
    if hasattr(os, "posix_fallocate"):
        os.posix_fallocate(handle, 0, size)


def write_at(handle: int, parts: list[Any], offset: int) -> None:
    """Write buffers one after the other from `offset` on, whole."""
    total = sum(memoryview(part).nbytes for part in parts)
    done = os.pwritev(handle, parts, offset)
    if done < total:  # a disk that fills up takes the first bytes and refuses the rest in a second call
        rest = b"".join(memoryview(part).tobytes() for part in parts)
        while done < total:
            done += os.pwrite(handle, rest[done:], offset + done)
