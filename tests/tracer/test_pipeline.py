"""The whole run: the same bits whatever the threads and chunks, in memory or in a file; a stop loses nothing."""

from __future__ import annotations

import os
import shutil
import stat
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import h5py
import numpy as np
import pytest
from small_runs import number, population, span
from storm_runs import storm

import tracer
from tracer import pipeline, records
from tracer.integrate import compile_kernel
from tracer.progress import Silent
from tracer.records import Result
from tracer.scenario import Output, Scenario

RUN = storm(
    population(count=40, pitch_deg=span(3.0, 90.0)),
    population("electrons", "e-", count=24, draw="random", release_h=span(0.0, 2.0)),
    hours=8.0,
)


def columns(result: Result) -> dict[str, np.ndarray]:
    """Every column by its place."""
    groups = {"particle": result.particle, "track": result.track, "end": result.end}
    return {f"{group}/{name}": np.asarray(column) for group, found in groups.items() for name, column in found.items()}


def assert_same_bits(one: Result, other: Result, only: str = "") -> None:
    left, right = ({n: c for n, c in columns(r).items() if n.startswith(only)} for r in (one, other))
    assert left
    assert left.keys() == right.keys()
    for name, column in left.items():
        assert column.dtype == right[name].dtype, name
        assert column.tobytes() == right[name].tobytes(), name


@pytest.fixture(scope="module")
def whole() -> Result:
    """The reference: in memory, one thread."""
    return tracer.trace(RUN, threads=1)


# ------------------------------------------------------------------------------------------------------ the same bits


@pytest.mark.parametrize("threads", [2, 5])
def test_threads_change_no_bit(whole: Result, threads: int) -> None:
    assert_same_bits(whole, tracer.trace(RUN, threads=threads))


