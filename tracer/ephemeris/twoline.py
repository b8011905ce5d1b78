"""Two-line element sets: reading and checking them, and the SGP4 model, which is the only one they are made for."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from fields import constants
from fields.clock import MICROS_PER_DAY, Micros, day_micros, utc_text
from fields.errors import InputError
from fields.readers.rows import line_fault, number
from fields.readers.textfile import TextFile, read_text
from fields.units import Floats
from tracer.ephemeris.source import Piece

WIDTH = 69
WANTED = "a two-line element set"
EXTRA = "pip install 'driftrose[orbits]'"
JULIAN_DAY_1970 = 2440587.5
MICROS_OF_LAST_DIGIT = 864  # the epoch has eight decimals of a day
# field of line 2: columns, counted from 0
COLUMNS = {
    "inclination": slice(8, 16),
    "right ascension of the node": slice(17, 25),
    "eccentricity": slice(26, 33),
    "argument of perigee": slice(34, 42),
    "mean anomaly": slice(43, 51),
    "mean motion": slice(52, 63),
}


@dataclass(frozen=True)
class TwoLine:
    """One element set.

    Attributes
    ----------
    line1, line2 : str
    epoch : int
        Microseconds since 1970-01-01 UTC, exact.
    file, sha256 : str
        Where it came from.
    """

    line1: str
    line2: str
    epoch: int
    file: str = ""
    sha256: str = ""

    @property
    def perigee_re(self) -> float:
        """Distance of the perigee from the Earth's centre by Kepler's third law; SGP4's own is some km off."""
        motion = float(self.line2[COLUMNS["mean motion"]]) * 2.0 * math.pi / 86400.0
        eccentricity = float("0." + self.line2[COLUMNS["eccentricity"]].strip())
        a_km = math.cbrt(constants.EARTH_GM_KM3_S2 / motion**2)
        return a_km * (1.0 - eccentricity) / constants.EARTH_RADIUS_KM

    def covered(self, stamps: Micros) -> NDArray[np.bool_]:
        """All instants; how far from the epoch is sensible, the user must judge."""
        return np.ones(stamps.shape, dtype=bool)

    def pieces(self, stamps: Micros) -> Iterator[Piece]:
        """See Source."""
        yield Piece(np.arange(stamps.size), "TEME", self.places_km(stamps))

    def places_km(self, stamps: Micros) -> Floats:
        """Places in TEME by SGP4 (Vallado et al. 2006, AIAA 2006-6753), constants of WGS 72.

        Raises
        ------
        InputError
            Without sgp4, or at the first instant at which the model gives none.
        """
        try:
            from sgp4.api import SGP4_ERRORS, Satrec
        except ImportError:
            raise InputError("two-line elements take sgp4, which is not installed", EXTRA, file=self.file) from None
        satellite = Satrec.twoline2rv(self.line1, self.line2)
        days, rest = np.divmod(stamps, MICROS_PER_DAY)
        codes, places, _ = satellite.sgp4_array(JULIAN_DAY_1970 + days, rest / MICROS_PER_DAY)
        failed = np.flatnonzero(codes)
        if failed.size:
            what = SGP4_ERRORS[int(codes[failed[0]])]
            problem = f"SGP4 gives no place at {utc_text(stamps[failed[0]])}: {what}"
            raise InputError(problem, "elements of an epoch near the run", file=self.file)
        return np.asarray(places, dtype=float)


def read_two_line(path: str | Path, *, file: str = "", key: str = "tle") -> TwoLine:
    """The one element set of a file: two lines, a name above them or not.

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
        Naming the line and what is wrong with it: its length, its checksum, a field that is no number.
    """
    text = read_text(path, file or str(path), key, WANTED)
    found = [(number_, line.rstrip()) for number_, line in enumerate(text.lines, start=1) if line.strip()]
    found = [(number_, line) for number_, line in found if not line.startswith("#")]
    if len(found) > 2 and not found[0][1].startswith("1 "):
        found = found[1:]  # a name
    if len(found) != 2:
        starts = sum(line.startswith("1 ") for _, line in found)
        problem = f"holds {starts} element sets" if starts > 1 else "holds no element set"
        raise InputError(problem, "one: its two lines, or a name and two lines", file=text.file)
    for mark, (at, line) in zip("12", found):
        _check_line(text, at, line, mark)
    (at, line1), (below, line2) = found
    if line1[2:7] != line2[2:7]:
        raise line_fault(text.file, below, line2[2:7], f"line 1 is of satellite {line1[2:7]}", "both of the same")
    _check_fields(text, below, line2)
    return TwoLine(line1, line2, _epoch(text, at, line1), text.file, text.sha256)


def checksum(line: str) -> int:
    """The sum of all digits of the first 68 columns, a minus sign counting 1, modulo 10."""
    return sum(int(c) if c.isdigit() else c == "-" for c in line[: WIDTH - 1]) % 10


def _check_line(text: TextFile, at: int, line: str, mark: str) -> None:
    if not line.startswith(f"{mark} "):
        raise line_fault(text.file, at, line[:2], f"not line {mark} of an element set", f'it begins with "{mark} "')
    if len(line) != WIDTH or not line.isascii():
        raise line_fault(text.file, at, None, f"{len(line)} characters", f"the {WIDTH} columns of {WANTED}, in ASCII")
    right = checksum(line)
    if line[-1] != str(right):
        remedy = f"{right} for the line as it stands, or the line as published"
        raise line_fault(text.file, at, line[-1], "wrong checksum: a character of the line is damaged", remedy)


def _check_fields(text: TextFile, at: int, line: str) -> None:
    for name, columns in COLUMNS.items():
        field = line[columns].strip()
        value = number("0." + field if name == "eccentricity" else field)
        if value is None or not math.isfinite(value) or value < 0.0:
            raise line_fault(text.file, at, line[columns], f"{name}: not such a number", f"{WANTED} as published")
    if float(line[COLUMNS["mean motion"]]) == 0.0:
        raise line_fault(text.file, at, line[COLUMNS["mean motion"]], "mean motion 0", "revolutions a day above 0")


def _epoch(text: TextFile, at: int, line: str) -> int:
    """Two digits of the year, 57 to 99 in the twentieth century, and the day of the year with eight decimals."""
    field = line[18:32]
    year, day, fraction = field[:2].strip(), field[2:5].strip(), field[6:]
    if not (year.isdigit() and day.isdigit() and field[5] == "." and fraction.isdigit() and 1 <= int(day) <= 366):
        raise line_fault(text.file, at, field, "not an epoch", "year and day of the year, as 27063.50000000")
    begin = day_micros(str((1900 if int(year) >= 57 else 2000) + int(year)), "1", "1")
    assert begin is not None
    return begin + (int(day) - 1) * MICROS_PER_DAY + int(fraction) * MICROS_OF_LAST_DIGIT
