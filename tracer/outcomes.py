"""Where a target of ``[access]`` was traced back to: codes in files, sentences outside, one table for both."""

from __future__ import annotations

from enum import IntEnum


class Outcome(IntEnum):
    """The value of ``region``: what is known of the particles at a target.

    `BEFORE_RECORD` and `UNDECIDED` both drifted without meeting a boundary. The first were traced back to the
    beginning of the record, and nothing can be known of what was before. The second were traced for ``back_hours``
    only, the record being longer: a larger ``back_hours`` may decide them.
    """

    OPEN = 0
    OPEN_ELSEWHERE = 1
    BEFORE_RECORD = 2
    UNDECIDED = 3
    MAGNETOPAUSE = 4
    INNER = 5
    ATMOSPHERE = 6
    OUTSIDE_MODEL = 7
    FAILED = 8
    OUT_OF_REACH = 9
    OUTSIDE_DOMAIN = 10

    @property
    def word(self) -> str:
        """One word for flag meanings."""
        return WORDS[self]

    @property
    def sentence(self) -> str:
        """What it says of a target."""
        return SENTENCES[self]


WORDS = {
    Outcome.OPEN: "open",
    Outcome.OPEN_ELSEWHERE: "open_outside_source",
    Outcome.BEFORE_RECORD: "before_record",
    Outcome.UNDECIDED: "undecided",
    Outcome.MAGNETOPAUSE: "magnetopause",
    Outcome.INNER: "inner_boundary",
    Outcome.ATMOSPHERE: "atmosphere",
    Outcome.OUTSIDE_MODEL: "outside_field_model",
    Outcome.FAILED: "numerical_failure",
    Outcome.OUT_OF_REACH: "out_of_reach",
    Outcome.OUTSIDE_DOMAIN: "outside_domain",
}

SENTENCES = {
    Outcome.OPEN: "came in through the source",
    Outcome.OPEN_ELSEWHERE: "came in through the outer boundary, outside the source",
    Outcome.BEFORE_RECORD: "drifting since before the record began",
    Outcome.UNDECIDED: "still drifting back_hours earlier, the record being longer",
    Outcome.MAGNETOPAUSE: "came from the magnetopause",
    Outcome.INNER: "came from the inner boundary",
    Outcome.ATMOSPHERE: "came from the atmosphere",
    Outcome.OUTSIDE_MODEL: "came from where the field model does not hold",
    Outcome.FAILED: "lost to a numerical failure",
    Outcome.OUT_OF_REACH: "mirror below the latitude of the spacecraft",
    Outcome.OUTSIDE_DOMAIN: "the place lies outside the domain",
}

CAME_IN = (Outcome.OPEN, Outcome.OPEN_ELSEWHERE)  # these have an entry
NO_ANSWER = (Outcome.FAILED, Outcome.OUT_OF_REACH, Outcome.OUTSIDE_DOMAIN)  # nothing was found out about these
UNKNOWN = (Outcome.BEFORE_RECORD, Outcome.UNDECIDED)  # these may have come in earlier
