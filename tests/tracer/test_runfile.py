"""What a run file says is what the scenario holds; a file and the same tables from code say the same."""

from __future__ import annotations

import hashlib
import math
import tomllib
from dataclasses import replace
from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import fields
import tracer
from fields.constants import ATOMIC_MASS_KG, EARTH_RADIUS_KM
from tracer.scenario import Quantity

KP = "time,kp\n" + "".join(f"2027-03-04T{3 * i:02d}:00:00Z,{i}\n" for i in range(8))
TEXT = """
title = "Test"
[time]
start = 2027-03-04T00:00:00Z
hours = 24
[series.kp]
file = "sub/kp.csv"
interval_h = 3
[magnetic]
model = "dipole"
b0_nT = 30000
[[electric]]
model = "volland-stern"
kp = "series:kp"
[[population]]
species = "H+"
count = 10
r_re = { from = 6, to = 7, spacing = "area" }
mlt_h = { from = 21.0, to = 3.0 }
energy_keV = { from = 1.0, to = 300.0, spacing = "log" }
pitch_deg = 90.0
"""


@pytest.fixture
def run_path(tmp_path: Path) -> Path:
    (tmp_path / "sub").mkdir()
    (tmp_path / "sub" / "kp.csv").write_text(KP)
    path = tmp_path / "run.toml"
    path.write_text(TEXT)
    return path


def tables(**changes: Any) -> dict[str, Any]:
    """A small steady run, some of its tables replaced."""
    population = {"species": "e-", "count": 5, "r_re": 6.6, "mlt_h": 0.0, "energy_keV": 10.0, "pitch_deg": 90.0}
    return {
        "time": {"start": datetime(2027, 3, 4, tzinfo=UTC), "hours": 6.0},
        "magnetic": {"model": "dipole", "b0_nT": 30000.0},
        "population": [population],
        **changes,
    }


def population(**changes: Any) -> dict[str, Any]:
    """The population of `tables`, some keys replaced."""
    found: dict[str, Any] = tables()["population"][0]
    return {**found, **changes}


def line(given: dict[str, Any], **options: Any) -> str:
    """The error line that `given` raises."""
    with pytest.raises(tracer.InputError) as caught:
        tracer.build(given, **options)
    return str(caught.value)


def test_values_and_defaults(run_path: Path) -> None:
    run = tracer.load(run_path)
    assert run.title == "Test"
    assert (run.start, run.hours, run.backward) == (datetime(2027, 3, 4, tzinfo=UTC), 24.0, False)
    assert (run.domain.outer_re, run.domain.inner_re, run.domain.foot_altitude_km) == (10.0, 1.02, 100.0)
    assert run.loss_cone == "flag"
    assert (run.output.every_min, run.output.tolerance_re, run.output.tracks) == (5.0, 1e-6, "double")
    (only,) = run.populations
    assert (only.name, only.species.name, only.count, only.draw, only.seed) == ("H+", "H+", 10, "sobol", 1)
    assert only.r_re == Quantity("range", (6.0, 7.0), "area")
    assert only.mlt_h == Quantity("range", (21.0, 3.0))
    assert only.energy_keV == Quantity("range", (1.0, 300.0), "log")
    assert only.pitch_deg == Quantity("number", (90.0,))
    assert only.release_h == Quantity("number", (0.0,))
    assert run.field.magnetic.reference_b0_nT() == 30000.0


def test_origin_holds_text_and_hash(run_path: Path) -> None:
    origin = tracer.load(run_path).origin
    assert origin.file == str(run_path)
    assert origin.text == TEXT
    assert origin.input_sha256 == {"sub/kp.csv": hashlib.sha256(KP.encode()).hexdigest()}
    assert origin.remarks == ()