@pytest.mark.parametrize("size", [1, 7, 64])
def test_chunks_change_no_bit(whole: Result, size: int, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(pipeline, "chunk_size", lambda count, threads: size)
    assert_same_bits(whole, tracer.trace(RUN, threads=2))


def test_neighbours_change_no_bit(whole: Result) -> None:
    # the particles of the first population alone: others beside them in the kernel make no difference
    kernel = compile_kernel(RUN)
    local = whole.attrs["local_tolerance_re"]
    for first, stop in ((0, 1), (13, 40), (63, 64)):
        part = pipeline.run_chunk(RUN, kernel, first, stop, local)
        for name, column in part.end.items():
            assert column.tobytes() == whole.end[name][first:stop].tobytes(), name


def test_a_file_holds_the_same_bits_as_memory(whole: Result, tmp_path: Path) -> None:
    written = tracer.trace(RUN, tmp_path / "out.h5", threads=2)
    assert_same_bits(whole, written)
    assert_same_bits(whole, tracer.open(tmp_path / "out.h5"))
    assert np.array_equal(whole.time_h, written.time_h)
    assert {name: value for name, value in written.attrs.items() if name != "attrs_sha256"} == whole.attrs


def test_two_files_of_one_run_hold_the_same_datasets(tmp_path: Path) -> None:
    for name, threads in (("a.h5", 1), ("b.h5", 2)):
        tracer.trace(RUN, tmp_path / name, threads=threads)
    found: list[dict[str, bytes]] = []
    for name in ("a.h5", "b.h5"):
        with h5py.File(tmp_path / name) as file:
            bits: dict[str, bytes] = {}
            file.visititems(
                lambda n, item, b=bits: b.update({n: item[...].tobytes()}) if isinstance(item, h5py.Dataset) else None
            )
            found.append(bits)
    assert len(found[0]) >= 25
    assert found[0] == found[1]


@pytest.mark.parametrize("every_min", [0.0, 1.7, 600.0])
def test_saving_changes_no_bit_of_the_ends(whole: Result, every_min: float) -> None:
    other = tracer.trace(replace(RUN, output=Output(every_min=every_min)), threads=1)
    assert_same_bits(whole, other, "end/")
    assert (every_min == 0.0) == (not other.track)


def test_single_tracks_change_no_bit_of_the_ends(whole: Result, tmp_path: Path) -> None:
    output = replace(RUN.output, tracks="single")
    other = tracer.trace(replace(RUN, output=output), tmp_path / "out.h5")
    assert_same_bits(whole, other, "end/")
    assert other.track["r_re"].dtype == np.float32
    np.testing.assert_allclose(other.track["r_re"], whole.track["r_re"], rtol=1e-6)


def test_in_memory_single_tracks_are_single_too(tmp_path: Path) -> None:
    run = replace(RUN, output=replace(RUN.output, tracks="single"))
    assert_same_bits(tracer.trace(run), tracer.trace(run, tmp_path / "out.h5"))


# ------------------------------------------------------------------------------------------------------- what it says


def test_result_carries_what_the_run_took(whole: Result) -> None:
    assert whole.count == RUN.count
    assert whole.population_names == ("protons", "electrons")
    assert whole.species_names == ("H+", "e-")
    assert whole.drivers == RUN.field.drivers
    assert whole.work["accepted"] > 10 * RUN.count
    assert 0 <= whole.work["rejected"] < 0.5 * whole.work["accepted"]
    assert whole.work["particles_per_s"] * whole.work["traced_s"] == pytest.approx(RUN.count)
    assert 0 < whole.work["traced_s"] < whole.work["wall_s"]


ATTRS = {
    "format", "format_version", "driftrose_version", "numba_version", "numpy_version", "scipy_version", "h5py_version",
    "cpu", "title", "run_file", "input_sha256", "start", "complete", "caution", "local_tolerance_re", "tolerance_re",
    "end_error_50_re", "end_error_99_re", "end_error_100_re", "end_error_sample",
}  # fmt: skip


def test_attributes_in_memory_and_in_a_file(whole: Result, tmp_path: Path) -> None:
    written = tracer.trace(RUN, tmp_path / "out.h5")
    assert whole.attrs.keys() >= ATTRS
    assert written.attrs.keys() >= {*ATTRS, "attrs_sha256"}
    assert whole.attrs["complete"] is True
    assert whole.attrs["start"] == "2027-03-04T00:00:00Z"
    assert whole.attrs["end_error_99_re"] <= RUN.output.tolerance_re
    assert whole.attrs["end_error_sample"] == RUN.count
    assert whole.attrs["caution"] == records.CAUTION


def test_to_xarray(whole: Result) -> None:
    data = whole.to_xarray()
    assert dict(data.sizes) == {"particle_index": RUN.count, "time": RUN.save_times_h.size}
    assert np.array_equal(data["end_r_re"], whole.end["r_re"])
    assert np.array_equal(data["r_re"], whole.track["r_re"], equal_nan=True)


def test_released_late_and_ended_early_are_nan(whole: Result) -> None:
    times, release = whole.time_h, whole.particle["release_h"]
    moving = (times >= release[:, None]) & (times <= whole.end["time_h"][:, None])
    assert 0 < np.sum(moving) < moving.size
    assert np.array_equal(np.isfinite(whole.track["energy_keV"]), moving)


class Listener(Silent):
    """Notes what it is told."""

    def __init__(self) -> None:
        self.heard: list[Any] = []

    def compiling(self, anew: bool) -> None:
        self.heard.append("compiling")

    def piloting(self) -> None:
        self.heard.append("piloting")

    def tracing(self, count: int) -> None:
        self.heard.append(("tracing", count))

    def advanced(self, count: int) -> None:
        self.heard.append(count)

    def done(self) -> None:
        self.heard.append("done")


def test_the_watcher_hears_of_every_particle() -> None:
    listener = Listener()
    tracer.trace(RUN, threads=2, watcher=listener)
    first, second, third, *counts, last = listener.heard
    assert (first, second, third, last) == ("compiling", "piloting", ("tracing", RUN.count), "done")
    assert sum(counts) == RUN.count


# ------------------------------------------------------------------------------------------------------------ outputs


def refused(run: Scenario, out: Path, **given: Any) -> str:
    with pytest.raises(tracer.InputError) as caught:
        tracer.trace(run, out, **given)
    line = str(caught.value)
    assert "\n" not in line
    assert line.startswith(f"driftrose: {out}: ")
    return line


def test_output_exists(tmp_path: Path) -> None:
    out = tmp_path / "out.h5"
    out.write_text("precious")
    line = refused(RUN, out)
    assert line == f"driftrose: {out}: exists; another name for the output, or --overwrite to replace it"
    assert out.read_text() == "precious"
    assert os.listdir(tmp_path) == ["out.h5"]


def test_overwrite_replaces_the_file_once_the_new_one_is_whole(tmp_path: Path, whole: Result) -> None:
    out = tmp_path / "out.h5"
    out.write_text("old")
    seen: list[str] = []

    class Looker(Silent):
        def advanced(self, count: int) -> None:
            seen.append(out.read_text())

    assert_same_bits(whole, tracer.trace(RUN, out, overwrite=True, watcher=Looker()))
    assert set(seen) == {"old"}
    assert os.listdir(tmp_path) == ["out.h5"]


def test_overwrite_without_a_file_writes_one(tmp_path: Path) -> None:
    assert tracer.trace(RUN, tmp_path / "out.h5", overwrite=True).count == RUN.count


def test_directory_missing(tmp_path: Path) -> None:
    line = refused(RUN, tmp_path / "no" / "out.h5")
    assert "does not exist; an existing directory" in line
    assert os.listdir(tmp_path) == []


def test_directory_read_only(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(os, "access", lambda path, mode: False)  # root may write anywhere, so chmod shows nothing
    line = refused(RUN, tmp_path / "out.h5")
    assert "is read-only; a directory that can be written" in line
    assert os.listdir(tmp_path) == []


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write anywhere")
def test_directory_that_may_not_be_written(tmp_path: Path) -> None:
    tmp_path.chmod(stat.S_IRUSR | stat.S_IXUSR)
    try:
        assert "is read-only" in refused(RUN, tmp_path / "out.h5")
    finally:
        tmp_path.chmod(stat.S_IRWXU)


def test_disk_too_small(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(shutil, "disk_usage", lambda path: SimpleNamespace(total=10**12, used=0, free=5000))
    line = refused(RUN, tmp_path / "out.h5")
    assert "the disk has 5 kB free; another disk, fewer particles, a larger every_min" in line
    assert os.listdir(tmp_path) == []


def test_an_output_that_cannot_be_written_costs_no_time(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def never(scenario: Scenario) -> Any:
        raise AssertionError("compiled before the output was looked at")

    monkeypatch.setattr(pipeline, "compile_kernel", never)
    refused(RUN, tmp_path / "no" / "out.h5")


# ------------------------------------------------------------------------------------------------------- stopped early


def stopping_at(moment: str) -> Silent:
    """A watcher at which Ctrl-C arrives."""

    class Stopper(Silent):
        pass

    def stop(self: Any, *_: int) -> None:
        raise KeyboardInterrupt

    setattr(Stopper, moment, stop)
    return Stopper()


@pytest.mark.parametrize("moment", ["compiling", "piloting", "tracing", "advanced"])
@pytest.mark.parametrize("threads", [1, 2])
def test_ctrl_c_leaves_what_can_be_resumed(tmp_path: Path, whole: Result, moment: str, threads: int) -> None:
    with pytest.raises(tracer.Stopped, match="stopped before the end; nothing was kept"):
        tracer.trace(RUN, threads=threads, watcher=stopping_at(moment))
    out = tmp_path / "out.h5"
    with pytest.raises(tracer.Stopped, match="stopped after 0 of 64 particles; the same command with --resume goes on"):
        tracer.trace(RUN, out, threads=threads, watcher=stopping_at(moment))
    assert not out.exists()
    assert_same_bits(whole, tracer.trace(RUN, out, resume=True, threads=threads))
    assert os.listdir(tmp_path) == ["out.h5"]


def test_ctrl_c_while_writing(tmp_path: Path, whole: Result, monkeypatch: pytest.MonkeyPatch) -> None:
    def stop(*_: Any) -> None:
        raise KeyboardInterrupt

    with monkeypatch.context() as patched:
        patched.setattr(pipeline.store.TrajectoryWriter, "write", stop)
        with pytest.raises(tracer.Stopped):
            tracer.trace(RUN, tmp_path / "out.h5")
    assert_same_bits(whole, tracer.trace(RUN, tmp_path / "out.h5", resume=True))


def test_ctrl_c_keeps_the_old_file(tmp_path: Path, whole: Result) -> None:
    out = tmp_path / "out.h5"
    out.write_text("old")
    with pytest.raises(tracer.Stopped):
        tracer.trace(RUN, out, overwrite=True, watcher=stopping_at("advanced"))
    assert out.read_text() == "old"
    assert_same_bits(whole, tracer.trace(RUN, out, resume=True))  # that it may be replaced was said before
    assert os.listdir(tmp_path) == ["out.h5"]


def test_a_stop_ends_the_other_threads_soon(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    many = replace(RUN, populations=(population(count=4096),), output=Output(every_min=0.0))
    monkeypatch.setattr(pipeline, "chunk_size", lambda count, threads: 2048)
    done: list[int] = []

    class Stopper(Silent):
        def advanced(self, count: int) -> None:
            done.append(count)
            raise KeyboardInterrupt

    with pytest.raises(tracer.Stopped):
        tracer.trace(many, threads=2, watcher=Stopper())
    assert sum(done) < 2048


def test_a_fault_inside_is_not_swallowed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def fail(*_: Any) -> Any:
        raise ZeroDivisionError

    monkeypatch.setattr(pipeline, "run_chunk", fail)
    with pytest.raises(ZeroDivisionError):
        tracer.trace(RUN, tmp_path / "out.h5")
    assert os.listdir(tmp_path) == []


# ---------------------------------------------------------------------------------------------------------- odd sizes


@pytest.mark.parametrize("count", [1, 2, 9])
def test_few_particles_on_many_threads(count: int, tmp_path: Path) -> None:
    run = storm(population(count=count, energy_keV=number(20.0)), hours=1.0)
    assert tracer.trace(run, tmp_path / "out.h5", threads=8).count == count


@pytest.mark.parametrize(
    ("count", "threads", "expected"), [(1, 1, 1), (1, 8, 1), (64, 2, 8), (20000, 2, 2500), (10**9, 2, pipeline.CHUNK)]
)
def test_chunk_size(count: int, threads: int, expected: int) -> None:
    assert pipeline.chunk_size(count, threads) == expected


def test_processors_are_those_this_process_may_use(monkeypatch: pytest.MonkeyPatch) -> None:
    asked: Callable[[int], set[int]] = lambda pid: {0, 3, 5}  # noqa: E731
    monkeypatch.setattr(os, "sched_getaffinity", asked, raising=False)
    assert pipeline.processors() == 3
