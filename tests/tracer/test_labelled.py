"""A Result as one xarray Dataset, from memory and from a file."""

from __future__ import annotations

import builtins
import warnings
from dataclasses import replace
from datetime import datetime, timedelta, timezone

import numpy as np
import pytest
import xarray
from small_runs import chunk, population, scenario

from tracer import store
from tracer.records import END, PARTICLE, TRACK, Result, flag_word
from tracer.scenario import Output
from tracer.status import Cause

RUN = scenario(population("warm protons"), population("electrons", "e-", count=3), backward=True)


def in_memory(run=RUN):
    whole = chunk(run, 0, run.count)
    attrs = store.provenance(run)
    names = tuple(p.name for p in run.populations)
    species = tuple(s.name for s in run.species)
    return Result(run.save_times_h, whole.particle, whole.track, whole.end, attrs, names, species, run.field.drivers)


def test_names_dimensions_and_units():
    dataset = in_memory().to_xarray()
    names = {f"initial_{c.name}" for c in PARTICLE} | {f"end_{c.name}" for c in END} | {c.name for c in TRACK}
    assert set(dataset.data_vars) == names
    assert set(dataset.coords) == {"particle_index", "time", "time_h"}
    for column in TRACK:
        assert dataset[column.name].dims == ("particle_index", "time")
        assert dataset[column.name].attrs == {"units": column.unit, "long_name": column.long_name}
    assert dataset["end_r_re"].dims == dataset["initial_seed"].dims == ("particle_index",)
    assert dataset["initial_population"].attrs["flag_meanings"] == "warm_protons electrons"
    assert dataset["initial_species"].attrs["flag_meanings"] == "H+ e-"
    assert dataset["end_cause"].attrs["flag_meanings"].split() == [c.word for c in Cause]
    assert dataset["end_cause"].attrs["flag_values"].dtype == np.uint8
    assert dataset.attrs["title"] == RUN.title


def test_times_are_utc_dates_that_fall_backward():
    zone = timezone(timedelta(hours=5, minutes=30))
    run = replace(RUN, start=datetime(2027, 3, 4, 5, 30, 0, 250000, zone))
    dataset = in_memory(run).to_xarray()
    assert dataset["time"].values[0] == np.datetime64("2027-03-04T00:00:00.250")
    assert dataset["time"].values[1] == np.datetime64("2027-03-03T23:15:00.250")
    assert dataset.sel(time="2027-03-03T23:15:00.250")["time_h"] == -0.75


def test_file_and_memory_give_the_same_dataset_and_netcdf_takes_it(tmp_path):
    with store.TrajectoryWriter(tmp_path / "out.h5", RUN, {}) as writer:
        writer.write(chunk(RUN, 0, RUN.count))
        writer.finish()
    from_file = store.open(tmp_path / "out.h5").to_xarray()
    assert from_file.equals(in_memory().to_xarray())
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        from_file.to_netcdf(tmp_path / "copy.nc", engine="h5netcdf")
        with xarray.open_dataset(tmp_path / "copy.nc", engine="h5netcdf") as copy:
            assert copy.equals(from_file)
            assert copy.attrs["complete"] == 1


def test_end_states_only():
    dataset = in_memory(replace(RUN, output=Output(every_min=0.0))).to_xarray()
    assert dict(dataset.sizes) == {"particle_index": RUN.count}
    assert "r_re" not in dataset
    assert "end_r_re" in dataset


def test_without_xarray_it_says_what_to_install(monkeypatch):
    real = builtins.__import__

    def without(name, *rest):
        if name == "xarray":
            raise ModuleNotFoundError(name)
        return real(name, *rest)

    monkeypatch.setattr(builtins, "__import__", without)
    with pytest.raises(ImportError, match=r"pip install \"driftrose\[xarray\]\""):
        in_memory().to_xarray()


@pytest.mark.parametrize(("name", "word"), [("H+", "H+"), ("warm protons", "warm_protons"), ("été", "_t_"), ("", "_")])
def test_flag_words_have_the_characters_that_cf_allows(name, word):
    assert flag_word(name) == word
