"""What every source of an orbit offers."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from fields.clock import Micros
from fields.units import Floats


@dataclass(frozen=True, eq=False)
class Piece:
    """Places at some of the instants asked for, all in one frame.

    Attributes
    ----------
    rows : ndarray of int, shape (n,)
        Which instants.
    frame : str
        One of `fields.frames.FRAMES`.
    places_km : ndarray, shape (n, 3)
    """

    rows: NDArray[np.intp]
    frame: str
    places_km: Floats


class Source(Protocol):
    """An orbit as given: elements, a two-line set, or sampled states."""

    def covered(self, stamps: Micros) -> NDArray[np.bool_]:
        """Which instants it covers."""
        ...

    def pieces(self, stamps: Micros) -> Iterator[Piece]:
        """The places at all covered instants, in pieces.

        Raises
        ------
        InputError
            When the orbit cannot be computed there.
        """
        ...
