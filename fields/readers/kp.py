"""Kp in its notations: thirds as 5- 5o 5+, as decimals 4.667, as tenths 47.

The 28 values of Kp are the thirds from 0 to 9 (Bartels 1949; Matzka et al. 2021, doi:10.1029/2020SW002641).
"""

from __future__ import annotations

import re
from collections.abc import Sequence

import numpy as np

from fields.errors import InputError, shown
from fields.readers.rows import line_fault, number
from fields.units import Floats

LARGEST = 9.0
FILL = -1.0
TENTHS: dict[int, float] = {round(10 * k / 3): k / 3 for k in range(28)}
_SIGNED = re.compile(r"([0-9])([-oO+])")
_SHIFT = {"-": -1, "o": 0, "O": 0, "+": 1}
TENTHS_TEXT = "0, 3, 7, 10, 13, 17, ... 90 for the thirds from 0 to 9"
_NOTATIONS = "Kp from 0 to 9, as 5-, as 4.667, or as tenths (47)"


def from_signed(text: str) -> float | None:
    """``5-`` as 4 2/3; None when `text` is no digit with a sign."""
    match = _SIGNED.fullmatch(text)
    return None if match is None else (3 * int(match[1]) + _SHIFT[match[2]]) / 3


def third_written(text: str) -> float | None:
    """The third that `text` writes as a whole number or with two decimals or more, rounded or cut; else None.

    One decimal does not tell a third from a mean: 4.7 stays 4.7.
    """
    value = number(text)
    if value is None or not 0 <= value <= LARGEST:
        return None
    third = round(3 * value) / 3
    if value == third:
        return third
    decimals = len(text.partition(".")[2])
    if not 2 <= decimals <= 17 or not text.replace(".", "", 1).isdigit():
        return None
    cut = int(third * 10.0**decimals) / 10.0**decimals
    return third if value in (round(third, decimals), cut) else None


class _Column:
    """The distinct cells of a Kp column, each with the line on which it stands first."""

    def __init__(self, cells: Sequence[str], lines: Sequence[int], file: str) -> None:
        self.file = file
        self.first: dict[str, int] = {}
        for cell, line in zip(cells, lines):
            self.first.setdefault(cell, line)
        self.signed = {cell: kp for cell in self.first if (kp := from_signed(cell)) is not None}
        self.numbers = {cell: self._number(cell) for cell in self.first if cell not in self.signed}
        self.fills = {cell for cell, value in self.numbers.items() if value == FILL}

    def fault(self, cell: str, problem: str, remedy: str = _NOTATIONS) -> InputError:
        return line_fault(self.file, self.first[cell], cell, problem, remedy)

    def _number(self, cell: str) -> float:
        value = number(cell)
        if value is None:
            raise self.fault(cell, "not a Kp")
        if not np.isfinite(value):
            raise self.fault(cell, "not a finite number")
        if value < 0 and value != FILL:
            raise self.fault(cell, "Kp outside 0 to 9")
        return value

    def meanings(self) -> dict[str, float]:
        """The value of every distinct cell; NaN for a fill value."""
        numbers = {cell: value for cell, value in self.numbers.items() if cell not in self.fills}
        if self.signed:
            known = self._beside_signed(numbers)
        elif numbers and max(numbers.values()) > LARGEST:
            known = self._tenths(numbers)
        else:
            known = self._decimals(numbers)
        return known | {cell: float("nan") for cell in self.fills}

    def _beside_signed(self, numbers: dict[str, float]) -> dict[str, float]:
        example = next(iter(self.signed))
        for cell in numbers:
            if not (cell.isdigit() and len(cell) == 1):
                raise self.fault(cell, f"mixed notations: line {self.first[example]} holds {example}")
        known = numbers | self.signed
        for cell, value in known.items():
            if not 0 <= value <= LARGEST:
                raise self.fault(cell, "Kp outside 0 to 9")
        return known

    def _tenths(self, numbers: dict[str, float]) -> dict[str, float]:
        above = next(cell for cell, value in numbers.items() if value > LARGEST)
        for cell, value in numbers.items():
            if value <= LARGEST and value not in TENTHS:
                why = f"Kp outside 0 to 9, and no column of tenths: line {self.first[cell]} holds {shown(cell)}"
                raise self.fault(above, why)
        for cell, value in numbers.items():
            if value not in TENTHS:
                raise self.fault(cell, "Kp outside 0 to 9, and not a Kp in tenths", TENTHS_TEXT)
        return {cell: TENTHS[int(value)] for cell, value in numbers.items()}

    def _decimals(self, numbers: dict[str, float]) -> dict[str, float]:
        """Thirds where every number of the column is one; else the numbers as they stand (means, invented values)."""
        thirds = {cell: third for cell in numbers if (third := third_written(cell)) is not None}
        return thirds if len(thirds) == len(numbers) else numbers


def kp_values(cells: Sequence[str], lines: Sequence[int], file: str) -> Floats:
    """Values of a column of Kp in any one notation; NaN where it holds the fill value -1.

    Numbers are tenths when the largest exceeds 9. Decimals are taken for thirds, and made exact, only when
    every number of the column writes a third; otherwise they stand as they are.

    Raises
    ------
    InputError
        Naming line and value: no Kp, outside 0 to 9, no number of tenths, or mixed notations.
    """
    meanings = _Column(cells, lines, file).meanings()
    return np.array([meanings[cell] for cell in cells], dtype=np.float64)
