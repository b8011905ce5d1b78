"""The checksum that stands behind every chunk of a trajectory file, as HDF5's fletcher32 filter computes it."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

CHECKSUM_BYTES = 4
MODULUS = 65535


def fletcher32(data: NDArray[np.generic]) -> bytes:
    """The four bytes that HDF5 puts behind a chunk of these bytes.

    Two sums over the 16-bit words w_1 to w_n of the data, high byte first, modulo 2^16 - 1: of w_i, and of
    (n + 1 - i) w_i (Fletcher 1982, IEEE Trans. Commun. 30, 247; details as in HDF5's ``H5checksum.c``). An odd last
    byte is the high byte of a word. A sum that is a multiple of the modulus is 65535, except that of nothing but
    zeros.

    Words are summed low byte first, as they lie in memory: swapping the bytes of a word is a factor of 256 in this
    modulus. Compiled code sums them, as its speed limits that of writing.

    Parameters
    ----------
    data : ndarray
        C-contiguous, of any type and size.
    """
    from tracer.kernels.build import word_sums

    octets = data.reshape(-1).view(np.uint8)
    first, second = (256 * int(total) for total in word_sums()(octets[: octets.size // 2 * 2].view("<u2")))
    if octets.size % 2:
        first += int(octets[-1]) * 256
        second += first
    some = bool(octets.any()) if first % MODULUS == 0 or second % MODULUS == 0 else True
    return (_canonical(second, some) << 16 | _canonical(first, some)).to_bytes(CHECKSUM_BYTES, "little")


def _canonical(total: int, some: bool) -> int:
    """A sum as HDF5 leaves it: that of something is never 0."""
    return (total % MODULUS or MODULUS) if some else 0
