"""Orbit ephemeris messages: CCSDS 502.0-B, the text form (keyword = value notation)."""

from __future__ import annotations

import math
import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from fields import constants
from fields.clock import iso_micros, utc_text
from fields.errors import InputError
from fields.readers.rows import check_order, line_fault, number
from fields.readers.textfile import TextFile, read_text
from tracer.ephemeris.sampled import Ephemeris, Segment

WANTED = "a CCSDS orbit ephemeris message (OEM) in its text form"
# EME2000 is taken for GCRF, from which it is 23 milliarcseconds (6e-6 degree) away; realisations of the ITRF differ by
# less.
FRAMES = {"GCRF": "GCRS", "ICRF": "GCRS", "EME2000": "GCRS", "TEME": "TEME"}
FRAME_WORDS = "one of GCRF, ICRF, EME2000, TEME, ITRF2000 or another ITRF"
NEEDED = {
    "CENTER_NAME": "EARTH",
    "REF_FRAME": "EME2000",
    "TIME_SYSTEM": "UTC",
    "START_TIME": "2027-03-04T00:00:00",
    "STOP_TIME": "2027-03-05T00:00:00",
}
METHODS = ("HERMITE", "LAGRANGE", "LINEAR")
DEFAULT_POINTS = 4  # of Hermite's polynomial, where the message recommends none: degree 7
HIGHEST_DEGREE = 31
DAY_OF_YEAR = re.compile(r"(\d{4})-(\d{3})(T.*)")


@dataclass(eq=False)
class Block:
    """One metadata section and the lines of states under it, while a message is read."""

    begins: int
    ends: int = 0
    meta: dict[str, tuple[int, str]] = field(default_factory=dict)
    lines: list[int] = field(default_factory=list)
    times: list[int] = field(default_factory=list)
    states: list[list[float]] = field(default_factory=list)


def read_oem(path: str | Path, *, file: str = "", key: str = "oem") -> Ephemeris:
    """The segments of a message.

    States are joined by the recommended polynomial of each segment, or by Hermite's of degree 7, never across segments.
    A segment holds from USEABLE_START_TIME to USEABLE_STOP_TIME where these are given, else from its first state to its
    last. Covariance matrices and accelerations are passed over.

    Parameters
    ----------
    path : path
    file : str, optional
        Its name as the user wrote it.
    key : str
        The key under which the user gave that name.

    Raises
    ------
    InputError
        Naming the line and what stands there.
    """
    text = read_text(path, file or str(path), key, WANTED)
    lines = _content(text)
    line, first = next(lines, (1, ""))
    if not first.startswith("CCSDS_OEM_VERS"):
        remedy = f"{WANTED}: CCSDS_OEM_VERS = 2.0 on its first line"
        raise line_fault(text.file, line, first, "not an orbit ephemeris message", remedy)
    blocks = _blocks(text, lines)
    if not blocks:
        raise InputError("holds no META_START", "metadata and states", file=text.file)
    return Ephemeris(tuple(_segment(text, block) for block in blocks), text.file, text.sha256)


def _content(text: TextFile) -> Iterator[tuple[int, str]]:
    for line, content in enumerate(text.lines, start=1):
        bare = content.strip()
        if bare and bare.split()[0] != "COMMENT":
            yield line, bare


def _blocks(text: TextFile, lines: Iterator[tuple[int, str]]) -> list[Block]:
    found: list[Block] = []
    inside = ""  # the section that has begun: META, COVARIANCE
    for line, content in lines:
        section, _, edge = content.rpartition("_")
        if section in ("META", "COVARIANCE") and edge in ("START", "STOP"):
            if (edge == "START") == bool(inside) or (edge == "STOP" and section != inside):
                raise line_fault(text.file, line, content, "out of place", "each START with its STOP after it")
            inside = section if edge == "START" else ""
            if content == "META_START":
                found.append(Block(line))
            elif content == "META_STOP":
                found[-1].ends = line
        elif inside == "META":
            name, equals, value = content.partition("=")
            if not equals:
                raise line_fault(text.file, line, content, "not KEYWORD = value", "such as REF_FRAME = EME2000")
            found[-1].meta[name.strip()] = (line, value.strip())
        elif not inside and found:
            _add_state(text, line, content, found[-1])
    if inside:
        raise InputError(f"{inside}_START without its {inside}_STOP", WANTED, file=text.file)
    return found


def _add_state(text: TextFile, line: int, content: str, block: Block) -> None:
    time, *cells = content.split()
    stamp = epoch(time)
    if stamp is None:
        raise line_fault(text.file, line, time, "not a time", "a state with its epoch: 2027-03-04T00:00:00.000")
    values = [number(cell) for cell in cells]
    state = [v for v in values if v is not None and math.isfinite(v)]
    if len(values) not in (6, 9) or len(state) != len(values):
        problem, remedy = "not a state", "position in km and velocity in km/s: six numbers, or nine with acceleration"
        raise line_fault(text.file, line, content, problem, remedy)
    radius = math.hypot(*state[:3]) / constants.EARTH_RADIUS_KM
    if radius < 1.0:
        problem = f"{radius:.4g} R_E from the Earth's centre: inside the Earth"
        raise line_fault(text.file, line, None, problem, "positions in km, outside the Earth")
    block.lines.append(line)
    block.times.append(stamp)
    block.states.append(state[:6])


