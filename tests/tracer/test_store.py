"""The trajectory file: what is written is read, by h5py, by xarray and by driftrose itself."""

from __future__ import annotations

import hashlib
import json
import warnings
from dataclasses import replace

import h5py
import numpy as np
import pytest
import xarray
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from small_runs import KP, SHORT, chunk, population, scenario, write

from tracer import store
from tracer.records import CAUTION, GROUPS
from tracer.scenario import Origin, Output
from tracer.status import Cause
from tracer.store_layout import TRACK_CHUNK_BYTES

ROOT_ATTRS = [
    "format",
    "format_version",
    "driftrose_version",
    "numba_version",
    "numpy_version",
    "scipy_version",
    "h5py_version",
    "cpu",
    "title",
    "run_file",
    "input_sha256",
    "start",
    "complete",
    "caution",
    "attrs_sha256",
]
PARTICLE = [
    "population",
    "species",
    "charge_e",
    "mass_kg",
    "mu_MeV_per_G",
    "K_re_sqrtG",
    "weight",
    "seed",
    "release_h",
    "r_re",
    "mlt_h",
    "energy_keV",
    "pitch_deg",
]
STATE = ["r_re", "mlt_h", "energy_keV", "pitch_deg"]
END = [*STATE, "time_h", "cause", "turns", "loss_cone_h"]


@pytest.fixture
def made(tmp_path):
    return write(tmp_path / "out.h5")


def datasets(path):
    found = {}
    with h5py.File(path) as file:
        file.visititems(lambda name, item: found.update({name: item.shape}) if isinstance(item, h5py.Dataset) else None)
    return found


# --- what the file holds ---------------------------------------------------------------------------------------------


def test_groups_and_datasets_are_those_of_the_design(made):
    found = datasets(made)
    wanted = {f"particle/{n}": (9,) for n in PARTICLE} | {f"end/{n}": (9,) for n in END}
    wanted |= {f"track/{n}": (9, 17) for n in STATE}
    assert wanted.items() <= found.items()
    assert found["particle_index"] == (9,)
    assert found["time"] == (17,)
    assert {f"driver/0/{n}" for n in ("start_h", "value", "slope")} == {n for n in found if n.startswith("driver")}
    assert len(found) == len(wanted) + 5
    with h5py.File(made) as file:
        assert file["track/time"] == file["time"]  # one object under two names
        assert file["track/time"].id == file["time"].id
        assert set(ROOT_ATTRS) <= set(file.attrs)


def test_types_labels_and_storage(made):
    with h5py.File(made) as file:
        for name in datasets(made):
            dataset = file[name]
            assert dataset.attrs["units"], name
            assert dataset.attrs["long_name"], name
            assert dataset.fletcher32, name
            assert dataset.chunks, name
            assert dataset.compression is None, name
            assert h5py.check_string_dtype(dataset.dtype) is None, name
            assert np.isnan(dataset.fillvalue) or dataset.dtype.kind != "f", name
        types = {n: file[n].dtype for n in ("particle_index", "particle/seed", "particle/population", "track/r_re")}
        assert [str(t) for t in types.values()] == ["int64", "int64", "int32", "float64"]
        cause = file["end/cause"]
        assert h5py.check_enum_dtype(cause.dtype) == {c.word: c.value for c in Cause}
        assert cause.dtype.itemsize == 1
        assert cause.attrs["flag_values"].tolist() == list(range(8))
        assert cause.attrs["flag_meanings"].split() == [c.word for c in Cause]
        assert file["particle/species"].attrs["flag_meanings"].split() == ["H+", "e-"]
        assert file["particle/population"].attrs["flag_values"].dtype == np.int32
        assert file["time"].attrs["units"] == "hours since 2027-03-04T00:00:00Z"
        assert [d.label or d[0].name for d in file["track/r_re"].dims] == ["/particle_index", "/time"]
        assert file["driver/0"].attrs["hold"] == "step"


