"""The CSSI space-weather text file: one day a line, columns by position.

Format ``I4,I3,I3,I5,I3,8I3,...``: year, month, day, Bartels rotation and day, eight Kp in tenths
(https://celestrak.org/SpaceData/SpaceWx-format.php). Only observed values are used; predicted ones are known by name.
"""

from __future__ import annotations

from collections.abc import Iterator

from fields.clock import MICROS_PER_DAY, day_micros
from fields.errors import InputError
from fields.readers.kp import TENTHS, TENTHS_TEXT
from fields.readers.rows import Gathered, Rows, line_fault
from fields.readers.textfile import TextFile

INTERVAL_H = 3.0
_STEP = MICROS_PER_DAY // 8
_KP = tuple(slice(18 + 3 * i, 21 + 3 * i) for i in range(8))
_END = _KP[-1].stop
_MEANINGS = {f"{tenths:{width}d}": kp for tenths, kp in TENTHS.items() for width in ("3", " 03")}
_MEANINGS = {f"{tenths:3d}": kp for tenths, kp in TENTHS.items()}
_OBSERVED, _PREDICTED = "OBSERVED", "DAILY_PREDICTED"


def looks_like_cssi(lines: list[str]) -> bool:
    """Whether a section of observed values begins somewhere, or the first line declares the type."""
    first = next((line for line in lines if line.strip()), "")
    return first.split()[:2] == ["DATATYPE", "CssiSpaceWeather"] or any(
        line.startswith("BEGIN OBSERVED") for line in lines
    )


def read_cssi(text: TextFile) -> Rows:
    """Observed Kp from a CSSI space-weather text file.

    Raises
    ------
    InputError
        Naming the line and what stands there.
    """
    found = Gathered(text.file)
    for section, line, content in _days(text):
        day = day_micros(content[0:4], content[4:7], content[7:10])
        if day is None:
            raise line_fault(text.file, line, content[:10], "not a date", "year, month and day in columns 1 to 10")
        if section == _PREDICTED and found.times and day <= found.times[-1]:
            continue
        if len(content) < _END:
            raise line_fault(text.file, line, content, "cut short", f"eight Kp in columns 19 to {_END}")
        _read_day(found, section, line, content, day)
    return found.rows("kp", INTERVAL_H)


def _read_day(found: Gathered, section: str, line: int, content: str, day: int) -> None:
    times = range(day, day + MICROS_PER_DAY, _STEP)
    cells = [content[part] for part in _KP]
    if section == _OBSERVED and _MEANINGS.keys() >= set(cells):
        found.add_all(line, times, [_MEANINGS[cell] for cell in cells])
        return
    for time, cell in zip(times, cells):
        if section == _PREDICTED:
            found.add_void(line, time, "predicted, not observed")
        elif cell.strip() in ("", "-1"):
            found.add_void(line, time, "left blank")
        elif cell in _MEANINGS:
            found.add(line, time, _MEANINGS[cell])
        else:
            raise _not_kp(found.file, line, cell.strip())


def _days(text: TextFile) -> Iterator[tuple[str, int, str]]:
    """Section, line number and content of every observed or daily predicted line."""
    section = ""
    for line, content in enumerate(text.lines, start=1):
        if content.startswith("BEGIN "):
            section = content[6:].strip()
        elif content.startswith("END "):
            section = ""
        elif section in (_OBSERVED, _PREDICTED) and content.strip() and not content.startswith("#"):
            yield section, line, content


def _not_kp(file: str, line: int, cell: str) -> InputError:
    outside = cell.lstrip("-").isdigit() and not 0 <= int(cell) <= 90
    return line_fault(file, line, cell, "Kp outside 0 to 9" if outside else "not a Kp in tenths", TENTHS_TEXT)
