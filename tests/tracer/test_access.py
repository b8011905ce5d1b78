"""Access by backward tracing: against traces of the same particles, whatever the chunks, threads, stops and files."""

from __future__ import annotations

import shutil
import warnings
from collections.abc import Callable
from datetime import timedelta
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
import xarray
from access_runs import ORBITS, START, asked, assert_same_bits, bits, columns, tables
from tolerances import bound

import tracer
from tracer import access_run, store_origins
from tracer.access_records import AccessResult
from tracer.outcomes import Outcome
from tracer.records import CAUTION
from tracer.status import Cause
from tracer.stopping import Stopped

RUN = asked(*ORBITS)


@pytest.fixture(scope="module")
def whole() -> AccessResult:
    """The reference: in memory, one thread."""
    return tracer.access(RUN, threads=1)


# ------------------------------------------------------------------------------------- against traces of the same


@pytest.mark.parametrize("time", [8.0, 20.0])
def test_outcomes_are_those_of_a_backward_trace(whole: AccessResult, time: float) -> None:
    # a backward run of the same storm that starts at the time of the targets; its own kernel rules, its own pilot
    asked_for = RUN.access
    assert asked_for is not None
    reach = min(asked_for.back_hours, time)
    given = tables()
    population = {
        "draw": "grid",
        "energy_keV": asked_for.energy_keV.tolist(),
        "pitch_deg": asked_for.pitch_deg.tolist(),
        "r_re": asked_for.r_re.tolist(),
        "mlt_h": asked_for.mlt_h.tolist(),
    }
    del given["access"], given["orbit"]
    given["time"] = {"start": START + timedelta(hours=time), "hours": reach, "backward": True}
    given["population"] = [{"name": name, "species": name, **population} for name in ("H+", "e-")]
    given["output"] = {"every_min": 0}
    end = tracer.trace(tracer.build(given)).end
    shape = (2, asked_for.r_re.size, asked_for.mlt_h.size, asked_for.energy_keV.size, asked_for.pitch_deg.size)
    traced = {name: np.moveaxis(np.asarray(end[name]).reshape(shape), (3, 4), (1, 2)) for name in end}
    at = asked_for.time_h.tolist().index(time)
    found = {name: np.asarray(column)[:, at] for name, column in whole.access.items()}
    came = traced["cause"] == Cause.OUTER
    assert came.any()
    assert not came.all()
    np.testing.assert_array_equal(np.isin(found["region"], (Outcome.OPEN, Outcome.OPEN_ELSEWHERE)), came)
    drifting = Outcome.BEFORE_RECORD if time <= asked_for.back_hours else Outcome.UNDECIDED
    np.testing.assert_array_equal(found["region"] == drifting, traced["cause"] == Cause.DRIFTING)
    east_of_20 = (traced["mlt_h"] - 20.0) % 24.0 <= 5.0
    np.testing.assert_array_equal(found["region"] == Outcome.OPEN, came & east_of_20)
    assert (came & ~east_of_20).any()
    near = bound("two runs of a path")
    for name, other in (
        ("entry_time_h", traced["time_h"] + time),
        ("transit_h", -traced["time_h"]),
        ("entry_mlt_h", traced["mlt_h"]),
        ("entry_energy_keV", traced["energy_keV"]),
    ):
        np.testing.assert_allclose(found[name][came], other[came], rtol=near, atol=near, err_msg=name)
        assert np.isnan(found[name][~came]).all()


def test_a_spacecraft_sees_what_a_target_at_its_place_sees(whole: AccessResult) -> None:
    orbit = whole.orbits[0]
    seen = np.flatnonzero((orbit.access["region"] < Outcome.OUT_OF_REACH).any(axis=(0, 2, 3)))
    assert 6 < seen.size < orbit.time_h.size
    for sample in (seen[3], seen[-2]):
        place = {"r_re": float(orbit.r_re[sample]), "mlt_h": float(orbit.mlt_h[sample])}
        there = tracer.access(asked(time_h=float(orbit.time_h[sample]), **place))
        for name in ("region", "entry_time_h", "entry_energy_keV"):
            one, other = there.access[name][:, 0, :, :, 0, 0], orbit.access[name][:, sample]
            reach = orbit.access["region"][:, sample] != Outcome.OUT_OF_REACH
            np.testing.assert_allclose(one[reach], other[reach], rtol=bound("two runs of a path"))


