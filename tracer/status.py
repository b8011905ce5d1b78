"""Why a particle ended: codes inside kernels and files, sentences outside, one table for both."""

from __future__ import annotations

from enum import IntEnum


class Cause(IntEnum):
    """The value of ``/end/cause``. In backward runs the words read in the order of tracing."""

    DRIFTING = 0
    OUTER = 1
    INNER = 2
    ATMOSPHERE = 3
    MAGNETOPAUSE = 4
    OUTSIDE_MODEL = 5
    FAILED = 6
    NEVER_RELEASED = 7

    @property
    def word(self) -> str:
        """One word for flag meanings."""
        return WORDS[self]

    @property
    def sentence(self) -> str:
        """What it says of a particle."""
        return SENTENCES[self]


WORDS = {
    Cause.DRIFTING: "drifting",
    Cause.OUTER: "outer_boundary",
    Cause.INNER: "inner_boundary",
    Cause.ATMOSPHERE: "atmosphere",
    Cause.MAGNETOPAUSE: "magnetopause",
    Cause.OUTSIDE_MODEL: "outside_field_model",
    Cause.FAILED: "numerical_failure",
    Cause.NEVER_RELEASED: "never_released",
}

SENTENCES = {
    Cause.DRIFTING: "still drifting at the end of the run",
    Cause.OUTER: "reached the outer boundary moving outward",
    Cause.INNER: "reached the inner boundary",
    Cause.ATMOSPHERE: "mirrored in the atmosphere",
    Cause.MAGNETOPAUSE: "met the magnetopause",
    Cause.OUTSIDE_MODEL: "left the region where the field model holds",
    Cause.FAILED: "lost to a numerical failure",
    Cause.NEVER_RELEASED: "never released",
}
