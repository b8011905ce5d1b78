"""The trajectory file: whole or not at all, never over another, and refused when it is damaged or something else."""

from __future__ import annotations

import errno
import os
import re
import shutil
from dataclasses import replace

import h5py
import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from small_runs import SHORT, chunk, write

from fields.errors import InputError
from tracer import store
from tracer.records import GROUPS


@pytest.fixture
def made(tmp_path):
    return write(tmp_path / "out.h5")


def contents(path):
    result = store.open(path)
    columns = {f"{g}/{n}": getattr(result, g)[n] for g in GROUPS for n in getattr(result, g)}
    return columns | {"time": result.time_h, "kp": result.drivers[0].value, "names": np.array(result.population_names)}


def refusal(path):
    with pytest.raises(InputError) as caught:
        contents(path)
    assert "\n" not in str(caught.value)
    return str(caught.value)


# --- where it may stand ----------------------------------------------------------------------------------------------


def test_disk_too_small_is_said_with_both_numbers(tmp_path, monkeypatch):
    monkeypatch.setattr(shutil, "disk_usage", lambda _: shutil._ntuple_diskusage(10**6, 10**6 - 12345, 12345))
    with pytest.raises(InputError, match=r"out\.h5: the file takes [\d.]+ kB, the disk has 12\.3 kB free;"):
        store.TrajectoryWriter(tmp_path / "out.h5", SHORT, {})
    assert not list(tmp_path.iterdir())


def test_an_existing_file_is_kept_unless_told(made):
    before = made.read_bytes()
    with pytest.raises(InputError, match=r"out\.h5: exists; another name for the output, or --overwrite"):
        store.TrajectoryWriter(made, SHORT, {})
    assert made.read_bytes() == before
    write(made, replace(SHORT, title="another"), overwrite=True)
    assert store.open(made).attrs["title"] == "another"


def test_neither_run_files_nor_directories_are_replaced(tmp_path):
    (tmp_path / "run.toml").write_text("[time]\nhours = 1\n")
    with pytest.raises(InputError, match="is a run file, which no output replaces"):
        store.TrajectoryWriter(tmp_path / "run.toml", SHORT, {}, overwrite=True)
    with pytest.raises(InputError, match="exists and is not a file"):
        store.TrajectoryWriter(tmp_path, SHORT, {}, overwrite=True)


def test_missing_or_unwritable_directory(tmp_path):
    with pytest.raises(InputError, match=r"the directory .*none does not exist; an existing directory"):
        store.TrajectoryWriter(tmp_path / "none" / "out.h5", SHORT, {})
    with pytest.raises(InputError, match="/proc"), store.TrajectoryWriter("/proc/out.h5", SHORT, {}):
        pytest.fail("nothing can be made there")


def test_read_only_directory(tmp_path, monkeypatch):
    if os.geteuid() == 0:  # who may write anywhere
        monkeypatch.setattr(os, "access", lambda *_: False)
    tmp_path.chmod(0o500)
    try:
        with pytest.raises(InputError, match="is read-only; a directory that can be written"):
            store.TrajectoryWriter(tmp_path / "out.h5", SHORT, {})
    finally:
        tmp_path.chmod(0o700)


def test_two_runs_do_not_write_the_same_file(tmp_path):
    with store.TrajectoryWriter(tmp_path / "out.h5", SHORT, {}) as writer:
        for given in ({}, {"overwrite": True}, {"resume": True}):
            with pytest.raises(InputError, match=r"out\.h5: another run is writing it; wait for that run"):
                store.TrajectoryWriter(tmp_path / "out.h5", SHORT, {}, **given)
        writer.write(chunk(SHORT, 0, 9))
        writer.finish()
    assert store.open(tmp_path / "out.h5").count == 9


def test_a_leftover_of_a_killed_run_is_replaced(tmp_path):
    (tmp_path / "out.h5.part").write_bytes(b"half a file")
    write(tmp_path / "out.h5")
    assert [p.name for p in tmp_path.iterdir()] == ["out.h5"]


# --- whole or not at all ---------------------------------------------------------------------------------------------


