"""Where the chunks of an unfinished trajectory file stand, and writing and checking them there without HDF5."""

from __future__ import annotations

import hashlib
import os
from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import h5py
import numpy as np
from numpy.typing import NDArray

from tracer.records import GROUPS
from tracer.store_checksum import CHECKSUM_BYTES, fletcher32
from tracer.store_log import write_at

DIGEST_LETTERS = 32


@dataclass(frozen=True, eq=False)
class Place:
    """The chunks of one dataset.

    Attributes
    ----------
    shape, chunk : tuple of int
        Of the dataset and of a chunk; the first counts particles.
    offsets, sizes : ndarray, shape (chunks down, chunks across)
        Where each chunk begins in the file, and the bytes it takes there.
    empty : ndarray of shape `chunk`
        What stands in the part of a chunk that reaches over the dataset's edge.
    """

    shape: tuple[int, ...]
    chunk: tuple[int, ...]
    offsets: NDArray[np.int64]
    sizes: NDArray[np.int64]
    empty: NDArray[np.generic]

    @property
    def dtype(self) -> np.dtype[np.generic]:
        """Of the numbers."""
        return self.empty.dtype


def places_of(file: h5py.File) -> dict[str, Place]:
    """Every dataset that has a row for each particle, by its name."""
    names = [f"{group}/{column.name}" for group, columns in GROUPS.items() if group in file for column in columns]
    return {name: place_of(file[name]) for name in ("particle_index", *names)}


def place_of(dataset: h5py.Dataset) -> Place:
    """Where the chunks of a dataset stand."""
    grid = tuple(-(-size // step) for size, step in zip(dataset.shape, dataset.chunks))
    offsets, sizes = np.zeros(grid, np.int64), np.zeros(grid, np.int64)

    def found(chunk: h5py.h5d.StoreInfo) -> None:
        at = tuple(first // step for first, step in zip(chunk.chunk_offset, dataset.chunks))
        offsets[at], sizes[at] = chunk.byte_offset, chunk.size

    dataset.id.chunk_iter(found)
    if not sizes.all():
        raise ValueError(f"{dataset.name} has no place for some chunks")
    across = (grid[0], -1)
    empty = np.full(dataset.chunks, dataset.fillvalue, np.dtype(dataset.dtype.str))
    return Place(dataset.shape, dataset.chunks, offsets.reshape(across), sizes.reshape(across), empty)


class Stripes:
    """The rows of all datasets in steps of a stripe.

    Parameters
    ----------
    handle : int
        Descriptor of the file.
    places : mapping of str to Place
    rows : int
        Particles of a stripe.
    """

    def __init__(self, handle: int, places: Mapping[str, Place], rows: int) -> None:
        self._handle = handle
        self._rows = rows
        self.places = places
        self.count = next(iter(places.values())).shape[0]

    def span(self, stripe: int) -> tuple[int, int]:
        """Its first particle, and the one after its last."""
        return stripe * self._rows, min((stripe + 1) * self._rows, self.count)

    def holding(self, first: int, stop: int) -> range:
        """The stripes that hold particles `first` to `stop` - 1."""
        return range(first // self._rows, -(-stop // self._rows))

    def write(self, stripe: int, columns: Mapping[str, np.ndarray]) -> str:
        """Put the rows of a stripe at their places; returns a digest of what stands there."""
        digest = hashlib.sha256()
        for name, place in self.places.items():
            for offset, rows, across in self._chunks(stripe, place):
                data = np.ascontiguousarray(columns[name][(rows, across)[: len(place.chunk)]])
                if data.shape != place.chunk:
                    whole = place.empty.copy()
                    whole[tuple(slice(size) for size in data.shape)] = data
                    data = whole
                checksum = fletcher32(data)
                write_at(self._handle, [data, checksum], offset)
                digest.update(checksum)
        return digest.hexdigest()[:DIGEST_LETTERS]

    def stands(self, stripe: int, digest: str) -> bool:
        """Whether what `write` put there is what is there."""
        found = hashlib.sha256()
        for place in self.places.values():
            size = place.empty.nbytes
            for offset, _, _ in self._chunks(stripe, place):
                raw = os.pread(self._handle, size + CHECKSUM_BYTES, offset)
                if len(raw) < size + CHECKSUM_BYTES or fletcher32(np.frombuffer(raw, np.uint8, size)) != raw[size:]:
                    return False
                found.update(raw[size:])
        return found.hexdigest()[:DIGEST_LETTERS] == digest

    def _chunks(self, stripe: int, place: Place) -> Iterator[tuple[int, slice, slice]]:
        """The chunks of a dataset in a stripe: offset, rows counted from the stripe's first, columns."""
        first, stop = self.span(stripe)
        height, width = place.chunk[0], (place.chunk[1] if len(place.chunk) > 1 else 1)
        for row in range(first, stop, height):
            rows = slice(row - first, min(row + height, stop) - first)
            for right, offset in enumerate(place.offsets[row // height]):
                yield int(offset), rows, slice(right * width, (right + 1) * width)