def epoch(text: str) -> int | None:
    """A CCSDS time, by calendar date or day of the year, as an instant; None when it is none."""
    by_day = DAY_OF_YEAR.fullmatch(text)
    if by_day is None:
        return iso_micros(text)
    begin = np.datetime64(f"{by_day[1]}-01-01") + (int(by_day[2]) - 1)
    return iso_micros(f"{begin}{by_day[3]}") if str(begin)[:4] == by_day[1] else None


def _segment(text: TextFile, block: Block) -> Segment:
    for name, example in NEEDED.items():
        if not block.meta.get(name, (0, ""))[1]:
            remedy = f"{name} = {example} between META_START and META_STOP"
            raise line_fault(text.file, block.begins, None, f"metadata without {name}", remedy)
    _only(text, block, "CENTER_NAME", "EARTH", "another centre than the Earth")
    _only(text, block, "TIME_SYSTEM", "UTC", "another time system than UTC")
    if len(block.times) < 2:
        raise line_fault(text.file, block.ends, None, f"{len(block.times)} states below", "two or more a segment")
    times = np.array(block.times, dtype=np.int64)
    check_order(times, file=text.file, lines=block.lines)
    first, last = _useable(text, block)
    states = np.array(block.states)
    points, velocities = _method(text, block)
    return Segment(
        _frame(text, block), times, states[:, :3], states[:, 3:] if velocities else None, points, first, last
    )


def _only(text: TextFile, block: Block, name: str, right: str, problem: str) -> None:
    line, value = block.meta[name]
    if value.upper() != right:
        raise line_fault(text.file, line, f"{name} = {value}", problem, f"{name} = {right}")


def _frame(text: TextFile, block: Block) -> str:
    line, value = block.meta["REF_FRAME"]
    name = value.upper()
    if name.startswith("ITRF"):
        return "ITRF"
    if name not in FRAMES:
        raise line_fault(text.file, line, f"REF_FRAME = {value}", "not a frame that is read here", FRAME_WORDS)
    return FRAMES[name]


def _useable(text: TextFile, block: Block) -> tuple[int, int]:
    """First and last instant at which the segment may be used."""
    given = {}
    for name in ("START_TIME", "STOP_TIME", "USEABLE_START_TIME", "USEABLE_STOP_TIME"):
        if name in block.meta:
            line, value = block.meta[name]
            stamp = epoch(value)
            if stamp is None:
                raise line_fault(text.file, line, f"{name} = {value}", "not a time", "such as 2027-03-04T00:00:00.000")
            given[name] = stamp
    first = max(block.times[0], given.get("USEABLE_START_TIME", block.times[0]))
    last = min(block.times[-1], given.get("USEABLE_STOP_TIME", block.times[-1]))
    begin, end = given["START_TIME"], given["STOP_TIME"]
    if block.times[0] < begin or block.times[-1] > end:
        at, wrong = (0, begin) if block.times[0] < begin else (-1, end)
        problem = f"state outside START_TIME to STOP_TIME ({utc_text(wrong)})"
        raise line_fault(text.file, block.lines[at], utc_text(block.times[at]), problem, "states between the two")
    if first > last:
        raise line_fault(text.file, block.begins, None, "no state in the useable times", "times that the states span")
    return first, last


def _method(text: TextFile, block: Block) -> tuple[int, bool]:
    """How many states a polynomial goes through, and whether their velocities count."""
    count = len(block.times)
    if "INTERPOLATION" not in block.meta:
        return min(DEFAULT_POINTS, count), True
    line, value = block.meta["INTERPOLATION"]
    name = value.upper()
    if name not in METHODS:
        raise line_fault(text.file, line, f"INTERPOLATION = {value}", "unknown", "one of " + ", ".join(METHODS))
    if name == "LINEAR":
        return 2, False
    if "INTERPOLATION_DEGREE" not in block.meta:
        remedy = "for example INTERPOLATION_DEGREE = 7"
        raise line_fault(text.file, line, f"INTERPOLATION = {value}", "without INTERPOLATION_DEGREE", remedy)
    line, value = block.meta["INTERPOLATION_DEGREE"]
    shown = f"INTERPOLATION_DEGREE = {value}"
    if not (value.isdecimal() and 1 <= int(value) <= HIGHEST_DEGREE):
        raise line_fault(text.file, line, shown, "not a degree", f"a whole number from 1 to {HIGHEST_DEGREE}")
    points = max(int(value) // 2 + 1, 2) if name == "HERMITE" else int(value) + 1
    if points > count:
        raise line_fault(text.file, line, shown, f"takes {points} states, the segment has {count}", "a lower degree")
    return points, name == "HERMITE"