def test_provenance(made):
    attrs = store.open(made).attrs
    assert attrs["format"] == "driftrose trajectories"
    assert attrs["format_version"] == 1
    assert attrs["run_file"] == SHORT.origin.text
    assert json.loads(attrs["input_sha256"]) == {"kp.csv": "ab" * 32}
    assert attrs["start"] == "2027-03-04T00:00:00Z"
    assert attrs["complete"] is True
    assert attrs["backward"] is False
    assert attrs["caution"] == CAUTION
    assert attrs["h5py_version"] == h5py.__version__
    assert attrs["numpy_version"] == np.__version__
    assert attrs["pilot"] == 0.5
    assert json.loads(attrs["seeds"]) == {"protons": 7, "electrons": 7}


def test_attrs_hash_follows_its_description(made):
    with h5py.File(made) as file:
        plain = {name: getattr(value, "item", lambda v=value: v)() for name, value in file.attrs.items()}
    claimed = plain.pop("attrs_sha256")
    text = json.dumps(plain, sort_keys=True, separators=(",", ":"), ensure_ascii=False)
    assert claimed == hashlib.sha256(text.encode()).hexdigest()


def test_end_states_only(tmp_path):
    run = replace(SHORT, output=Output(every_min=0.0))
    path = write(tmp_path / "ends.h5", run)
    assert not {n for n in datasets(path) if n.startswith(("time", "track"))}
    result = store.open(path)
    assert result.time_h.size == 0
    assert dict(result.track) == {}
    assert result.end["cause"].size == 9


# --- round trip ------------------------------------------------------------------------------------------------------


@settings(max_examples=15, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    counts=st.lists(st.integers(1, 12), min_size=1, max_size=3),
    every_min=st.sampled_from([0.0, 7.0, 45.0, 720.0]),
    backward=st.booleans(),
    step=st.integers(1, 20),
    text=st.text(st.characters(exclude_categories=["Cs"], exclude_characters="\0"), max_size=50),
)
def test_what_is_written_is_read(tmp_path, counts, every_min, backward, step, text):
    populations = [population(f"no {i} é", count=n, seed=i) for i, n in enumerate(counts)]
    run = scenario(*populations, backward=backward, output=Output(every_min), origin=Origin("a.toml", text, {text: ""}))
    path = write(tmp_path / "out.h5", run, step, overwrite=True)
    result, whole = store.open(path), chunk(run, 0, run.count)
    np.testing.assert_array_equal(result.time_h, run.save_times_h)
    for group, columns in GROUPS.items():
        expected, found = getattr(whole, group), getattr(result, group)
        assert set(found) == set(expected)
        for column in columns:
            if column.name in expected:
                assert found[column.name].dtype == column.dtype
                np.testing.assert_array_equal(found[column.name], expected[column.name])
    assert result.population_names == tuple(p.name for p in populations)
    assert result.species_names == ("H+",)
    assert result.attrs["run_file"] == text
    assert json.loads(result.attrs["input_sha256"]) == {text: ""}
    assert sorted(tmp_path.iterdir()) == [path]


def test_drivers_come_back(made):
    (driver,) = store.open(made).drivers
    assert (driver.name, driver.hold, driver.end_h) == (KP.name, KP.hold, KP.end_h)
    for name in ("start_h", "value", "slope"):
        np.testing.assert_array_equal(getattr(driver, name), getattr(KP, name))
    with h5py.File(made) as file:
        assert file["driver/0"].attrs["use"] == "volland-stern kp"


def test_rows_of_tracks_alone(tmp_path):
    run = scenario(population(count=3000), output=Output(every_min=0.5))  # 24 chunks of 1441 times
    result = store.open(write(tmp_path / "out.h5", run, 512))
    whole = result.track["r_re"]
    for rows in (np.array([2999, 0, 0, 1500]), np.array([-1]), slice(5, 700, 7), np.arange(3000) % 700 == 3):
        np.testing.assert_array_equal(result.track_rows("r_re", rows), whole[rows])


