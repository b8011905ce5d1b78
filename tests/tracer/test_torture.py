"""Processes killed while they trace, full disks, flipped bits: nothing is lost and nothing passes unnoticed."""

from __future__ import annotations

import os
import re
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import h5py
import numpy as np
import pytest
from small_runs import write

import tracer
import tracer.progress
from tracer import store
from tracer.records import GROUPS
from tracer.templates import new_runfile

ROOT = Path(tracer.__file__).parents[1]
STOPPED = 3


def command(*arguments: object) -> list[str]:
    return [sys.executable, "-m", "tracer", "trace", *map(str, arguments)]


@pytest.fixture
def run_file(tmp_path: Path) -> Path:
    """A storm that takes a second or so on one thread, 2 MB of file."""
    path = tmp_path / "storm.toml"
    new_runfile(str(path))
    text = path.read_text("utf-8").replace("count = 20000", "count = 6000").replace("hours = 24.0", "hours = 9.0")
    path.write_text(text.replace("every_min = 5.0", "every_min = 60.0"), "utf-8")
    return path


def assert_same_datasets(one: Path, other: Path) -> None:
    with h5py.File(one) as left, h5py.File(other) as right:
        names: list[str] = []
        left.visit(names.append)
        datasets = [name for name in names if isinstance(left[name], h5py.Dataset)]
        assert len(datasets) >= 25
        for name in datasets:
            assert left[name][...].tobytes() == right[name][...].tobytes(), name
        assert dict(left.attrs) == dict(right.attrs)


# --------------------------------------------------------------------------------------------------------------- kills


@pytest.mark.slow
def test_killed_runs_resume_to_the_same_bits() -> None:
    script = ROOT / "scripts" / "torture.py"
    done = subprocess.run(
        [sys.executable, script, "--kills", "5", "--seed", "11"], cwd=ROOT, capture_output=True, text=True, check=False
    )
    assert done.stdout.splitlines()[-1] == "5 passed, 0 failed", done.stdout + done.stderr
    assert done.returncode == 0


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_signals_stop_soon_and_lose_nothing(tmp_path: Path, run_file: Path, number: int) -> None:
    out = tmp_path / "out.h5"
    text = run_file.read_text("utf-8").replace("count = 6000", "count = 60000")
    run_file.write_text(text, "utf-8")
    process = subprocess.Popen(command(run_file, "-o", out, "--quiet"), cwd=ROOT, stderr=subprocess.PIPE, text=True)
    log = Path(f"{out}.part.log")
    while process.poll() is None and not (log.exists() and log.read_bytes().count(b"\n") > 3):
        time.sleep(0.01)
    process.send_signal(number)
    began = time.perf_counter()
    _, told = process.communicate()
    assert time.perf_counter() - began < 2.0
    assert process.returncode == STOPPED
    found = re.fullmatch(
        r"driftrose: stopped after (\d+) of 60000 particles; .*out\.h5\.part keeps them; "
        r"the same command with --resume goes on\n", told
    )  # fmt: skip
    assert found, told
    assert 0 < int(found[1]) < 60000
    resumed = tracer.trace(tracer.load(run_file), out, resume=True)
    assert resumed.work["particles"] == 60000 - int(found[1])


# ---------------------------------------------------------------------------------------------------------- full disks


LIMITED = """
import resource, sys
resource.setrlimit(resource.RLIMIT_FSIZE, (int(sys.argv[1]),) * 2)
from tracer.cli import main
sys.exit(main(sys.argv[2:]))
"""


@pytest.mark.parametrize("limit", [200_000, 1_000_000])
def test_a_limit_on_the_size_of_files(tmp_path: Path, run_file: Path, limit: int) -> None:
    tracer.trace(tracer.load(run_file), tmp_path / "whole.h5")  # compiles too: the limit is for the output
    size = (tmp_path / "whole.h5").stat().st_size
    assert size > 1_100_000
    arguments = ["trace", str(run_file), "-o", str(tmp_path / "out.h5"), "--quiet"]
    done = subprocess.run(
        [sys.executable, "-c", LIMITED, str(limit), *arguments], cwd=ROOT, capture_output=True, text=True, check=False
    )
    assert done.returncode == STOPPED, done.stderr
    found = re.search(
        r"out\.h5: is larger than a file may be: (\d+) bytes are missing .*--resume goes on\n$", done.stderr
    )
    assert found, done.stderr
    assert int(found[1]) == pytest.approx(size - limit, abs=10_000)
    assert (
        subprocess.run([*command(run_file, "-o", tmp_path / "out.h5"), "--resume"], cwd=ROOT, check=False).returncode
        == 0
    )
    assert_same_datasets(tmp_path / "whole.h5", tmp_path / "out.h5")


