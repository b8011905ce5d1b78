"""A file for HDF5 to write that never refuses: on a full disk it says so afterwards."""

from __future__ import annotations

import io
import os
from typing import Any

from tracer.store_log import write_at


class Patient(io.RawIOBase):
    """A file that takes everything and tells later that it could not: HDF5 would end the process over a full disk."""

    def __init__(self, handle: int) -> None:
        self._handle = handle
        self._at = 0
        self.size = 0
        self.error: OSError | None = None

    def seek(self, offset: int, whence: int = os.SEEK_SET) -> int:
        """See io.RawIOBase, as for the methods below."""
        self._at = offset + {os.SEEK_SET: 0, os.SEEK_CUR: self._at, os.SEEK_END: self.size}[whence]
        return self._at

    def tell(self) -> int:  # noqa: D102
        return self._at

    def readinto(self, buffer: Any) -> int:  # noqa: D102
        view = memoryview(buffer)
        found = os.pread(self._handle, len(view), self._at)
        view[: len(found)] = found
        self._at += len(found)
        return len(found)

    def write(self, data: Any) -> int:  # noqa: D102
        size = memoryview(data).nbytes
        if self.error is None:
            try:
                write_at(self._handle, [data], self._at)
            except OSError as error:
                self.error = error
        self._at += size
        self.size = max(self.size, self._at)
        return size

    def truncate(self, size: int | None = None) -> int:  # noqa: D102
        self.size = self._at if size is None else size
        return self.size