def test_three_answers_of_an_orbit(whole: AccessResult) -> None:
    transfer, far = whole.orbits
    for orbit in (transfer, far):
        region = orbit.access["region"]
        outside = orbit.r_re > 10.0
        assert (region[:, outside] == Outcome.OUTSIDE_DOMAIN).all()
        # mirror points: sin^2 of the equatorial pitch angle is B_eq / B (Roederer 1970)
        out = (np.sin(np.radians(whole.pitch_deg))[:, None] ** 2 > 1.0 / orbit.b_ratio) & ~outside
        inside = np.broadcast_to(out.T[:, None, :], region.shape[1:])
        np.testing.assert_array_equal(region == Outcome.OUT_OF_REACH, np.broadcast_to(inside, region.shape))
    assert (far.r_re > 10.0).any()
    assert (transfer.access["region"] == Outcome.OUT_OF_REACH).any()


def test_a_target_at_the_beginning_has_no_past_and_one_at_the_boundary_just_came() -> None:
    found = tracer.access(asked(time_h=[0.0, 6.0], r_re=[5.0, 10.0], mlt_h=[0.0, 12.0], source=None)).access
    assert (found["region"][:, 0, :, :, 0] == Outcome.BEFORE_RECORD).all()
    assert (found["region"][:, :, :, :, 1, 0] == Outcome.OPEN).all()  # midnight: convection is inward
    assert (found["transit_h"][:, :, :, :, 1, 0] == 0.0).all()
    # noon: convection is outward, so they were inside before, or came in earlier
    assert not (found["transit_h"][:, :, :, :, 1, 1] == 0.0).any()


def test_what_lies_in_the_loss_cone_comes_from_the_atmosphere_when_that_stops() -> None:
    steep = {"r_re": [4.0, 7.0], "mlt_h": 0.0, "time_h": 6.0, "pitch_deg": [2.0, 40.0], "energy_keV": 30.0}
    given = tables(**steep)
    # dipole, L 4 and 7: loss cone angles of 5.4 and 2.3 degrees
    through = tracer.access(tracer.build(given)).access["region"]
    assert not (through == Outcome.ATMOSPHERE).any()
    given["losses"] = {"loss_cone": "stop"}
    stopped = tracer.access(tracer.build(given)).access["region"]
    assert (stopped[:, :, :, 0] == Outcome.ATMOSPHERE).all()
    assert (stopped[:, :, :, 1] != Outcome.ATMOSPHERE).all()


def test_access_of_a_backward_run() -> None:
    # the record then begins at -hours, and targets have negative times
    given = tables(time_h=[0.0, -12.0], back_hours=12.0)
    given["time"] = {"start": START + timedelta(hours=24), "hours": 24.0, "backward": True}
    turned = tracer.access(tracer.build(given))
    forward = tracer.access(asked(time_h=[24.0, 12.0], back_hours=12.0))
    np.testing.assert_array_equal(turned.access["region"], forward.access["region"])
    assert {Outcome.UNDECIDED, Outcome.BEFORE_RECORD} <= set(turned.access["region"].ravel())
    shifted = turned.access["entry_time_h"] + 24.0
    np.testing.assert_allclose(shifted, forward.access["entry_time_h"], rtol=bound("two runs of a path"))


# ------------------------------------------------------------------------------------------------------ the same bits


