"""The checksum that stands behind every chunk of a trajectory file, as HDF5's fletcher32 filter computes it."""

from __future__ import annotations

import threading

import numpy as np
from numpy.typing import NDArray

CHECKSUM_BYTES = 4
MODULUS = 65535
MOST = 256  # words of which a single-precision sum is exact
WIDTH = 4 * MOST
PIECE = MOST * WIDTH  # words
_scratch = threading.local()


def fletcher32(data: NDArray[np.generic]) -> bytes:
    """The four bytes that HDF5 puts behind a chunk of these bytes.

    Two sums over the 16-bit words w_1 to w_n of the data, high byte first, modulo 2^16 - 1: of w_i, and of
    (n + 1 - i) w_i (Fletcher 1982, IEEE Trans. Commun. 30, 247; details as in HDF5's ``H5checksum.c``). An odd last
    byte is the high byte of a word. A sum that is a multiple of the modulus is 65535, except that of nothing but
    zeros.

    Words are summed low byte first, as they lie in memory: swapping the bytes of a word is a factor of 256 in this
    modulus.

    Parameters
    ----------
    data : ndarray
        C-contiguous, of any type and size.
    """
    octets = data.reshape(-1).view(np.uint8)
    words = octets[: octets.size // 2 * 2].view("<u2")
    whole = words.size // WIDTH * WIDTH
    first = second = 0
    for begin in range(0, whole, PIECE):
        piece = words[begin : min(begin + PIECE, whole)]
        plain, weighted = _sums(piece)
        first, second = first + plain, second + piece.size * first + weighted
    rest = words[whole:].astype(np.int64)
    second += rest.size * first + int(rest @ np.arange(rest.size, 0, -1))
    first += int(rest.sum())
    if octets.size % 2:
        first += int(octets[-1])
        second += first
    return (_folded(256 * second) << 16 | _folded(256 * first)).to_bytes(CHECKSUM_BYTES, "little")


def _sums(words: NDArray[np.uint16]) -> tuple[int, int]:
    """Both sums over whole rows, from those of rows and of columns; single precision is exact here, and quickest."""
    if not hasattr(_scratch, "words"):
        _scratch.words = np.empty(PIECE, np.float32)
    exact = _scratch.words[: words.size]
    exact[...] = words
    parts = np.einsum("ij->i", exact.reshape(-1, MOST)).astype(np.int64)
    rows = parts.reshape(-1, WIDTH // MOST).sum(axis=1)
    columns = np.add.reduce(exact.reshape(-1, WIDTH), axis=0).astype(np.int64)
    total = int(rows.sum())
    before = WIDTH * int(rows @ np.arange(rows.size)) + int(columns @ np.arange(WIDTH))
    return total, words.size * total - before


def _folded(total: int) -> int:
    return (total - 1) % MODULUS + 1 if total else 0
