"""The Kp text files of GFZ: one line for three hours (10 columns), or one line for a day (28 columns).

Columns as their headers describe them: ``YYYY MM DD hh.h hh._m days days_m Kp ap D``, and
``YYYY MM DD days days_m Bsr dB Kp1 .. Kp8 ap1 .. ap8 Ap SN F10.7obs F10.7adj D``. Missing Kp is -1.000.
Source: Matzka et al. (2021), Geomagnetic Kp index, GFZ Data Services, doi:10.5880/Kp.0001.
"""

from __future__ import annotations

from fields.clock import MICROS_PER_HOUR, day_micros
from fields.readers.kp import FILL, LARGEST, third_written
from fields.readers.rows import Gathered, Rows, line_fault, number
from fields.readers.textfile import TextFile

INTERVAL_H = 3.0
_HOURLY, _DAILY = 10, 28
_HOURLY_KP, _DAILY_KP = 7, 7
_HOURS = range(0, 24, 3)
_FORMATS = f"{_HOURLY} columns (three hours a line) or {_DAILY} (a day a line)"


def looks_like_gfz(lines: list[str]) -> bool:
    """Whether the first line that is no comment begins with a date in three blank-separated integers."""
    for line in lines:
        if line.strip() and not line.startswith("#"):
            words = line.split()
            return "," not in line and len(words) > 3 and len(words[0]) == 4 and all(w.isdigit() for w in words[:3])
    return False


class _Reader:
    """Rows so far, and the words already understood: a century of lines repeats a few of them."""

    def __init__(self, file: str) -> None:
        self.file = file
        self.found = Gathered(file)
        self.days: dict[tuple[str, ...], int] = {}
        self.values: dict[str, float] = {}
        self.hours: dict[tuple[str, ...], int] = {}

    def read(self, line: int, words: list[str]) -> None:
        if len(words) not in (_HOURLY, _DAILY):
            raise line_fault(self.file, line, None, f"{len(words)} columns", _FORMATS)
        date = tuple(words[:3])
        day = self.days.get(date)
        if day is None:
            day = self.days[date] = self._day(line, date)
        if len(words) == _DAILY:
            for hour, word in zip(_HOURS, words[_DAILY_KP : _DAILY_KP + len(_HOURS)]):
                self._add(line, day + hour * MICROS_PER_HOUR, word)
            return
        stamp = tuple(words[3:5])
        hour = self.hours.get(stamp, -1)
        if hour < 0:
            hour = self.hours[stamp] = self._hour(line, stamp)
        self._add(line, day + hour * MICROS_PER_HOUR, words[_HOURLY_KP])

    def _day(self, line: int, date: tuple[str, ...]) -> int:
        day = day_micros(*date)
        if day is None:
            raise line_fault(self.file, line, " ".join(date), "not a date", "year, month and day")
        return day

    def _hour(self, line: int, stamp: tuple[str, ...]) -> int:
        start, middle = number(stamp[0]), number(stamp[1])
        if start is None or start not in _HOURS or middle != start + INTERVAL_H / 2:
            raise line_fault(
                self.file,
                line,
                " ".join(stamp),
                "not the start and the middle of a three-hour interval",
                "a file of Kp: starts 00.0, 03.0, ... 21.0, middles 01.5, 04.5, ... 22.5",
            )
        return int(start)

    def _add(self, line: int, time: int, word: str) -> None:
        value = self.values.get(word)
        if value is None:
            value = self.values[word] = self._kp(line, word)
        if value == FILL:
            self.found.add_void(line, time, f"fill value {word}")
        else:
            self.found.add(line, time, value)

    def _kp(self, line: int, word: str) -> float:
        value = number(word)
        if value == FILL:
            return FILL
        third = third_written(word)
        if third is not None:
            return third
        outside = value is not None and (value < 0 or value > LARGEST)
        problem = "Kp outside 0 to 9" if outside else "not a Kp"
        raise line_fault(self.file, line, word, problem, "a third from 0 to 9 as 4.667, or -1.000 where there is none")


def read_gfz(text: TextFile) -> Rows:
    """Rows of Kp from a GFZ text file.

    Raises
    ------
    InputError
        Naming the line and what stands there.
    """
    reader = _Reader(text.file)
    for line, content in enumerate(text.lines, start=1):
        if content and not content.startswith("#"):
            words = content.split()
            if words:
                reader.read(line, words)
    return reader.found.rows("kp", INTERVAL_H)
