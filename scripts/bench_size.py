"""Large runs: what writing costs beside bare h5py, and the memory of runs of millions of particles."""

from __future__ import annotations

import json
import os
import shutil
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from pathlib import Path

import h5py
import numpy as np

from tracer import store
from tracer.population import initial_state
from tracer.records import END, GROUPS, PARTICLE, TRACK, Chunk
from tracer.runfile import load
from tracer.scenario import Scenario
from tracer.store_layout import stripe_rows
from tracer.templates import new_runfile

ROUNDS = 5
WRITTEN = 400_000  # particles
ALLOWED = 2 * 2**30
RUNS = (("10 million, end states only", 10_000_000, 0.0, 1.0), ("1 million at 289 times", 1_000_000, 5.0, 24.0))


def size(folder: Path | None = None) -> None:
    """Print both; say when the disk is too small to try."""
    with tempfile.TemporaryDirectory(prefix="driftrose-bench-", dir=folder) as name:
        writing(Path(name))
        for title, count, every_min, hours in RUNS:
            print(f"{title}: {peak(Path(name), count, every_min, hours)}", flush=True)


def run_of(folder: Path, count: int, every_min: float, hours: float) -> Path:
    """The shipped storm with other numbers."""
    path = folder / f"storm-{count}.toml"
    path.unlink(missing_ok=True)
    if not (folder / "storm-kp.csv").exists():
        new_runfile(str(folder / "storm.toml"))
    text = (folder / "storm.toml").read_text("utf-8")
    for old, new in (("count = 20000", f"count = {count}"), ("every_min = 5.0", f"every_min = {every_min}")):
        text = text.replace(old, new)
    path.write_text(text.replace("hours = 24.0", f"hours = {hours}"), "utf-8")
    return path


def room(folder: Path, needed: int) -> str:
    """What to say when the disk is too small."""
    free = shutil.disk_usage(folder).free
    if free > 1.1 * needed:
        return ""
    return f"not tried: takes {store.size_text(needed)}, the disk has {store.size_text(free)} free"


def peak(folder: Path, count: int, every_min: float, hours: float) -> str:
    """Trace in a process of its own, and what it says of itself."""
    run = run_of(folder, count, every_min, hours)
    if said := room(folder, store.expected_bytes(load(run))):
        return said
    out = folder / "out.h5"
    command = [sys.executable, "-m", "tracer", "trace", str(run), "-o", str(out), "--json"]
    found = json.loads(subprocess.run(command, capture_output=True, text=True, check=True).stdout)
    out.unlink()
    memory = found["memory_bytes"]
    verdict = "below" if memory < ALLOWED else "ABOVE"
    return (
        f"{store.size_text(memory)} of memory at most, {verdict} 2 GiB; {store.size_text(found['disk_bytes'])}, "
        f"{found['seconds']:.0f} s"
    )


def writing(folder: Path) -> None:
    """The same columns through the writer and through bare h5py, in turn."""
    run = load(run_of(folder, WRITTEN, 5.0, 24.0))
    if said := room(folder, 2 * store.expected_bytes(run)):
        print(f"writing: {said}")
        return
    chunk = invented(run)
    for flushed in (False, True):
        ratios = []
        for _ in range(ROUNDS):
            plain = timed(folder, flushed, lambda path: bare(path, run, chunk))
            ratios.append(timed(folder, flushed, lambda path: ours(path, run, chunk)) / plain)
        sort = "and flushed to the disk" if flushed else "into the system's cache"
        spread = f"{min(ratios):.2f} to {max(ratios):.2f}"
        took = f"{statistics.median(ratios):.2f} ({spread}) of the time of bare h5py"
        print(f"writing {store.size_text(store.expected_bytes(run))} {sort}: {took}", flush=True)


def timed(folder: Path, flushed: bool, write) -> float:  # type: ignore[no-untyped-def]
    """Seconds that a way of writing takes, with the disk at rest before; the file is gone afterwards."""
    path, real = folder / "written.h5", os.fsync
    os.sync()
    if not flushed:
        os.fsync = lambda _: None
    try:
        began = time.perf_counter()
        write(path)
        if flushed:
            with path.open("r+b") as file:
                os.fsync(file.fileno())
        return time.perf_counter() - began
    finally:
        os.fsync = real
        path.unlink()


def invented(run: Scenario) -> Chunk:
    """A chunk of plausible size, used again for all particles."""
    draws, rows = np.random.default_rng(1), store.ROWS
    particle = initial_state(run, 0, rows)
    particle |= {column.name: draws.random(rows) for column in PARTICLE if column.name not in particle}
    end = {column.name: draws.random(rows).astype(column.dtype) for column in END}
    return Chunk(0, particle, {column.name: draws.random((rows, run.save_times_h.size)) for column in TRACK}, end)


def pieces(run: Scenario, chunk: Chunk) -> Iterator[Chunk]:
    for first in range(0, run.count, store.ROWS):
        rows = slice(0, min(store.ROWS, run.count - first))
        parts = ({name: column[rows] for name, column in getattr(chunk, group).items()} for group in GROUPS)
        yield Chunk(first, *parts)


def ours(path: Path, run: Scenario, chunk: Chunk) -> None:
    with store.TrajectoryWriter(path, run, {}) as writer:
        for piece in pieces(run, chunk):
            writer.write(piece)
        writer.finish()


def bare(path: Path, run: Scenario, chunk: Chunk) -> None:
    count, n_time = run.count, run.save_times_h.size
    with h5py.File(path, "w", libver=("v110", "v110")) as file:
        shapes = {"particle": (count,), "track": (count, n_time), "end": (count,)}
        chunks = {"track": store.track_chunk(count, n_time, 8)}
        for group, columns in GROUPS.items():
            for column in columns:
                shape = chunks.get(group, (stripe_rows(count, n_time),))
                file.create_dataset(f"{group}/{column.name}", shapes[group], column.dtype, chunks=shape)
        for piece in pieces(run, chunk):
            rows = slice(piece.first, piece.first + piece.end["cause"].size)
            for group in GROUPS:
                for name, column in getattr(piece, group).items():
                    file[f"{group}/{name}"][rows] = column


if __name__ == "__main__":
    size()