@pytest.fixture
def small_disk(tmp_path: Path) -> Iterator[Path]:
    """A file system of 8 MB in memory."""
    place, mount = tmp_path / "disk", shutil.which("mount")
    place.mkdir()
    if os.geteuid() != 0 or mount is None:
        pytest.skip("only root may mount a small disk")
    if subprocess.run(
        [mount, "-t", "tmpfs", "-o", "size=8m", "tmpfs", place], capture_output=True, check=False
    ).returncode:
        pytest.skip("no small disk can be mounted here")
    yield place
    subprocess.run(["umount", place], check=True)


def test_a_disk_that_is_full_when_the_file_is_made(
    small_disk: Path, tmp_path: Path, run_file: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    run = tracer.load(run_file)
    filler = small_disk / "filler"
    filler.write_bytes(b"x" * 7_000_000)
    free = shutil.disk_usage(small_disk).free
    with monkeypatch.context() as patched:
        patched.setattr(shutil, "disk_usage", lambda _: shutil._ntuple_diskusage(10**12, 0, 10**12))  # at the check
        with pytest.raises(tracer.Stopped, match=r"out\.h5: the disk is full: \d+ bytes are missing"):
            tracer.trace(run, small_disk / "out.h5")
    assert shutil.disk_usage(small_disk).free == pytest.approx(free, abs=20_000)  # nothing is held meanwhile
    with pytest.raises(tracer.InputError, match="the file takes"):
        tracer.trace(run, small_disk / "out.h5", resume=True)
    filler.unlink()
    tracer.trace(run, small_disk / "out.h5", resume=True)
    tracer.trace(run, tmp_path / "whole.h5")
    assert_same_datasets(tmp_path / "whole.h5", small_disk / "out.h5")


def test_a_disk_that_fills_up_meanwhile(small_disk: Path, tmp_path: Path, run_file: Path) -> None:
    run = tracer.load(run_file)
    out = small_disk / "out.h5"
    full: list[int] = []

    class Filler(tracer.progress.Silent):
        def advanced(self, count: int) -> None:
            if not full:
                with (small_disk / "filler").open("wb", buffering=0) as file:
                    try:
                        while True:
                            file.write(b"x" * 4096)
                    except OSError:
                        full.append(shutil.disk_usage(small_disk).free)

    tracer.trace(run, out, watcher=Filler(), threads=1)  # the room was taken at the start
    assert full[0] < 4096
    tracer.trace(run, tmp_path / "whole.h5")
    assert_same_datasets(tmp_path / "whole.h5", out)


# -------------------------------------------------------------------------------------------------------- flipped bits


def everything(path: Path) -> dict[str, bytes]:
    """What a reader can get from a file."""
    result = store.open(path)
    found = {
        f"{group}/{name}": getattr(result, group)[name].tobytes() for group in GROUPS for name in getattr(result, group)
    }
    with h5py.File(path) as file:
        found["index"] = file["particle_index"][...].tobytes()
    return found | {"attributes": repr(sorted(result.attrs.items())).encode(), "time": result.time_h.tobytes()}


def test_every_flipped_bit_is_found(tmp_path: Path) -> None:
    made = write(tmp_path / "out.h5")
    whole = made.read_bytes()
    assert everything(made)
    flipped = tmp_path / "flipped.h5"
    noticed = 0
    for bit in np.random.default_rng(300).choice(8 * len(whole), 300, replace=False):
        data = bytearray(whole)
        data[bit // 8] ^= 1 << (bit % 8)
        flipped.write_bytes(data)
        try:
            everything(flipped)
        except (tracer.InputError, OSError):  # HDF5's own, for the index of the particles
            noticed += 1
    assert noticed == 300


def test_every_bit_of_the_text_is_under_the_seal(tmp_path: Path) -> None:
    # HDF5 has no checksum on it, and would search for ever for some of these
    made = write(tmp_path / "out.h5")
    whole = made.read_bytes()
    begin = whole.index(b"GCOL")
    for bit in range(8 * begin, 8 * (begin + 160)):
        data = bytearray(whole)
        data[bit // 8] ^= 1 << (bit % 8)
        made.write_bytes(data)
        with pytest.raises(tracer.InputError, match=r"out\.h5: damaged: its seal does not fit; trace the run again"):
            store.open(made)