def broken_off(path, fault, stop):
    with store.TrajectoryWriter(path, SHORT, {}) as writer:
        writer.write(chunk(SHORT, 0, stop))
        assert sorted(p.name for p in path.parent.iterdir()) == ["out.h5.part", "out.h5.part.log"]
        raise fault


@pytest.mark.parametrize("fault", [RuntimeError, OSError])
def test_a_fault_before_anything_is_whole_leaves_nothing(tmp_path, fault):
    with pytest.raises(fault):
        broken_off(tmp_path / "out.h5", fault, 4)
    assert not list(tmp_path.iterdir())


@pytest.mark.parametrize(("fault", "stop"), [(RuntimeError, 9), (KeyboardInterrupt, 4), (KeyboardInterrupt, 9)])
def test_what_was_finished_is_kept(tmp_path, fault, stop):
    with pytest.raises(fault):
        broken_off(tmp_path / "out.h5", fault, stop)
    assert sorted(p.name for p in tmp_path.iterdir()) == ["out.h5.part", "out.h5.part.log"]
    line = r"out\.h5\.part: an interrupted run has left what it finished; --resume to go on with it, or --overwrite"
    with pytest.raises(InputError, match=line):
        store.TrajectoryWriter(tmp_path / "out.h5", SHORT, {})
    write(tmp_path / "out.h5", overwrite=True)
    assert [p.name for p in tmp_path.iterdir()] == ["out.h5"]


def test_it_appears_at_the_last_step_only(tmp_path):
    with store.TrajectoryWriter(tmp_path / "out.h5", SHORT, {}) as writer:
        writer.write(chunk(SHORT, 0, 9))
        assert not (tmp_path / "out.h5").exists()
        assert writer.finish() == tmp_path / "out.h5"
        assert store.open(tmp_path / "out.h5").attrs["complete"]


@pytest.mark.parametrize("pieces", [[(0, 4)], [(0, 4), (5, 9)], [(4, 9)], [(0, 9), (3, 4)], []])
def test_particles_left_out_or_written_twice_are_noticed(tmp_path, pieces):
    def written():
        with store.TrajectoryWriter(tmp_path / "out.h5", SHORT, {}) as writer:
            for first, stop in pieces:
                writer.write(chunk(SHORT, first, stop))
            writer.finish()

    with pytest.raises(ValueError, match="written"):
        written()
    assert not (tmp_path / "out.h5").exists()


def test_wrong_shape_is_refused(tmp_path):
    part = chunk(SHORT, 0, 9)
    part.track["r_re"] = part.track["r_re"][:, :-1]
    with (
        store.TrajectoryWriter(tmp_path / "out.h5", SHORT, {}) as writer,
        pytest.raises(ValueError, match="track/r_re"),
    ):
        writer.write(part)


@pytest.mark.parametrize("links", [True, False])
def test_a_file_that_came_meanwhile_is_kept(tmp_path, monkeypatch, links):
    if not links:

        def refuse(*_):
            raise OSError(errno.EPERM, "no hard links here")

        monkeypatch.setattr(os, "link", refuse)
    with store.TrajectoryWriter(tmp_path / "out.h5", SHORT, {}) as writer:
        writer.write(chunk(SHORT, 0, 9))
        (tmp_path / "out.h5").write_text("someone else's")
        with pytest.raises(InputError, match=r"exists by now; the finished result is in .*out\.h5\.part"):
            writer.finish()
    assert (tmp_path / "out.h5").read_text() == "someone else's"
    assert store.open(tmp_path / "out.h5.part").count == 9
    write(tmp_path / "second.h5")
    assert store.open(tmp_path / "second.h5").count == 9


# --- what is not one -------------------------------------------------------------------------------------------------


def foreign(path):
    with h5py.File(path, "w") as file:
        file["x"] = 1
    return path


