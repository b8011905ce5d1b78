"""What every reader hands over: rows of time and value in order, those without a value set apart."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from fields.clock import Micros, utc_text
from fields.errors import InputError
from fields.units import Floats


@dataclass(frozen=True)
class Absent:
    """A row without a usable value: its time in microseconds since 1970 UTC, and why."""

    time: int
    reason: str


@dataclass(frozen=True, eq=False)
class Rows:
    """The content of a file of rows.

    Attributes
    ----------
    quantity : str
        Name of the value column.
    times : ndarray of int64, shape (n,)
        Microseconds since 1970-01-01 UTC, rising.
    values : ndarray, shape (n,)
        Finite.
    absent : tuple of Absent
        The rows that hold no value.
    interval_h : float or None
        Length of the interval each row stands for, where the format implies it.
    """

    quantity: str
    times: Micros
    values: Floats
    absent: tuple[Absent, ...] = ()
    interval_h: float | None = None


@dataclass(eq=False)
class Gathered:
    """Rows while a file is being read: line, time and value of each, and why some hold no value (by index)."""

    file: str
    lines: list[int] = field(default_factory=list)
    times: list[int] = field(default_factory=list)
    values: list[float] = field(default_factory=list)
    voids: dict[int, str] = field(default_factory=dict)

    def add(self, line: int, time: int, value: float) -> None:
        """Append a row with a value."""
        self.lines.append(line)
        self.times.append(time)
        self.values.append(value)

    def add_all(self, line: int, times: Sequence[int], values: Sequence[float]) -> None:
        """Append the rows of a line that holds several."""
        self.lines += [line] * len(values)
        self.times += times
        self.values += values

    def add_void(self, line: int, time: int, reason: str) -> None:
        """Append a row without one."""
        self.voids[len(self.times)] = f"{reason}, line {line}"
        self.add(line, time, 0.0)

    def rows(self, quantity: str, interval_h: float | None = None) -> Rows:
        """Check the order and set the rows without a value apart.

        Raises
        ------
        InputError
            When a time stands twice or runs back, or no row holds a value.
        """
        times = np.array(self.times, dtype=np.int64)
        check_order(times, file=self.file, lines=self.lines)
        kept = np.ones(times.size, dtype=bool)
        kept[list(self.voids)] = False
        if not kept.any():
            raise InputError(f"holds no value of {quantity}", "one row or more with a value", file=self.file)
        absent = tuple(Absent(self.times[i], reason) for i, reason in self.voids.items())
        return Rows(quantity, times[kept], np.array(self.values, dtype=np.float64)[kept], absent, interval_h)


def check_order(times: Micros, *, file: str = "", key: str = "times", lines: Sequence[int] = ()) -> None:
    """Refuse times that stand twice or run back.

    Raises
    ------
    InputError
        Naming the line (or, for arrays, the key) and the time.
    """
    falling = np.flatnonzero(np.diff(times) <= 0)
    if falling.size == 0:
        return
    i = int(falling[0]) + 1
    place = f"line {lines[i]}" if len(lines) else key
    earlier = f" (line {lines[i - 1]})" if len(lines) else ""
    if times[i] == times[i - 1]:
        problem, remedy = f"this time stands twice{earlier}", "one row for each time"
    else:
        problem = f"out of order: earlier than {utc_text(times[i - 1])} before it{earlier}"
        remedy = "rows in rising order of time"
    raise InputError(problem, remedy, key=place, value=utc_text(times[i]), file=file)


def line_fault(file: str, line: int, value: object, problem: str, remedy: str = "") -> InputError:
    """The fault of one line of a file."""
    return InputError(problem, remedy, key=f"line {line}", value=value, file=file)


def number(text: str) -> float | None:
    """`text` as a float (nan and inf included), None when it is no number."""
    if "_" in text:
        return None
    try:
        return float(text)
    except ValueError:
        return None