@pytest.mark.parametrize(("threads", "rows"), [(2, 4096), (3, 17), (1, 64)])
def test_threads_and_chunks_change_no_bit(
    whole: AccessResult, threads: int, rows: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(access_run, "ROWS", rows)
    assert_same_bits(whole, tracer.access(RUN, threads=threads))


def test_a_file_holds_what_memory_holds(whole: AccessResult, tmp_path: Path) -> None:
    made = tracer.access(RUN, tmp_path / "a.access.h5")
    assert_same_bits(whole, made)
    read = tracer.open(tmp_path / "a.access.h5")
    assert_same_bits(whole, read)
    assert {
        name: value for name, value in read.attrs.items() if name not in ("complete", "attrs_sha256")
    } == whole.attrs
    assert read.source == whole.source
    assert read.species_names == ("H+", "e-")
    for one, other in zip(read.orbits, whole.orbits, strict=True):
        assert (one.name, one.every_min) == (other.name, other.every_min)
        for name in ("time_h", "r_re", "mlt_h", "b_ratio"):
            np.testing.assert_array_equal(getattr(one, name), getattr(other, name))
    np.testing.assert_array_equal(read.part("region", (1, 0)), whole.access["region"][1, 0])
    assert sorted(path.name for path in tmp_path.iterdir()) == [
        "a.access.boundary.csv",
        "a.access.exposure.csv",
        "a.access.h5",
        "a.access.openings.csv",
        "a.access.windows.csv",
    ]


def test_parts_that_do_not_fit_together_change_no_bit(
    whole: AccessResult, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("tracer.access_layout.TOGETHER", 40)
    monkeypatch.setattr("tracer.access_layout.depth.__defaults__", (40,))
    monkeypatch.setattr("tracer.store_access.CHUNK", 30)
    assert_same_bits(whole, tracer.access(RUN, tmp_path / "a.access.h5"))
    assert_same_bits(whole, tracer.access(RUN))


# --------------------------------------------------------------------------------------------------------- stops


def stop_after(monkeypatch: pytest.MonkeyPatch, chunks: int, seen: Callable[[], Any] = lambda: None) -> None:
    """Ctrl-C once so many chunks are written; `seen` is called after each."""
    write, count = store_origins.OriginsFile.write, 0

    def counted(self: Any, chunk: Any) -> None:
        nonlocal count
        write(self, chunk)
        count += 1
        seen()
        if count == chunks:
            raise KeyboardInterrupt

    monkeypatch.setattr(store_origins.OriginsFile, "write", counted)


@pytest.fixture
def in_small_chunks(monkeypatch: pytest.MonkeyPatch) -> None:
    for module in (access_run, store_origins):
        monkeypatch.setattr(module, "ROWS", 64)


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory: pytest.TempPathFactory) -> dict[str, bytes]:
    path = tmp_path_factory.mktemp("whole") / "a.access.h5"
    tracer.access(RUN, path)
    return bits(path)


@pytest.mark.usefixtures("in_small_chunks")
def test_a_stopped_run_goes_on_to_the_same_bits(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, undisturbed: dict[str, bytes]
) -> None:
    path = tmp_path / "a.access.h5"
    for chunks in (1, 2):
        with monkeypatch.context() as patched:
            stop_after(patched, chunks)
            with pytest.raises(Stopped, match=r"stopped after \d+ of \d+ targets; .*part keeps them; .*--resume"):
                tracer.access(RUN, path, resume=chunks > 1)
        assert sorted(found.name for found in tmp_path.iterdir()) == ["a.access.h5.part", "a.access.h5.part.log"]
    with pytest.raises(tracer.InputError, match="an interrupted run has left what it finished; --resume"):
        tracer.access(RUN, path)
    result = tracer.access(RUN, path, resume=True)
    assert 0 < result.work["traced"] < result.part("region", ...).size
    assert bits(path) == undisturbed
    assert not list(tmp_path.glob("*.part*"))
    again = tracer.access(RUN, path, resume=True)
    assert again.work == {}


@pytest.mark.usefixtures("in_small_chunks")
def test_whatever_a_kill_leaves_goes_on_to_the_same_bits(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, undisturbed: dict[str, bytes]
) -> None:
    path, moments = tmp_path / "run" / "a.access.h5", []
    path.parent.mkdir()

    def photographed() -> None:
        moments.append(tmp_path / f"moment{len(moments)}")
        shutil.copytree(path.parent, moments[-1])

    with monkeypatch.context() as patched:
        stop_after(patched, 10**6, photographed)
        publish = access_run.publish
        patched.setattr(access_run, "publish", lambda *given: (photographed(), publish(*given), photographed()))
        tracer.access(RUN, path)
    assert len(moments) > 6
    torn = (moments[3] / "a.access.h5.part.log").read_bytes()
    lines = torn.rstrip(b"\0").splitlines(keepends=True)
    (moments[3] / "a.access.h5.part.log").write_bytes(b"".join(lines[:-1]) + lines[-1][:9])
    with (moments[2] / "a.access.h5.part").open("r+b") as part:  # what was logged did not reach the disk
        part.write(b"\x07" * 40)
    for moment in moments[-4:] + moments[1:4]:
        assert list(moment.glob("*.part.log")), moment
        tracer.access(RUN, moment / path.name, resume=True)
        assert bits(moment / path.name) == undisturbed
        assert not [left for left in moment.iterdir() if left.name.endswith((".part", ".log", ".new"))], moment


@pytest.mark.usefixtures("in_small_chunks")
def test_what_is_not_gone_on_with(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "a.access.h5"
    with pytest.raises(tracer.InputError, match="nothing to resume; the same command without --resume"):
        tracer.access(RUN, path, resume=True)
    with pytest.raises(tracer.InputError, match="out: nothing to resume in memory"):
        tracer.access(RUN, resume=True)
    with monkeypatch.context() as patched:
        stop_after(patched, 2)
        with pytest.raises(Stopped):
            tracer.access(RUN, path)
    for other in (asked(*ORBITS, back_hours=11.0), asked(ORBITS[0]), asked(*ORBITS, source=None)):
        with pytest.raises(tracer.InputError, match="was begun with another run file"):
            tracer.access(other, path, resume=True)
    with monkeypatch.context() as patched:
        patched.setattr(access_run, "program_of", lambda *_: "another")
        with pytest.raises(tracer.InputError, match="other sources of this program"):
            tracer.access(RUN, path, resume=True)
    tracer.access(RUN, path, resume=True)
    with pytest.raises(tracer.InputError, match="is complete, but of another run"):
        tracer.access(asked(*ORBITS, back_hours=11.0), path, resume=True)


def test_an_existing_file_or_table_is_not_replaced_unasked(tmp_path: Path) -> None:
    few = asked(r_re=5.0, mlt_h=0.0, energy_keV=1.0, species="H+")
    path = tmp_path / "a.access.h5"
    table = tmp_path / "a.access.windows.csv"
    table.write_text("mine", "utf-8")
    with pytest.raises(tracer.InputError, match=r"windows\.csv: exists; another name for the output, or --overwrite"):
        tracer.access(few, path)
    assert [found.name for found in tmp_path.iterdir()] == [table.name]
    tracer.access(few, path, overwrite=True)
    assert table.read_text("utf-8") != "mine"
    with pytest.raises(tracer.InputError, match=r"access\.h5: exists; another name for the output, or --overwrite"):
        tracer.access(few, path)
    tracer.access(few, path, overwrite=True)


def test_a_full_disk_stops_it(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    import resource

    run = asked(r_re={"from": 3.0, "to": 9.0, "n": 20}, mlt_h={"from": 0.0, "to": 24.0, "n": 48})
    path = tmp_path / "a.access.h5"
    before = resource.getrlimit(resource.RLIMIT_FSIZE)
    try:
        resource.setrlimit(resource.RLIMIT_FSIZE, (450_000, before[1]))  # the unfinished file fits, the result does not
        with pytest.raises(Stopped, match="is larger than a file may be"):
            tracer.access(run, path)
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, before)
    assert sorted(found.name for found in tmp_path.iterdir()) == ["a.access.h5.part", "a.access.h5.part.log"]
    tracer.access(run, path, resume=True)
    assert path.exists()


# ---------------------------------------------------------------------------------------------------------- the file


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("made") / "a.access.h5"
    tracer.access(RUN, path)
    return path


def test_xarray_reads_it_without_a_warning(made: Path, whole: AccessResult) -> None:
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        with xarray.open_datatree(made, engine="h5netcdf") as tree:
            assert set(tree.children) == {"access", "boundary", "orbit", "exposure"}
            region = tree["access/region"]
            assert region.dims == ("species", "time", "energy", "pitch", "r", "mlt")
            np.testing.assert_array_equal(region.values, whole.access["region"])
            there = region.sel(energy=30.0, pitch=45.0, r=6.0, mlt=3.0, species=1, time="2027-03-04T08:00")
            assert there == whole.access["region"][1, 0, 1, 1, 1, 1]
            assert tree["orbit/far/region"].dims == ("species", "orbit_time", "energy", "pitch")
            assert tree["exposure/share_open"].dims == ("spacecraft", "species", "energy", "pitch")
            meanings = dict(zip(region.attrs["flag_values"].tolist(), region.attrs["flag_meanings"].split()))
            assert meanings == {int(outcome): outcome.word for outcome in Outcome}
        with xarray.open_dataset(made, engine="h5netcdf", group="orbit/transfer") as orbit:
            assert orbit["orbit_time"].values[0] == np.datetime64("2027-03-04")
            assert orbit.sizes["species"] == 2


def test_every_dataset_says_what_it_is(made: Path) -> None:
    seen = []
    with h5py.File(made) as file:

        def look(name: str, item: Any) -> None:
            if isinstance(item, h5py.Dataset):
                seen.append(name)
                assert item.attrs["long_name"], name
                assert item.attrs["units"], name
                assert item.fletcher32, name

        file.visititems(look)
        assert h5py.check_enum_dtype(file["access/region"].dtype) == {o.word: int(o) for o in Outcome}
        assert file.attrs["caution"] == CAUTION
        assert file.attrs["format"] == "driftrose access"
        assert file["species"].attrs["flag_meanings"] == "H+ e-"
        assert file["spacecraft"].attrs["flag_meanings"] == "transfer far"
    assert len(seen) > 30


def test_a_damaged_file_is_refused(made: Path, tmp_path: Path) -> None:
    data = bytearray(made.read_bytes())
    at = data.find(b"Screening estimate")
    for place in (at, len(data) - 5):
        broken = bytearray(data)
        broken[place] ^= 1
        (tmp_path / "b.access.h5").write_bytes(broken)
        with pytest.raises(tracer.InputError, match="damaged"):
            tracer.open(tmp_path / "b.access.h5")
    with h5py.File(made) as file:
        found = file["access/entry_time_h"].id.get_chunk_info(0)
    data[found.byte_offset + 3] ^= 1
    (tmp_path / "b.access.h5").write_bytes(data)
    result = tracer.open(tmp_path / "b.access.h5")
    with pytest.raises(tracer.InputError, match="entry_time_h: damaged: a checksum does not fit"):
        result.access["entry_time_h"]


def test_an_access_file_is_no_trajectory_file(made: Path) -> None:
    assert tracer.store.kind(made) == "access"
    with pytest.raises(tracer.InputError, match="holds driftrose access, not trajectories"):
        tracer.store.open(made)


def test_a_map_alone_and_orbits_alone(tmp_path: Path) -> None:
    alone = asked(ORBITS[0], r_re=None, mlt_h=None, time_h=None)
    result = tracer.access(alone, tmp_path / "o.access.h5")
    assert not result.has_map
    assert dict(result.access) == {}
    assert result.exposure["passes"].shape == (1, 2, 2, 2)
    assert sorted(path.name for path in tmp_path.iterdir()) == ["o.access.exposure.csv", "o.access.h5"]
    result = tracer.access(asked(mlt_h={"from": 0.0, "to": 24.0, "n": 24}), tmp_path / "m.access.h5")
    assert result.orbits == ()
    assert not result.few_places
    assert set(result.boundary) == {"innermost_re", "next_inward_re"}
    assert sorted(path.name for path in tmp_path.glob("m.*")) == ["m.access.boundary.csv", "m.access.h5"]
    for name, column in columns(result).items():
        assert column.size, name
