"""The seal of a finished trajectory file: a hash over all its bytes that are no columns of particles, at its very end.

HDF5 puts checksums on columns and on most of its own structures, but none on the text of attributes nor on the lists
that hold it, and a single flipped bit there can make it search for ever. So the seal is checked before HDF5 looks.
HDF5 itself does not see it: it stands behind the end that the file's own header states, and goes when HDF5 changes the
file.
"""

from __future__ import annotations

import hashlib
import json
import os
import zlib
from collections.abc import Mapping
from pathlib import Path
from typing import Any, BinaryIO

import numpy as np

from tracer.store_overlay import Overlay
from tracer.store_places import Place

MAGIC = b"driftrose"
TAIL = len(MAGIC) + 16  # length and checksum, in hexadecimal digits, before it
STATED_END = slice(28, 36)  # in the header of the file (superblock of version 2 and 3)
PIECE = 2**20


def seal(file: Overlay, places: Mapping[str, Place]) -> bytes:
    """What to put behind a file whose columns stand at `places`."""
    size = file.seek(0, os.SEEK_END)
    spans = _between(places, size)
    text = json.dumps({"sha256": _hash(file, spans), "spans": spans}, separators=(",", ":")).encode()
    return text + b"%08x%08x" % (len(text), zlib.crc32(text)) + MAGIC


def fault(path: str | os.PathLike[str]) -> str:
    """What the seal of an HDF5 file has to say against it; nothing when it is whole or was taken off by HDF5."""
    with Path(path).open("rb") as file:
        header = file.read(STATED_END.stop)
        size = file.seek(0, os.SEEK_END)
        stated = int.from_bytes(header[STATED_END], "little")
        found = _read(file, size)
        if found is None:  # behind an unfinished file lies room for the seal
            file.seek(max(size - TAIL, 0))
            return "damaged at its end" if size > stated and any(file.read(TAIL)) else ""
        end, text = found
        if end != stated or _hash(file, text["spans"]) != text["sha256"]:
            return "damaged: its seal does not fit"
    return ""


def _read(file: BinaryIO, size: int) -> tuple[int, Any] | None:
    """Where the seal begins, and what it says; None when there is none, or it is damaged itself."""
    file.seek(max(size - TAIL, 0))
    tail = file.read(TAIL)
    try:
        length, checksum = int(tail[:8], 16), int(tail[8:16], 16)
    except ValueError:
        return None
    begin = size - TAIL - length
    if begin < 0 or not tail.endswith(MAGIC):
        return None
    file.seek(begin)
    text = file.read(length)
    return (begin, json.loads(text)) if zlib.crc32(text) == checksum else None


def _between(places: Mapping[str, Place], size: int) -> list[list[int]]:
    """First byte and length of everything between the chunks of columns."""
    begins = np.concatenate([place.offsets.reshape(-1) for place in places.values()])
    order = np.argsort(begins)
    begins, stops = begins[order], (begins + np.concatenate([p.sizes.reshape(-1) for p in places.values()]))[order]
    gaps = zip([0, *stops.tolist()], [*begins.tolist(), size])
    return [[begin, stop - begin] for begin, stop in gaps if stop > begin]


def _hash(file: BinaryIO | Overlay, spans: list[list[int]]) -> str:
    digest = hashlib.sha256()
    for begin, length in spans:
        file.seek(begin)
        for done in range(0, length, PIECE):
            digest.update(file.read(min(PIECE, length - done)) or b"")
    return digest.hexdigest()
