"""Going on with an interrupted run: the same bits, what is refused, what a crash may have left."""

from __future__ import annotations

import json
import os
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from small_runs import SHORT, chunk, population, scenario, write

import tracer
from tracer import store, store_identity
from tracer.scenario import Origin, Output, Scenario
from tracer.store_attrs import processor, versions
from tracer.store_checksum import fletcher32
from tracer.store_layout import stripe_rows
from tracer.store_log import Log

LONG = scenario(population(count=300), population("electrons", "e-", count=77), output=Output(every_min=120.0))
ROWS = stripe_rows(LONG.count, LONG.save_times_h.size)
ATTRS = {"pilot": 0.5}


def break_off(path: Path, run: Scenario = LONG, stripes: tuple[int, ...] = (0, 1, 3), **given: Any) -> None:
    """Leave what a run that was stopped leaves, with some stripes finished."""

    def told() -> None:
        with store.TrajectoryWriter(path, run, ATTRS, **given) as writer:
            for stripe in stripes:
                writer.write(chunk(run, stripe * ROWS, min((stripe + 1) * ROWS, run.count)))
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        told()


def go_on(path: Path, run: Scenario = LONG, **given: Any) -> list[tuple[int, int]]:
    """Resume and finish; returns what was missing."""
    with store.TrajectoryWriter(path, run, resume=True, **given) as writer:
        if writer.begun is None:
            writer.begin(ATTRS)
        missing = writer.missing()
        for first, stop in missing:
            writer.write(chunk(run, first, stop))
        writer.finish()
    return missing


def bits(path: Path) -> dict[str, bytes]:
    """Every dataset and every root attribute; the hours at which HDF5 made its objects aside."""
    assert store.open(path).attrs["complete"]
    found: dict[str, bytes] = {}
    with h5py.File(path) as file:
        file.visititems(
            lambda n, item: found.update({n: item[...].tobytes()} if isinstance(item, h5py.Dataset) else {})
        )
        found["attributes"] = repr(sorted(file.attrs.items())).encode()
    return found


@pytest.fixture(scope="module")
def whole(tmp_path_factory: pytest.TempPathFactory) -> dict[str, bytes]:
    """Of a run that nothing disturbed."""
    return bits(write(tmp_path_factory.mktemp("whole") / "whole.h5", LONG))


def line(call: Callable[[], Any]) -> str:
    with pytest.raises(tracer.InputError) as caught:
        call()
    assert "\n" not in str(caught.value)
    return str(caught.value)


# ------------------------------------------------------------------------------------------------------- the same bits


def test_what_was_finished_is_not_done_again(tmp_path: Path, whole: dict[str, bytes]) -> None:
    break_off(tmp_path / "out.h5")
    assert go_on(tmp_path / "out.h5") == [(2 * ROWS, 3 * ROWS), (4 * ROWS, LONG.count)]
    assert bits(tmp_path / "out.h5") == whole
    assert sorted(os.listdir(tmp_path)) == ["out.h5"]


@settings(max_examples=10, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    pieces=st.lists(st.tuples(st.integers(0, 376), st.integers(1, 150)), max_size=8),
    cut=st.floats(0.0, 1.0),
)
def test_any_pieces_and_any_cut_of_the_log(
    tmp_path: Path, pieces: list[tuple[int, int]], cut: float, whole: dict[str, bytes]
) -> None:
    path = tmp_path / "out.h5"
    for name in os.listdir(tmp_path):
        (tmp_path / name).unlink()
    taken = np.zeros(LONG.count, bool)

    def told() -> None:
        with store.TrajectoryWriter(path, LONG, ATTRS) as writer:
            for first, size in pieces:
                stop = min(first + size, LONG.count)
                if not taken[first:stop].any():
                    taken[first:stop] = True
                    writer.write(chunk(LONG, first, stop))
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        told()
    log = Path(f"{path}.part.log")
    text = log.read_bytes().rstrip(b"\0")
    log.write_bytes(text[: int(cut * len(text))])  # as after a loss of power
    go_on(path)
    assert bits(path) == whole


def test_numbers_that_never_reached_the_disk_are_done_again(tmp_path: Path, whole: dict[str, bytes]) -> None:
    path = tmp_path / "out.h5"
    break_off(path)
    with h5py.File(f"{path}.part") as file:
        offset = file["track/r_re"].id.get_chunk_info_by_coord((ROWS, 0)).byte_offset
        size = ROWS * LONG.save_times_h.size * 8 + 4
    with Path(f"{path}.part").open("r+b") as part:
        part.seek(offset)
        part.write(bytes(size))  # zeros, whose checksum is zero too
    assert go_on(path)[0] == (ROWS, 3 * ROWS)
    assert bits(path) == whole


