"""Orbit ephemeris messages as CCSDS 502.0-B (Orbit Data Messages) lays them down, of an invented transfer orbit."""

from __future__ import annotations

import numpy as np

from fields import constants
from tracer.ephemeris.elements import Elements

START = np.datetime64("2027-03-04T00:00:00", "us")
GTO = Elements(int(START.astype(np.int64)), 24400.0 / constants.EARTH_RADIUS_KM, 0.73, 7.0, 20.0, 178.0, 30.0)

HEADER = """CCSDS_OEM_VERS = 2.0
COMMENT made up for a test
CREATION_DATE = 2027-03-01T00:00:00
ORIGINATOR = NOBODY
"""


def state_lines(first_min: float, last_min: float, step_min: float, by_day: bool = False) -> list[str]:
    """Epochs with places and velocities of a transfer orbit, the latter by central differences."""
    minutes = np.arange(first_min, last_min + 1e-9, step_min)
    stamps = GTO.epoch + np.rint(minutes * 60e6).astype(np.int64)
    places, before, after = (next(GTO.pieces(stamps + shift)).places_km for shift in (0, -100_000, 100_000))
    velocities = (after - before) / 0.2
    lines = []
    for stamp, place, velocity in zip(stamps, places, velocities, strict=True):
        time = str(stamp.view("datetime64[us]"))[:-3]
        if by_day:
            day = (np.datetime64(time[:10]) - np.datetime64("2027-01-01")).astype(int) + 1
            time = f"2027-{day:03d}{time[10:]}"
        lines.append(f"{time} " + " ".join(f"{v:.9f}" for v in [*place, *velocity]))
    return lines


def block(lines: list[str], **changes: str | None) -> str:
    """A segment: metadata, some of them changed or left out, and its states."""
    meta: dict[str, str | None] = {
        "OBJECT_NAME": "INVENTED",
        "OBJECT_ID": "2027-001A",
        "CENTER_NAME": "EARTH",
        "REF_FRAME": "TEME",
        "TIME_SYSTEM": "UTC",
        "START_TIME": lines[0].split()[0] if lines else "2027-03-04T00:00:00",
        "STOP_TIME": lines[-1].split()[0] if lines else "2027-03-05T00:00:00",
        "INTERPOLATION": "HERMITE",
        "INTERPOLATION_DEGREE": "7",
        **changes,
    }
    rows = [f"{key} = {value}" for key, value in meta.items() if value is not None]
    return "\n".join(["META_START", *rows, "META_STOP", "", *lines, ""])
