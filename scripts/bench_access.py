"""Access: a million targets traced back a day, and a day along a transfer orbit. Storm and orbit are invented."""

from __future__ import annotations

import statistics
import tempfile
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

import tracer
from tracer.memory import peak_bytes
from tracer.store import size_text

START = datetime(2027, 3, 4, tzinfo=UTC)
KP = (1.0, 2.0, 3.0, 5.0, 6.0, 5.0, 4.0, 3.0, 3.0, 2.0, 2.0, 4.0, 5.0, 3.0, 2.0, 1.0)  # three-hourly
ELEMENTS = {"epoch": START, "a_re": 4.0, "e": 0.72, "i_deg": 7.0, "raan_deg": 0.0, "argp_deg": 180.0, "m_deg": 0.0}
MAP = {
    "species": ["H+", "e-"],
    "energy_keV": [1.0, 3.0, 10.0, 30.0, 100.0],
    "pitch_deg": [90.0, 45.0],
    "r_re": {"from": 1.5, "to": 10.0, "n": 86},
    "mlt_h": {"from": 0.0, "to": 24.0, "n": 97},
    "time_h": [24.0, 28.0, 32.0, 36.0, 42.0, 48.0],
}
ALONG = {
    "species": "H+",
    "energy_keV": {"from": 1.0, "to": 300.0, "n": 48, "spacing": "log"},
    "pitch_deg": [90.0, 75.0, 60.0, 45.0, 30.0],
}
ASKED: dict[str, tuple[dict[str, Any], list[dict[str, Any]], float]] = {
    "map, 1,001,040 targets back 24 h": (MAP, [], 48.0),
    "orbit, 48 energies x 5 pitch angles x 289 times": (ALONG, [{"name": "transfer", "elements": ELEMENTS}], 24.0),
}


def access(rounds: int) -> dict[str, list[float]]:
    """Print and return the seconds of each, warm, file and tables included."""
    print("access, file and tables included, warm:")
    found = {title: [once(*asked) for _ in range(rounds + 1)][1:] for title, asked in ASKED.items()}
    for title, seconds in found.items():
        print(f"  {title:48} {statistics.median(seconds):.1f} s ({min(seconds):.1f} to {max(seconds):.1f})")
    print(f"  {size_text(peak_bytes())} of memory at most")
    return found


def once(asked: dict[str, Any], orbits: list[dict[str, Any]], hours: float) -> float:
    times = [START + timedelta(hours=3 * i) for i in range(len(KP))]
    run = tracer.build(
        {
            "time": {"start": START, "hours": hours},
            "series": {"kp": {"time": times, "value": KP, "interval_h": 3.0}},
            "magnetic": {"model": "dipole", "b0_nT": 30000.0},
            "electric": [{"model": "corotation"}, {"model": "volland-stern", "kp": "series:kp"}],
            "access": {**asked, "back_hours": 24.0},
            "orbit": orbits,
        }
    )
    with tempfile.TemporaryDirectory(prefix="driftrose-bench-") as folder:
        return float(tracer.access(run, Path(folder) / "out.access.h5").work["wall_s"])
