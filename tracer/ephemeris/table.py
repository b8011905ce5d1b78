"""An orbit in a CSV: places in km in a named frame, or points of the magnetic equator."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from fields import constants
from fields.errors import InputError
from fields.frames import FRAMES
from fields.readers.columns import Columns, read_columns
from fields.readers.rows import line_fault
from fields.readers.textfile import TextFile, read_text
from tracer.ephemeris.sampled import Ephemeris, EquatorialTable, Segment

PLACES = ("x_km", "y_km", "z_km")
EQUATOR = ("r_re", "mlt_h")
POINTS = 8  # of Lagrange's polynomial between rows, fewer where there are fewer rows
WANTED = f"a CSV with the columns time,{','.join(PLACES)} or time,{','.join(EQUATOR)}"


def read_table(path: str | Path, frame: str | None, *, file: str = "", key: str = "csv") -> Ephemeris | EquatorialTable:
    """The orbit of a CSV.

    Between rows of places goes Lagrange's polynomial of degree 7 in the frame of the file; rows some minutes apart then
    add no error that counts. Points of the equator are joined by straight lines.

    Parameters
    ----------
    path : path
    frame : str or None
        Of the places; None where the file holds points of the equator.
    file : str, optional
        Its name as the user wrote it.
    key : str
        The key under which the user gave that name; its last part is replaced by "frame" where that is at fault.

    Raises
    ------
    InputError
        Naming the line and what stands there, or the key.
    """
    text = read_text(path, file or str(path), key, WANTED)
    columns = read_columns(text, (PLACES, EQUATOR))
    frame_key = f"{key.rpartition('.')[0]}.frame".lstrip(".")
    if columns.names == EQUATOR:
        if frame is not None:
            problem = f"{text.file} holds points of the magnetic equator"
            raise InputError(problem, "no frame beside r_re and mlt_h", key=frame_key, value=frame)
        return _equator(text, columns)
    if frame is None:
        problem = f"missing: {text.file} holds x_km, y_km, z_km"
        raise InputError(problem, "one of " + ", ".join(FRAMES), key=frame_key)
    radius = np.linalg.norm(columns.values, axis=1) / constants.EARTH_RADIUS_KM
    inside = np.flatnonzero(radius < 1.0)
    if inside.size:
        at = int(inside[0])
        problem = f"{radius[at]:.4g} R_E from the Earth's centre: inside the Earth"
        raise line_fault(text.file, columns.lines[at], None, problem, "places in km, outside the Earth")
    times, points = columns.times, min(POINTS, columns.times.size)
    segment = Segment(frame, times, columns.values, None, points, int(times[0]), int(times[-1]))
    return Ephemeris((segment,), text.file, text.sha256)


def _equator(text: TextFile, columns: Columns) -> EquatorialTable:
    r, mlt = columns.values.T
    for bad, name, what, right in (
        (r < 1.0, "r_re", "inside the Earth", "distances from 1 R_E"),
        ((mlt < 0.0) | (mlt > 24.0), "mlt_h", "not a local time", "hours from 0 to 24"),
    ):
        found = np.flatnonzero(bad)
        if found.size:
            at = int(found[0])
            value = float(columns.values[at, EQUATOR.index(name)])
            raise line_fault(text.file, columns.lines[at], f"{name} {value:g}", what, right)
    return EquatorialTable(columns.times, r, mlt, text.file, text.sha256)