def test_paths_are_relative_to_the_run_file(run_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir("/")
    (driver,) = tracer.load(run_path).field.drivers
    assert driver.at(10.5) == 3.0
    assert driver.hold == "step"


def test_file_and_code_give_the_same(run_path: Path) -> None:
    loaded = tracer.load(run_path)
    built = tracer.build(tomllib.loads(TEXT), base=run_path.parent)
    again = tracer.build(tomllib.loads(built.origin.text), base=run_path.parent)
    for other in (built, again):
        assert other.populations == loaded.populations
        assert (other.start, other.hours, other.domain, other.output) == (
            loaded.start,
            loaded.hours,
            loaded.domain,
            loaded.output,
        )
        assert other.field.described() == loaded.field.described()
        assert other.origin.input_sha256 == loaded.origin.input_sha256


def test_file_and_code_give_the_same_fault(run_path: Path) -> None:
    text = TEXT.replace("pitch_deg = 90.0", "pitch_deg = 91.0")
    run_path.write_text(text)
    with pytest.raises(tracer.InputError) as caught:
        tracer.load(run_path)
    assert line(tomllib.loads(text), base=run_path.parent) == str(caught.value).replace(f"{run_path}: ", "")


def test_byte_order_mark_and_windows_line_ends(run_path: Path) -> None:
    run_path.write_bytes(b"\xef\xbb\xbf" + TEXT.replace("\n", "\r\n").encode())
    assert tracer.load(run_path).count == 10


def test_start_without_offset_is_utc_and_another_is_turned() -> None:
    naive = tracer.build(tables(time={"start": datetime(2027, 3, 4, 1), "hours": 1.0}))
    ahead = datetime(2027, 3, 4, 3, tzinfo=timezone(timedelta(hours=2)))
    turned = tracer.build(tables(time={"start": ahead, "hours": 1.0}))
    assert naive.start == turned.start == datetime(2027, 3, 4, 1, tzinfo=UTC)
    assert naive.start.utcoffset() == turned.start.utcoffset() == timedelta(0)


def test_numpy_values_and_none_are_taken() -> None:
    given = population(draw="grid", count=None, energy_keV=np.array([1.0, 2.0]), r_re=np.float64(5.0), seed=np.int64(3))
    (found,) = tracer.build(tables(population=[given])).populations
    assert (found.energy_keV.values, found.r_re.values, found.seed, found.count) == ((1.0, 2.0), (5.0,), 3, 2)


def test_grid_counts_its_product() -> None:
    given = population(
        draw="grid",
        r_re={"from": 4.0, "to": 7.0, "n": 7},
        mlt_h=[0.0, 6.0, 12.0],
        pitch_deg=[30.0, 90.0],
        release_h={"from": 0.0, "to": 6.0, "n": 4},
    )
    del given["count"]
    (found,) = tracer.build(tables(population=[given])).populations
    assert found.count == 7 * 3 * 1 * 2 * 4
    assert [q.size for q in found.quantities()] == [7, 3, 1, 2, 4]


def test_names_and_seeds_by_default() -> None:
    given = [population(), population(), population(name="e- 3"), population(), population(species="O+")]
    found = tracer.build(tables(population=given)).populations
    assert [p.name for p in found] == ["e-", "e- 2", "e- 3", "e- 4", "O+"]
    assert [p.seed for p in found] == [1, 2, 3, 4, 5]


def test_species_by_mass_and_charge() -> None:
    run = tracer.build(tables(population=[population(species={"mass_u": 16.0, "charge": 2})]))
    (species,) = run.species
    assert (species.name, species.mass_kg, species.charge_e) == ("16u2+", 16.0 * ATOMIC_MASS_KG, 2)


def test_cold_plasma_at_90_degrees_only() -> None:
    given = population(draw="grid", energy_keV=[0.0, 1.0], pitch_deg=[90.0])
    del given["count"]
    assert tracer.build(tables(population=[given])).populations[0].energy_keV.values == (0.0, 1.0)
    given["pitch_deg"] = [89.0, 90.0]
    assert line(tables(population=[given])).startswith(
        "driftrose: population[1].energy_keV[1] = 0.0: zero energy has no pitch angle; "
    )


def test_full_circle_and_whole_backward_release() -> None:
    given = population(mlt_h={"from": 0.0, "to": 24.0}, release_h={"from": -6.0, "to": 0.0})
    run = tracer.build(tables(population=[given], time={**tables()["time"], "backward": True}))
    assert run.end_h == -6.0
    assert run.populations[0].mlt_h.values == (0.0, 24.0)
    assert run.populations[0].release_h.values == (-6.0, 0.0)


def test_backward_run_takes_the_history_before_its_start() -> None:
    times = [datetime(2027, 3, 3, 18, tzinfo=UTC), datetime(2027, 3, 4, tzinfo=UTC)]
    electric = [{"model": "uniform", "e0_mV_per_m": "series:e"}]
    given = tables(electric=electric, series={"e": {"time": times, "value": [0.1, 0.2], "hold": "linear"}})
    assert "no value from 2027-03-04T00:00:00Z to 2027-03-04T06:00:00Z" in line(given)
    given["time"]["backward"] = True
    (driver,) = tracer.build(given).field.drivers
    assert driver.at(-3.0) == pytest.approx(0.15, rel=1e-12)


def test_series_object_is_written_out_and_read_back() -> None:
    times = [datetime(2027, 3, 4, 3 * i, tzinfo=UTC) for i in range(3)]
    series = fields.Series("any", "kp", times, [1.0, 2.0, 3.0], interval_h=3.0, hold="linear")
    electric = [{"model": "volland-stern", "kp": "series:storm"}]
    run = tracer.build(tables(electric=electric, series={"storm": series}))
    again = tracer.build(tomllib.loads(run.origin.text))
    for found in (run, again):
        (driver,) = found.field.drivers
        assert driver.name == "series:storm"
        assert driver.at(3.0) == pytest.approx(1.5, rel=1e-12)


def test_unused_series_is_read_and_remarked(run_path: Path) -> None:
    run_path.write_text(TEXT.replace('kp = "series:kp"', "kp = 4"))
    run = tracer.load(run_path)
    assert run.origin.remarks == ("series.kp is used by no model",)
    (run_path.parent / "sub" / "kp.csv").write_bytes(b"\0")
    with pytest.raises(tracer.InputError, match=r"sub/kp\.csv: binary, not text"):
        tracer.load(run_path)


def test_first_fault_in_the_order_of_the_file(run_path: Path) -> None:
    faults = [("hours = 24", "hours = true"), ("b0_nT = 30000", "b0_nt = 1"), ("count = 10", "count = 0")]
    for i in range(len(faults)):
        text = TEXT
        for old, new in faults[i:]:
            text = text.replace(old, new)
        key = ("time.hours", "magnetic.b0_nt", "population[1].count")[i]
        run_path.write_text(text)
        with pytest.raises(tracer.InputError) as caught:
            tracer.load(run_path)
        assert caught.value.key == key


def test_objects_that_no_run_file_holds() -> None:
    assert line(tables(title=object())) == (
        'driftrose: title = "object": wrong type; a number, text, a date and time, a list or a table'
    )
    assert "has a key that is not text" in line(tables(domain={3: 4}))
    assert "holds the character U+DC80" in line(tables(title="\udc80"))
    endless: list[Any] = []
    endless.append(endless)
    assert "nested too deep" in line(tables(title=endless))


@pytest.mark.parametrize("r_re", [2.0, 4.0, 6.6])
def test_edge_of_the_loss_cone(r_re: float) -> None:
    """sin^2 = (4 L^6 - 3 L^5)^(-1/2): Roederer (1970), Dynamics of Geomagnetically Trapped Radiation (from memory)."""
    altitude = 500.0
    shell = r_re / (1.0 + altitude / EARTH_RADIUS_KM)
    edge = math.degrees(math.asin((4.0 * shell**6 - 3.0 * shell**5) ** -0.25))
    domain = {"foot_altitude_km": altitude, "inner_re": 1.1}

    def run(pitch: float, loss_cone: str) -> dict[str, Any]:
        given = population(r_re=r_re, pitch_deg=pitch)
        return tables(population=[given], domain=domain, losses={"loss_cone": loss_cone})

    assert tracer.build(run(edge * (1 + 1e-9), "stop")).count == 5
    assert tracer.build(run(edge * (1 - 1e-9), "flag")).count == 5
    assert "inside the loss cone" in line(run(edge * (1 - 1e-9), "stop"))


def test_range_that_leaves_the_loss_cone_somewhere_is_allowed() -> None:
    losses = {"loss_cone": "stop"}
    given = population(r_re={"from": 2.0, "to": 8.0}, pitch_deg=5.0)  # inside at 2, outside at 8
    assert tracer.build(tables(population=[given], losses=losses)).count == 5
    given = population(r_re=4.0, pitch_deg={"from": 1.0, "to": 20.0})
    assert tracer.build(tables(population=[given], losses=losses)).count == 5


def test_scenario_is_frozen(run_path: Path) -> None:
    run = tracer.load(run_path)
    with pytest.raises(AttributeError):
        run.hours = 3.0  # type: ignore[misc]
    assert replace(run, hours=3.0).hours == 3.0
