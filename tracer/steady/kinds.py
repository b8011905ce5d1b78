"""What points, curves and regions are called: codes inside kernels and files, words outside, one table for both."""

from __future__ import annotations

from enum import IntEnum


class Region(IntEnum):
    """Where the path through a place comes from, followed backward in time in a steady field."""

    UNDECIDED = 0
    OPEN_SOURCE = 1
    OPEN_ELSEWHERE = 2
    OPEN_INNER = 3
    INNER_ONLY = 4
    CLOSED_AROUND = 5
    CLOSED_APART = 6

    @property
    def word(self) -> str:
        """One word for flag meanings."""
        return self.name.lower()

    @property
    def sentence(self) -> str:
        """What it says of a place."""
        return SENTENCES[self]


SENTENCES = {
    Region.UNDECIDED: "on a boundary to the last digits: not decided",
    Region.OPEN_SOURCE: "came in through the outer boundary within the source sector",
    Region.OPEN_ELSEWHERE: "came in through the outer boundary outside the source sector",
    Region.OPEN_INNER: "comes from the inner boundary and leaves through the outer one",
    Region.INNER_ONLY: "comes from the inner boundary and returns there",
    Region.CLOSED_AROUND: "on a closed path around the Earth",
    Region.CLOSED_APART: "on a closed path that does not go round the Earth",
}


class PointKind(IntEnum):
    """What a stagnation point is: extrema are O points, saddles X points."""

    DEGENERATE = 0
    MINIMUM = 1
    MAXIMUM = 2
    SADDLE = 3


class CurveKind(IntEnum):
    """Why a level curve bounds regions."""

    SEPARATRIX = 0
    OUTER_TOUCH = 1
    INNER_TOUCH = 2
    SOURCE_EDGE = 3


class CurveEnd(IntEnum):
    """What stands at an end of a curve."""

    OUTER = 1
    INNER = 2
    POINT = 3
    TOUCH = 4
    LOST = 0
