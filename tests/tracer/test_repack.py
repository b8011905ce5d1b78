"""A finished file once more, compressed: the same numbers and labels, checked as the first."""

from __future__ import annotations

import errno
import os
import warnings
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
import xarray
from small_runs import SHORT, population, scenario, write

import tracer
from tracer import store
from tracer.scenario import Output

SCALES = ("DIMENSION_LIST", "REFERENCE_LIST")


def described(path: Path) -> dict[str, Any]:
    """Every dataset and attribute, scales by their names."""
    found: dict[str, Any] = {}

    def add(name: str, item: h5py.Group | h5py.Dataset) -> None:
        found[name] = {key: repr(value) for key, value in item.attrs.items() if key not in SCALES}
        if isinstance(item, h5py.Dataset):
            scales = [[scale.name for scale in axis.values()] for axis in item.dims]
            found[name] |= {"": (item.dtype, item.shape, item.chunks, item[...].tobytes(), scales, item.is_scale)}

    with h5py.File(path) as file:
        file.visititems(add)
        found["/"] = {key: repr(value) for key, value in file.attrs.items()}
        found["same time"] = "time" in file and file["track/time"] == file["time"]
    return found


@pytest.mark.parametrize(
    "run",
    [SHORT, scenario(population(count=700), output=Output(5.0, tracks="single")), scenario(output=Output(0.0))],
    ids=["tracks", "single", "ends"],
)
def test_nothing_but_the_size_changes(tmp_path: Path, run: tracer.Scenario) -> None:
    made, packed = write(tmp_path / "out.h5", run, 4096), tmp_path / "packed.h5"
    before, after = tracer.repack(made, packed, level=9)
    assert (before, after) == (made.stat().st_size, packed.stat().st_size)
    assert described(made) == described(packed)
    one, other = store.open(made), store.open(packed)
    assert one.attrs == other.attrs
    for name in one.end:
        assert one.end[name].tobytes() == other.end[name].tobytes()
    with h5py.File(packed) as file:
        for name in ("particle/r_re", "end/cause", "particle_index"):
            assert (file[name].compression, file[name].shuffle, file[name].fletcher32) == ("gzip", True, True)
    assert sorted(os.listdir(tmp_path)) == ["out.h5", "packed.h5"]


def test_smooth_numbers_take_less_room(tmp_path: Path) -> None:
    run = scenario(population(count=5000), output=Output(0.0))
    before, after = tracer.repack(write(tmp_path / "out.h5", run, 5000), tmp_path / "packed.h5")
    assert after < 0.8 * before


def test_xarray_reads_it_without_a_warning(tmp_path: Path) -> None:
    tracer.repack(write(tmp_path / "out.h5"), tmp_path / "packed.h5")
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        with xarray.open_datatree(tmp_path / "packed.h5", engine="h5netcdf") as tree:
            assert dict(tree["track"].sizes) == {"particle_index": 9, "time": 17}


def test_flipped_bits_are_found(tmp_path: Path) -> None:
    packed = tmp_path / "packed.h5"
    tracer.repack(write(tmp_path / "out.h5"), packed)
    whole = packed.read_bytes()
    for bit in np.random.default_rng(5).choice(8 * len(whole), 100, replace=False):
        data = bytearray(whole)
        data[bit // 8] ^= 1 << (bit % 8)
        packed.write_bytes(data)
        with pytest.raises((tracer.InputError, OSError)):
            described(packed) if store.open(packed) else None


def test_what_is_refused(tmp_path: Path) -> None:
    made = write(tmp_path / "out.h5")
    (tmp_path / "run.toml").write_text("[time]\nhours = 1\n")
    (tmp_path / "there.h5").write_text("precious")
    for path, out, given, line in (
        (tmp_path / "none.h5", tmp_path / "x.h5", {}, "none.h5: no such file"),
        (tmp_path / "run.toml", tmp_path / "x.h5", {}, "run.toml: a run file where a trajectory file belongs"),
        (made, tmp_path / "there.h5", {}, "there.h5: exists; another name for the output, or --overwrite"),
        (made, made, {"overwrite": True}, "out.h5: is the file to repack; another name"),
        (made, tmp_path / "no" / "x.h5", {}, "the directory .*no does not exist"),
        (made, tmp_path / "x.h5", {"level": 10}, "level = 10: not a level; a whole number from 1 to 9"),
    ):
        with pytest.raises(tracer.InputError, match=line):
            tracer.repack(path, out, **given)
    assert sorted(os.listdir(tmp_path)) == ["out.h5", "run.toml", "there.h5"]
    tracer.repack(made, tmp_path / "there.h5", overwrite=True)
    assert store.open(tmp_path / "there.h5").count == 9


def test_a_full_disk(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    made = write(tmp_path / "out.h5")

    def full(*_: Any) -> None:
        raise OSError(errno.ENOSPC, "No space left on device")

    monkeypatch.setattr("tracer.store_repack.write_at", full)
    with pytest.raises(tracer.Stopped, match=r"packed\.h5: the disk is full: \d+ bytes are missing"):
        tracer.repack(made, tmp_path / "packed.h5")
    assert os.listdir(tmp_path) == ["out.h5"]