@pytest.mark.parametrize(
    ("content", "kind", "line"),
    [
        ('title = "x"\n', "run file", "a run file where a trajectory file belongs; trace it first"),
        ("[time\nhours = 1\n[domain]\n", "run file", "a run file where"),
        ("# only a comment\n", "other", "not a trajectory file; a file made by driftrose trace"),
        ("time,kp\n2027-03-04T00:00Z,4\n", "other", "not a trajectory file; a file"),
        ("", "other", "empty, not a trajectory file; a file"),
        (b"\x00\xff\x00", "other", "not a trajectory file; a file"),
        ("#" * (2**20 - 1) + "µ\n", "other", "not a trajectory file; a file"),
        (b"\x89HDF\r\n\x1a\n", "other", "damaged"),
    ],
)
def test_other_files_are_told_by_content(tmp_path, content, kind, line):
    path = tmp_path / "something.h5"
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    assert store.kind(path) == kind
    assert re.search(f"^driftrose: .*something.h5: {line}", refusal(path))


def test_kinds_of_hdf5(made, tmp_path):
    assert store.kind(made) == "trajectories"
    assert store.kind(foreign(tmp_path / "x.h5")) == "other"
    assert "an HDF5 file from elsewhere; a file made by driftrose trace" in refusal(tmp_path / "x.h5")


def test_missing_file_and_directory(tmp_path):
    for look in (store.kind, store.open):
        with pytest.raises(InputError, match="none: no such file"):
            look(tmp_path / "none")
        with pytest.raises(InputError, match="is a directory"):
            look(tmp_path)


def edited(path, change):
    with h5py.File(path, "r+") as file:
        change(file)
        file.attrs["attrs_sha256"] = store.digest(dict(file.attrs))
    return refusal(path)


def test_incomplete_newer_and_other_results(made):
    assert "incomplete: its run was stopped; trace the run again" in edited(
        made, lambda f: f.attrs.modify("complete", False)
    )
    newer = edited(made, lambda f: f.attrs.update({"complete": True, "format_version": 2}))
    assert "format_version = 2: unknown; a newer driftrose" in newer
    other = edited(made, lambda f: f.attrs.update({"format": "driftrose access"}))
    assert "holds driftrose access, not trajectories" in other


def test_changed_attribute_is_noticed(made):
    with h5py.File(made, "r+") as file:
        file.attrs["title"] = "Another storm"
    assert "attrs_sha256: its attributes were changed after it was made" in refusal(made)


def test_missing_and_misshapen_columns(made):
    with h5py.File(made, "r+") as file:
        file.move("end/turns", "end/twists")
    assert "/end/turns: damaged: missing; trace the run again" in refusal(made)
    with h5py.File(made, "r+") as file:
        file.move("end/twists", "end/turns")
        file.move("track/r_re", "track/old")
        file["track/r_re"] = np.zeros((9, 3))
    assert "/track/r_re: damaged: has shape (9, 3), not (9, 17)" in refusal(made)


@given(st.floats(0.0, 1.0, exclude_max=True))
@settings(deadline=None, max_examples=40, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_any_truncation_is_noticed(tmp_path, share):
    path = tmp_path / "out.h5"
    if not path.exists():
        write(path)
    cut = tmp_path / "cut.h5"
    whole = path.read_bytes()
    cut.write_bytes(whole[: int(share * len(whole))])
    assert re.search("cut.h5: (truncated|damaged|not a trajectory|empty)", refusal(cut))


def test_a_flipped_bit_in_the_numbers_names_the_dataset(made):
    with h5py.File(made) as file:
        offset = file["track/energy_keV"].id.get_chunk_info(0).byte_offset
    data = bytearray(made.read_bytes())
    data[offset + 100] ^= 4
    made.write_bytes(data)
    result = store.open(made)
    assert result.track["r_re"].shape == (9, 17)
    with pytest.raises(InputError, match=r"out\.h5: /track/energy_keV: damaged: a checksum does not fit; trace"):
        result.track["energy_keV"]


def test_a_flipped_bit_anywhere_is_refused_or_harmless(made, tmp_path):
    whole = made.read_bytes()
    reference = contents(made)
    noticed = 0
    rng = np.random.default_rng(4)
    for bit in rng.choice(8 * len(whole), 150, replace=False):
        data = bytearray(whole)
        data[bit // 8] ^= 1 << (bit % 8)
        path = tmp_path / "flipped.h5"
        path.write_bytes(data)
        try:
            found = contents(path)
        except InputError:
            noticed += 1
            continue
        for key, values in reference.items():
            np.testing.assert_array_equal(found[key], values, err_msg=f"bit {bit}, {key}")
    assert noticed > 0
