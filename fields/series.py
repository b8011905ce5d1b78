"""A history as it was published, and the driver it gives to one run."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from datetime import datetime
from pathlib import Path
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from fields.clock import MICROS_PER_HOUR, Micros, array_micros, hours_later, hours_since, micros, utc_text
from fields.drivers import Driver
from fields.errors import InputError
from fields.readers.detect import read_rows
from fields.readers.rows import Absent, check_order
from fields.readers.textfile import read_text
from fields.segments import linear_segments, step_segments, trimmed
from fields.units import Floats

Hold = Literal["step", "linear"]

HOLDS = ("step", "linear")
LONGEST_H = 1e6
ROUNDING_H = 1e-10  # under half a microsecond, the resolution of the rows: hours such as 0.1 + 0.2 end at 0.3
SPACING_TOLERANCE = 1e-4  # of the interval: 0.3333 h passes for 20 minutes, a missing row does not


@dataclass(frozen=True, eq=False)
class Series:
    """A history of one quantity.

    Attributes
    ----------
    name : str
        As in the run file: ``kp`` for ``series:kp``.
    quantity : str
        Name of the value column. A quantity called kp (in any case) must lie in 0 to 9.
    times : ndarray of datetime64[us], shape (n,)
        UTC, rising. May be given as datetimes or ISO texts.
    values : ndarray, shape (n,)
    interval_h : float or None
        When given, the values are means over intervals of this length that begin at `times`.
    hold : str
        ``step``: each value over its interval, or until the next row. ``linear``: joins interval centres, constant
        before the first and after the last; without an interval, joins the rows' own times.
    file : str
        Where it came from, as the user wrote it.
    sha256 : str
        Of the bytes of that file.
    absent : tuple of Absent
        Rows of the file that hold no usable value. A run that needs one is refused.

    Raises
    ------
    InputError
        When times are not rising, values not finite, a Kp lies outside 0 to 9, rows stand closer than `interval_h`,
        or there are fewer than two rows and no `interval_h`.
    """

    name: str
    quantity: str
    times: NDArray[np.datetime64]
    values: Floats
    interval_h: float | None = None
    hold: Hold = "step"
    file: str = ""
    sha256: str = ""
    absent: tuple[Absent, ...] = field(default=(), repr=False)

    def __post_init__(self) -> None:
        _check_hold(self.name, self.hold)
        _check_interval(self.name, self.interval_h)
        stamps = array_micros(self.times, self.key)
        values = np.array(self.values, dtype=np.float64)
        if stamps.ndim != 1 or values.shape != stamps.shape:
            raise self._fault(f"{values.size} values at {stamps.size} times", "one value a time")
        check_order(stamps, file=self.file, key=self.key)
        self._check_values(stamps, values)
        times = stamps.view("datetime64[us]")
        times.setflags(write=False)
        values.setflags(write=False)
        object.__setattr__(self, "times", times)
        object.__setattr__(self, "values", values)
        self._check_spacing(stamps)

    @property
    def key(self) -> str:
        """How the run file names it."""
        return f"series.{self.name}"

    @property
    def cover(self) -> tuple[str, str]:
        """First and last instant with a value, ISO 8601 UTC."""
        stamps = self._stamps
        return utc_text(stamps[0]), utc_text(stamps[-1] + (self._interval or 0))

    def driver(self, start: datetime, from_h: float, to_h: float) -> Driver:
        """The history in hours since `start`, cut to the segments that meet ``[from_h, to_h]``.

        Parameters
        ----------
        start : datetime
            Start of the run; UTC unless it carries an offset.
        from_h, to_h : float
            The span needed, ``from_h <= to_h``.

        Returns
        -------
        Driver

        Raises
        ------
        InputError
            When a part of the span has no value; names the interval without one.
        """
        if not (math.isfinite(from_h) and math.isfinite(to_h) and from_h <= to_h):
            raise self._fault(f"asked from {from_h:g} h to {to_h:g} h", "a finite span, its earlier end first")
        origin = micros(start)
        first, last = self._block(origin, from_h, to_h)
        centres = self._interval / 2 if self._interval else 0.0
        rows = slice(first, last + 1)
        begins = hours_since(self._stamps[rows], origin)
        end = float(hours_since(self._stamps[last] + (self._interval or 0), origin))
        if self.hold == "step":
            parts = step_segments(begins, self.values[rows], end)
        else:
            parts = linear_segments(begins, hours_since(self._stamps[rows] + centres, origin), self.values[rows], end)
        starts, values, slopes, end = trimmed(*parts, from_h, to_h)
        starts[0] = min(starts[0], from_h)
        return Driver(f"series:{self.name}", starts, values, slopes, max(end, to_h), self.hold)

    @property
    def _stamps(self) -> Micros:
        return self.times.view(np.int64)

    @property
    def _interval(self) -> int:
        """Length of an interval in microseconds, 0 where there is none."""
        return 0 if self.interval_h is None else round(self.interval_h * MICROS_PER_HOUR)

    def _holes(self, first: int, last: int) -> NDArray[np.intp]:
        """Rows from `first` to `last` - 1 whose interval ends before the next row begins."""
        if not self._interval:
            return np.empty(0, dtype=np.intp)
        room = np.diff(self._stamps[first : last + 1]) - self._interval
        return np.flatnonzero(room > SPACING_TOLERANCE * self._interval) + first

    def _block(self, origin: int, from_h: float, to_h: float) -> tuple[int, int]:
        """First and last row of the unbroken stretch around the span, with a row of margin on each side."""
        begins = hours_since(self._stamps, origin)
        first = int(np.searchsorted(begins, from_h + ROUNDING_H, side="right")) - 1
        last = max(int(np.searchsorted(begins, to_h, side="left")) - 1, first)
        if first < 0:
            stop = min(self._stamps[0], hours_later(origin, to_h))
            raise self._uncovered(hours_later(origin, from_h), stop, origin, from_h, to_h)
        holes = self._holes(first, last)
        if holes.size:
            hole = int(holes[0])
            start, stop = self._stamps[hole] + self._interval, self._stamps[hole + 1]
            raise self._uncovered(start, stop, origin, from_h, to_h)
        ends = self._stamps[last] + self._interval
        final = last + 1 == begins.size
        if (final or self._holes(last, last + 1).size) and float(hours_since(ends, origin)) < to_h - ROUNDING_H:
            stop = hours_later(origin, to_h) if final else self._stamps[last + 1]
            raise self._uncovered(max(ends, hours_later(origin, from_h)) if final else ends, stop, origin, from_h, to_h)
        before = first > 0 and not self._holes(first - 1, first).size
        after = not final and not self._holes(last, last + 1).size
        return first - before, last + after

    def _uncovered(self, start: int, stop: int, origin: int, from_h: float, to_h: float) -> InputError:
        why = next((f" ({row.reason})" for row in self.absent if start <= row.time < stop), "")
        needed = f"the run needs {utc_text(hours_later(origin, from_h))} to {utc_text(hours_later(origin, to_h))}"
        cover = "the rows cover {} to {}".format(*self.cover)
        return self._fault(f"no value from {utc_text(start)} to {utc_text(stop)}{why}", f"{needed}, {cover}")

    def _fault(self, problem: str, remedy: str) -> InputError:
        return InputError(problem, remedy, key=self.key, file=self.file)

    def _check_values(self, stamps: Micros, values: Floats) -> None:
        bad = np.flatnonzero(~np.isfinite(values))
        if bad.size:
            raise self._fault(f"{values[bad[0]]} at {utc_text(stamps[bad[0]])}", "finite values")
        if self.quantity.lower() == "kp":
            bad = np.flatnonzero((values < 0) | (values > 9))
            if bad.size:
                raise self._fault(f"Kp {values[bad[0]]:g} at {utc_text(stamps[bad[0]])}", "Kp from 0 to 9")

    def _check_spacing(self, stamps: Micros) -> None:
        if self.interval_h is None:
            if self.absent:
                row = self.absent[0]
                raise self._fault(f"{row.reason}, {utc_text(row.time)}", "interval_h, or a file without that row")
            if stamps.size < 2:
                raise self._fault(f"{stamps.size} row", "two rows or more, or interval_h")
            return
        if stamps.size == 0:
            raise self._fault("no rows", "at least one")
        close = np.flatnonzero(np.diff(stamps) < self._interval * (1 - SPACING_TOLERANCE))
        if close.size:
            one, two = stamps[close[0]], stamps[close[0] + 1]
            raise self._fault(
                f"rows {(two - one) / MICROS_PER_HOUR:g} h apart, {utc_text(one)} to {utc_text(two)}, "
                f"while interval_h = {self.interval_h:g}",
                "rows one interval apart",
            )


def read_series(
    path: str | Path,
    *,
    name: str,
    column: str | None = None,
    interval_h: float | None = None,
    hold: Hold = "step",
    shown_as: str = "",
) -> Series:
    """Read a history from a file whose format its content tells: CSV, GFZ Kp text, or CSSI space-weather text.

    Parameters
    ----------
    path : path
    name : str
        Of the series.
    column : str, optional
        Needed only when a CSV has several value columns.
    interval_h : float, optional
        Length of the interval each value stands for; implied by index files.
    hold : str
        ``step`` or ``linear``.
    shown_as : str, optional
        The file's name as the user wrote it.

    Raises
    ------
    InputError
        When the file cannot be read or understood; names the file, the line and what stands there.
    """
    _check_hold(name, hold)
    _check_interval(name, interval_h)
    text = read_text(path, shown_as or str(path), f"series.{name}.file")
    rows = read_rows(text, name, column, interval_h)
    return Series(
        name=name,
        quantity=rows.quantity,
        times=rows.times.view("datetime64[us]"),
        values=rows.values,
        interval_h=rows.interval_h if interval_h is None else interval_h,
        hold=hold,
        file=text.file,
        sha256=text.sha256,
        absent=rows.absent,
    )


def _check_hold(name: str, hold: Any) -> None:
    if hold not in HOLDS:
        raise InputError("unknown hold", "step or linear", key=f"series.{name}.hold", value=hold)


def _check_interval(name: str, interval_h: Any) -> None:
    if interval_h is None:
        return
    number = isinstance(interval_h, (int, float, np.integer, np.floating)) and not isinstance(interval_h, bool)
    if not number or not math.isfinite(interval_h) or not 1e-9 < interval_h <= LONGEST_H:
        remedy = f"hours above 0, up to {LONGEST_H:g}"
        raise InputError("not a length of time", remedy, key=f"series.{name}.interval_h", value=interval_h)
