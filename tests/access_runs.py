"""Runs that ask for access, on the kernel that `storm_runs` shares. Storm, orbits and targets are invented."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

import h5py
import numpy as np

import tracer
from tracer.access_records import AccessResult
from tracer.scenario import Scenario

START = datetime(2027, 3, 4, tzinfo=UTC)
KP = (3.0, 5.0, 6.0, 7.0, 6.0, 4.0, 3.0, 2.0)  # three-hourly
ELEMENTS = {"epoch": START, "a_re": 4.0, "e": 0.7, "i_deg": 20.0, "raan_deg": 0, "argp_deg": 180, "m_deg": 0}
ORBITS = [
    {"name": "transfer", "every_min": 45.0, "elements": ELEMENTS},
    {"name": "far", "every_min": 90.0, "elements": {**ELEMENTS, "a_re": 8.0, "i_deg": 3.0}},
]


def tables(*orbits: dict[str, Any], hours: float = 24.0, **access: Any) -> dict[str, Any]:
    """Tables of a run; None leaves a key of [access] out."""
    usual: dict[str, Any] = {
        "species": ["H+", "e-"],
        "energy_keV": [1.0, 30.0],
        "pitch_deg": [90.0, 45.0],
        "r_re": [4.0, 6.0, 8.0],
        "mlt_h": {"from": 0.0, "to": 24.0, "n": 8},
        "time_h": [8.0, 20.0],
        "back_hours": 12.0,
        "source": {"mlt_h": {"from": 20.0, "to": 1.0}},
    }
    return {
        "time": {"start": START, "hours": hours},
        "series": {"kp": {"time": [START + timedelta(hours=3 * i) for i in range(8)], "value": KP, "interval_h": 3.0}},
        "magnetic": {"model": "dipole", "b0_nT": 30000.0},
        "electric": [{"model": "corotation"}, {"model": "volland-stern", "kp": "series:kp"}],
        "access": {key: value for key, value in {**usual, **access}.items() if value is not None},
        "orbit": list(orbits),
    }


def asked(*orbits: dict[str, Any], **access: Any) -> Scenario:
    """The run of `tables`."""
    return tracer.build(tables(*orbits, **access))


def columns(result: AccessResult) -> dict[str, np.ndarray]:
    """Every column of a result by its place."""
    groups = {"access": result.access, "boundary": result.boundary, "exposure": result.exposure}
    groups |= {f"orbit/{orbit.name}": orbit.access for orbit in result.orbits}
    return {f"{group}/{name}": np.asarray(found[name]) for group, found in groups.items() for name in found}


def assert_same_bits(one: AccessResult, other: AccessResult) -> None:
    left, right = columns(one), columns(other)
    assert len(left) > 4
    assert left.keys() == right.keys()
    for name, column in left.items():
        assert column.dtype == right[name].dtype, name
        assert column.tobytes() == right[name].tobytes(), name


def bits(path: Path) -> dict[str, bytes]:
    """Every dataset and every root attribute of a file, and the tables beside it."""
    found: dict[str, bytes] = {}
    with h5py.File(path) as file:
        file.visititems(
            lambda n, item: found.update({n: item[...].tobytes()} if isinstance(item, h5py.Dataset) else {})
        )
        found["attributes"] = repr(sorted(file.attrs.items())).encode()
    return found | {table.name: table.read_bytes() for table in sorted(path.parent.glob("*.csv"))}