def test_single_precision_tracks(tmp_path):
    run = scenario(population(count=2), output=Output(45.0, tracks="single"))
    part = chunk(run, 0, 2)
    part.track["mlt_h"][0, 3] = np.nextafter(24.0, 0.0)  # rounds up to 24 in single precision
    with store.TrajectoryWriter(tmp_path / "out.h5", run, {}) as writer:
        writer.write(part)
        writer.finish()
    result = store.open(tmp_path / "out.h5")
    assert result.track["mlt_h"][0, 3] == 0.0
    assert result.end["r_re"].dtype == np.float64
    for name, stored in result.track.items():
        assert stored.dtype == np.float32
        with h5py.File(tmp_path / "out.h5") as file:
            quantum = file[f"track/{name}"].attrs["relative_quantum"]
        part.track["mlt_h"][0, 3] = 0.0
        np.testing.assert_allclose(stored, part.track[name], rtol=quantum / 2)


@pytest.mark.parametrize("backward", [False, True])
def test_xarray_reads_it_without_a_warning(tmp_path, backward):
    path = write(tmp_path / "out.h5", replace(SHORT, backward=backward))
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        with xarray.open_dataset(path, engine="h5netcdf", group="track") as track:
            assert dict(track.sizes) == {"particle_index": 9, "time": 17}
            assert track["time"].values[0] == np.datetime64("2027-03-04")
            last = np.datetime64("2027-03-03T12:00" if backward else "2027-03-04T12:00")
            assert track["time"].values[-1] == last
            np.testing.assert_array_equal(track["r_re"].values, chunk(SHORT, 0, 9).track["r_re"])
        with xarray.open_datatree(path, engine="h5netcdf") as tree:
            assert set(tree.children) == {"particle", "track", "end", "driver"}
            assert tree["end/cause"].values.tolist() == chunk(SHORT, 0, 9).end["cause"].tolist()
            assert tree["track/r_re"].attrs["units"] == "R_E"
            assert tree["particle"]["particle_index"].values.tolist() == list(range(9))
            assert tree["driver/0/value"].sel(start_h=3.0) == 6.0


def test_a_run_file_of_any_length_and_many_populations(tmp_path):
    populations = [population(f"p{i}", count=1) for i in range(3000)]
    run = scenario(*populations, origin=Origin("long.toml", "# µ\n" * 10**5, {}))
    result = store.open(write(tmp_path / "out.h5", run, 3000))
    assert result.attrs["run_file"] == run.origin.text
    assert result.population_names[-1] == "p2999"


# --- size and room ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("count", "every_min", "tracks"),
    [(1, 0.0, "double"), (9, 45.0, "double"), (4097, 60.0, "single"), (700, 0.5, "double")],
)
def test_expected_size(tmp_path, count, every_min, tracks):
    run = scenario(population(count=count), output=Output(every_min, tracks=tracks))
    path = write(tmp_path / "out.h5", run, 4096)
    assert store.expected_bytes(run) == pytest.approx(path.stat().st_size, rel=0.02)


@given(st.integers(1, 10**9), st.integers(1, 10**8), st.sampled_from([4, 8]))
def test_track_chunks_divide_a_batch(count, n_time, itemsize):
    rows, columns = store.track_chunk(count, n_time, itemsize)
    assert 1 <= columns <= n_time
    assert rows * columns * itemsize <= TRACK_CHUNK_BYTES
    assert store.ROWS % rows == 0 or rows == count


@pytest.mark.parametrize(
    ("size", "text"),
    [(0, "0 bytes"), (999, "999 bytes"), (1000, "1 kB"), (999_600, "1 MB"), (12.34e9, "12.3 GB"), (4.8e18, "4.8 EB")],
)
def test_size_in_words(size, text):
    assert store.size_text(size) == text