@pytest.mark.parametrize("step", ["amended", "linked", "replaced"])
def test_a_kill_in_the_last_steps(
    tmp_path: Path, step: str, monkeypatch: pytest.MonkeyPatch, whole: dict[str, bytes]
) -> None:
    path, part = tmp_path / "out.h5", tmp_path / "out.h5.part"
    break_off(path, stripes=tuple(range(-(-LONG.count // ROWS))))

    def die(*_: Any) -> None:
        if step == "linked":
            os.link(part, path)
        if step == "replaced":
            os.replace(part, path)
        raise KeyboardInterrupt

    with monkeypatch.context() as patched:
        patched.setattr("tracer.store_writer.publish", die)
        with pytest.raises(KeyboardInterrupt):
            go_on(path)
    found = store.finished(path, LONG)
    if step == "amended":
        assert found is None
        assert go_on(path) == []
    else:
        assert found is not None
        assert found.count == LONG.count
    assert os.listdir(tmp_path) == ["out.h5"]
    assert bits(path) == whole


def test_a_kill_halfway_through_the_last_change(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, whole: dict[str, bytes]
) -> None:
    path = tmp_path / "out.h5"
    break_off(path, stripes=tuple(range(-(-LONG.count // ROWS))))
    real = os.ftruncate

    def torn(handle: int, size: int) -> None:  # the first step after the change is logged
        real(handle, size)
        os.pwrite(handle, b"half of it", 30)
        raise KeyboardInterrupt

    with monkeypatch.context() as patched:
        patched.setattr("tracer.store_writer.os.ftruncate", torn)
        with pytest.raises(KeyboardInterrupt):
            go_on(path)
    assert go_on(path) == []
    assert bits(path) == whole


def test_overwriting_does_not_touch_a_file_under_both_names(tmp_path: Path) -> None:
    path = write(tmp_path / "out.h5", LONG)
    before = path.read_bytes()
    os.link(path, f"{path}.part")

    def told() -> None:
        with store.TrajectoryWriter(path, LONG, ATTRS, overwrite=True):
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        told()
    assert path.read_bytes() == before


def test_overwriting_is_remembered(tmp_path: Path, whole: dict[str, bytes]) -> None:
    path = tmp_path / "out.h5"
    path.write_text("old")
    break_off(path, overwrite=True)
    assert path.read_text() == "old"
    go_on(path)
    assert bits(path) == whole


def test_a_file_that_came_meanwhile_is_not_replaced(tmp_path: Path, whole: dict[str, bytes]) -> None:
    path = tmp_path / "out.h5"
    break_off(path)
    path.write_text("someone else's")
    assert "out.h5: exists; another name for the output, or --overwrite to replace it" in line(lambda: go_on(path))
    go_on(path, overwrite=True)
    assert bits(path) == whole


# ---------------------------------------------------------------------------------------------------- what is refused


def refused(path: Path, run: Scenario = LONG, **given: Any) -> str:
    before = {name: (path.parent / name).read_bytes() for name in os.listdir(path.parent)}
    said = line(lambda: go_on(path, run, **given))
    assert {name: (path.parent / name).read_bytes() for name in os.listdir(path.parent)} == before
    return said


def test_nothing_to_resume(tmp_path: Path) -> None:
    assert refused(tmp_path / "out.h5").endswith("out.h5: nothing to resume; the same command without --resume")
    assert line(lambda: tracer.trace(LONG, resume=True)) == (
        "driftrose: out: nothing to resume in memory; the name of the file"
    )


def test_another_run(tmp_path: Path) -> None:
    path = tmp_path / "out.h5"
    break_off(path)
    origin = LONG.origin
    changed = replace(LONG, origin=replace(origin, text=origin.text + "# a word\n"))
    assert (
        "out.h5.part: was begun with another run file, or that has changed; the run file as it was, or --over"
        in refused(path, changed)
    )
    changed = replace(LONG, origin=Origin(origin.file, origin.text, {"kp.csv": "cd" * 32}))
    assert "out.h5.part: kp.csv has changed since it was begun; that file as it was, or --overwrite" in refused(
        path, changed
    )
    changed = replace(LONG, populations=(replace(LONG.populations[0], seed=8), LONG.populations[1]))
    assert "out.h5.part: was begun by another run; another name for the output" in refused(path, changed)
    assert "was begun with other sources of this program" in refused(path, program="k2")


def test_other_versions_and_processors(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "out.h5"
    break_off(path)
    with monkeypatch.context() as patched:
        patched.setattr(store_identity, "versions", lambda: versions() | {"numba_version": "99.0"})
        said = refused(path)
        assert (
            f'out.h5.part: numba_version = "99.0": another version; {versions()["numba_version"]}, with which' in said
        )
    less = {"cpu_features": " ".join(word for word in processor()["cpu_features"].split() if word != "fma")}
    monkeypatch.setattr(store_identity, "processor", lambda: processor() | less)
    if "fma" in processor()["cpu_features"].split():
        assert "was begun on another kind of processor (only one has fma); a processor with" in refused(path)
    monkeypatch.setattr(store_identity, "processor", lambda: processor() | {"cpu": "another (riscv64, little-endian)"})
    assert "was begun on another kind of processor (only one has " in refused(path)


def test_the_name_of_the_processor_alone_is_no_reason(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "out.h5"
    break_off(path)
    other = "Another model " + processor()["cpu"][processor()["cpu"].rindex("(") :]
    monkeypatch.setattr(store_identity, "processor", lambda: processor() | {"cpu": other})
    go_on(path)
    assert store.open(path).count == LONG.count


def test_a_damaged_part(tmp_path: Path) -> None:
    path, part = tmp_path / "out.h5", tmp_path / "out.h5.part"
    break_off(path)
    content = part.read_bytes()
    for damaged in (content[:5000], content[:9] + b"\xff\xff" + content[11:]):
        part.write_bytes(damaged)
        assert "out.h5.part: damaged, cannot be resumed; --overwrite to start again" in refused(path)


def test_a_file_that_is_complete(tmp_path: Path) -> None:
    path = write(tmp_path / "out.h5", LONG)
    found = store.finished(path, LONG)
    assert found is not None
    assert found.count == LONG.count
    resumed = tracer.trace(LONG, path, resume=True)
    assert (resumed.count, resumed.work) == (LONG.count, {})
    said = line(lambda: store.finished(path, SHORT))
    assert "is complete, but of another run; another name for the output, or --overwrite in place of --resume" in said


# ------------------------------------------------------------------------------------------------- its small parts


def test_a_log_keeps_whole_lines_only(tmp_path: Path) -> None:
    path = tmp_path / "log"
    log = Log.create(path, {"title": "µ"}, 3)
    for record in ([0, "ab"], [1, "cd"]):
        log.append(record)
    log.close()
    text = path.read_bytes().rstrip(b"\0")
    assert json.loads(text.splitlines()[0].partition(b" ")[2]) == {"title": "µ"}
    for end in range(len(text) + 1):
        path.write_bytes(text[:end] + bytes(50))
        found = Log.read(path)
        lines = text[:end].count(b"\n")
        assert (0 if found is None else len(found.records)) == lines
        if found is not None:
            found.append("next")
            found.close()
            again = Log.read(path)
            assert again is not None
            assert again.records[lines:] == ["next"]
            again.close()


@settings(deadline=None, max_examples=60)
@given(st.integers(0, 2**32), st.integers(1, 40_000), st.sampled_from(["any", "zeros", "ones"]))
def test_fletcher32_is_that_of_hdf5(seed: int, size: int, kind: str) -> None:
    # outside reference: the HDF5 library's own filter
    made = {
        "any": np.random.default_rng(seed).integers(0, 256, size, dtype=np.uint8),
        "zeros": np.zeros(size, np.uint8),
        "ones": np.full(size, 255, np.uint8),
    }[kind]
    with h5py.File(f"memory-{seed}", "w", driver="core", backing_store=False) as file:
        dataset = file.create_dataset("x", data=made, chunks=(size,), fletcher32=True)
        _, raw = dataset.id.read_direct_chunk((0,))
    assert raw[-4:] == fletcher32(made)


@pytest.mark.parametrize("size", [2**18 - 1, 2**19, 3 * 2**19 + 4099])
def test_fletcher32_of_large_chunks(size: int) -> None:
    made = np.random.default_rng(size).integers(0, 256, size, dtype=np.uint8)
    with h5py.File(f"memory-{size}", "w", driver="core", backing_store=False) as file:
        _, raw = file.create_dataset("x", data=made, chunks=(size,), fletcher32=True).id.read_direct_chunk((0,))
    assert raw[-4:] == fletcher32(made)


@given(st.integers(1, 10**9), st.integers(0, 10**6))
def test_stripes(count: int, n_time: int) -> None:
    rows = stripe_rows(count, n_time)
    assert 1 <= rows <= min(count, store.ROWS)
    assert rows == count or rows & (rows - 1) == 0
    assert rows == 1 or rows * n_time * 32 <= 2**25
