"""Run tables for the tests of the physics. All numbers are invented."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import UTC, datetime, timedelta
from typing import Any

import numpy as np

from tracer.records import Result

START = datetime(2027, 3, 4, tzinfo=UTC)
B0_NT = 30000.0


def span(begin: float, end: float, spacing: str = "linear") -> dict[str, Any]:
    return {"from": begin, "to": end, "spacing": spacing}


def drawn(species: str, count: int, seed: int, **given: Any) -> dict[str, Any]:
    """A population: all pitch angles and local times, 1 keV to 1 MeV, 3 to 7 R_E, unless given."""
    usual: dict[str, Any] = {
        "name": species,
        "species": species,
        "count": count,
        "draw": "random",
        "seed": seed,
        "r_re": span(3.0, 7.0),
        "mlt_h": span(0.0, 24.0),
        "energy_keV": span(1.0, 1000.0, "log"),
        "pitch_deg": span(1.0, 90.0),
    }
    return {**usual, **given}


def single(name: str, species: str, **given: float) -> dict[str, Any]:
    """A population of one particle."""
    return {"name": name, "species": species, "draw": "grid", **given}


def three_hourly(values: Sequence[float]) -> dict[str, Any]:
    times = [START + timedelta(hours=3.0 * i) for i in range(len(values))]
    return {"time": times, "value": list(values), "interval_h": 3.0}


def tables(electric: list[dict[str, Any]], populations: list[dict[str, Any]], **given: Any) -> dict[str, Any]:
    """A run in a dipole; `given` holds other tables, and ``tolerance_re`` and ``every_min`` (0 unless given)."""
    output = {name: given.pop(name) for name in ("tolerance_re", "every_min") if name in given}
    usual: dict[str, Any] = {
        "title": "Invented",
        "time": {"start": START, "hours": 24.0},
        "domain": {"outer_re": 10.0},
        "magnetic": {"model": "dipole", "b0_nT": B0_NT},
        "electric": electric,
        "population": populations,
        "output": {"every_min": 0.0, **output},
    }
    return {**usual, **given}


def azimuth(mlt_h: np.ndarray) -> np.ndarray:
    return np.asarray((mlt_h - 12.0) * np.pi / 12.0)


def end_azimuth(result: Result) -> np.ndarray:
    """phi at the end, unwrapped, rad."""
    return azimuth(result.particle["mlt_h"]) + 2.0 * np.pi * result.end["turns"]
