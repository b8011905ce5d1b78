"""A file as HDF5 sees it: what it writes stays in memory, to be put on the disk in one go or kept as a record."""

from __future__ import annotations

import io
import os
from collections.abc import Collection
from typing import Any

import numpy as np
from numpy.typing import NDArray

PAGE = 4096
COMPARED = 2**15


class Overlay(io.RawIOBase):
    """What is written over a file, or over nothing; the file itself stays as it is.

    Parameters
    ----------
    base : int, optional
        Descriptor of the file below.
    ignored : collection of ndarray of uint8
        Contents of which a write is dropped: the fill of chunks that something else will write.
    """

    def __init__(self, base: int | None = None, ignored: Collection[NDArray[np.uint8]] = ()) -> None:
        self._base = base
        self.size = 0 if base is None else os.fstat(base).st_size
        self._ignored: dict[int, list[NDArray[np.uint8]]] = {}
        for content in ignored:
            self._ignored.setdefault(content.size, []).append(content)
        self._pages: dict[int, bytearray] = {}
        self._extents: list[tuple[int, int]] = []
        self._at = 0

    def changes(self) -> list[tuple[int, bytes]]:
        """What was written: places in rising order, and the bytes that stand there now."""
        merged: list[list[int]] = []
        for begin, stop in sorted(self._extents):
            if merged and begin <= merged[-1][1]:
                merged[-1][1] = max(merged[-1][1], stop)
            else:
                merged.append([begin, stop])
        return [(begin, self._bytes(begin, stop)) for begin, stop in merged if begin < self.size]

    def readable(self) -> bool:
        """It is."""
        return True

    def writable(self) -> bool:
        """It is."""
        return True

    def seekable(self) -> bool:
        """It is."""
        return True

    def seek(self, offset: int, whence: int = os.SEEK_SET) -> int:
        """See io.RawIOBase, as for the methods below."""
        self._at = offset + {os.SEEK_SET: 0, os.SEEK_CUR: self._at, os.SEEK_END: self.size}[whence]
        return self._at

    def tell(self) -> int:  # noqa: D102
        return self._at

    def readinto(self, buffer: Any) -> int:  # noqa: D102
        view = memoryview(buffer)
        found = self._bytes(self._at, min(self._at + len(view), self.size))
        view[: len(found)] = found
        self._at += len(found)
        return len(found)

    def write(self, data: Any) -> int:  # noqa: D102
        octets = np.frombuffer(data, np.uint8)
        begin, self._at = self._at, self._at + octets.size
        self.size = max(self.size, self._at)
        if not any(_alike(octets, content) for content in self._ignored.get(octets.size, ())):
            self._extents.append((begin, self._at))
            self._put(begin, octets.tobytes())
        return octets.size

    def truncate(self, size: int | None = None) -> int:  # noqa: D102
        self.size = self._at if size is None else size
        return self.size

    def _put(self, begin: int, data: bytes) -> None:
        done = 0
        while done < len(data):
            number, inside = divmod(begin + done, PAGE)
            if number not in self._pages:
                self._pages[number] = bytearray(self._below(number * PAGE, PAGE))
            part = data[done : done + PAGE - inside]
            self._pages[number][inside : inside + len(part)] = part
            done += len(part)

    def _bytes(self, begin: int, stop: int) -> bytes:
        parts = []
        while begin < stop:
            number, inside = divmod(begin, PAGE)
            size = min(PAGE - inside, stop - begin)
            page = self._pages.get(number)
            parts.append(self._below(begin, size) if page is None else bytes(page[inside : inside + size]))
            begin += size
        return b"".join(parts)

    def _below(self, begin: int, size: int) -> bytes:
        found = b"" if self._base is None else os.pread(self._base, size, begin)
        return found.ljust(size, b"\0")


def _alike(one: NDArray[np.uint8], other: NDArray[np.uint8]) -> bool:
    """Whether two long runs of bytes are the same at both ends: HDF5's own structures differ in the first four."""
    return np.array_equal(one[:COMPARED], other[:COMPARED]) and np.array_equal(one[-COMPARED:], other[-COMPARED:])
