"""Every kind of bad run file gives exactly the line that stands beside it in tests/data/bad."""

from __future__ import annotations

import os
from pathlib import Path

import h5py
import pytest

import tracer

BAD = Path(__file__).parents[1] / "data" / "bad"
CASES = sorted(path.stem for path in BAD.glob("*.toml"))


def test_each_case_has_its_line() -> None:
    assert len(CASES) > 100
    assert sorted(path.stem for path in BAD.glob("*.txt")) == CASES


@pytest.mark.parametrize("name", CASES)
def test_line(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(BAD)
    with pytest.raises(tracer.InputError) as caught:
        tracer.load(f"{name}.toml")
    assert str(caught.value) + "\n" == (BAD / f"{name}.txt").read_text("utf-8")


@pytest.mark.parametrize("name", CASES)
def test_line_has_its_parts(name: str) -> None:
    line = (BAD / f"{name}.txt").read_text("utf-8")
    assert line.count("\n") == 1
    prefix, file, *rest = line.rstrip("\n").split(": ")
    assert prefix == "driftrose"
    assert (BAD / file).is_file()
    problem, _, remedy = ": ".join(rest).partition("; ")
    assert problem
    assert remedy


def test_missing_file(tmp_path: Path) -> None:
    path = tmp_path / "none.toml"
    with pytest.raises(tracer.InputError) as caught:
        tracer.load(path)
    assert str(caught.value) == f"driftrose: {path}: no such file; a run file, as driftrose new FILE writes one"


def test_folder(tmp_path: Path) -> None:
    with pytest.raises(tracer.InputError, match=r"is a folder; the name of a run file$"):
        tracer.load(tmp_path)


def test_name_with_nul() -> None:
    with pytest.raises(tracer.InputError, match="cannot be read: embedded null byte"):
        tracer.load("run\0.toml")


@pytest.mark.skipif(os.geteuid() == 0, reason="root may read anything")
def test_unreadable_file(tmp_path: Path) -> None:
    path = tmp_path / "run.toml"
    path.write_text('title = ""')
    path.chmod(0)
    with pytest.raises(tracer.InputError, match="cannot be read: Permission denied"):
        tracer.load(path)


def test_hdf5_file_where_a_run_file_belongs(tmp_path: Path) -> None:
    path = tmp_path / "storm.h5"
    with h5py.File(path, "w") as file:
        file.attrs["format"] = "driftrose trajectories"
    with pytest.raises(tracer.InputError) as caught:
        tracer.load(path)
    assert str(caught.value) == (f"driftrose: {path}: is an HDF5 file, a result and not a run file; a run file in TOML")


def test_oversized_file(tmp_path: Path) -> None:
    path = tmp_path / "run.toml"
    with path.open("wb") as stream:
        stream.truncate(64 * 2**20 + 1)
    with pytest.raises(tracer.InputError, match="is larger than 64 MiB"):
        tracer.load(path)


@pytest.mark.parametrize("text", ["a = " + "[" * 5000, "a = " + "9" * 5000, "a = 0x" + "f" * 5000])
def test_numbers_and_nesting_beyond_all_use(text: str, tmp_path: Path) -> None:
    path = tmp_path / "run.toml"
    path.write_text(text)
    with pytest.raises(tracer.InputError) as caught:
        tracer.load(path)
    assert len(str(caught.value).splitlines()) == 1
    assert len(str(caught.value)) < 300 + len(str(path))
