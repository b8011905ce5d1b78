"""What `driftrose check` foretells, beside what the trace then takes."""

from __future__ import annotations

import json
import subprocess
import sys
import tempfile
from pathlib import Path
from typing import Any

from bench_size import room, run_of

from tracer import store
from tracer.runfile import load

ALLOWED = 1.5
RUNS = (
    ("20,000, end states only", 20_000, 0.0),
    ("100,000 at 289 times", 100_000, 5.0),
    ("400,000, end states only", 400_000, 0.0),
)


def forecast(folder: Path | None = None) -> None:
    """Print time, memory and disk, foretold and measured; say when the disk is too small to try."""
    print(f"foretold / measured, to be within a factor of {ALLOWED:g}:")
    with tempfile.TemporaryDirectory(prefix="driftrose-bench-", dir=folder) as name:
        for title, count, every_min in RUNS:
            run = run_of(Path(name), count, every_min, 24.0)
            said = room(Path(name), store.expected_bytes(load(run))) or beside(run, Path(name) / "out.h5")
            print(f"  {title:26} {said}", flush=True)


def beside(run: Path, out: Path) -> str:
    """All three of one run, each command in a process of its own."""
    foretold = answer("check", str(run))
    measured = answer("trace", str(run), "-o", str(out))
    out.unlink()
    return "   ".join(
        (
            compared(foretold["work"]["seconds"], measured["seconds"], "s", 1.0),
            compared(foretold["memory_bytes"], measured["memory_bytes"], "MB", 1e6),
            compared(foretold["disk_bytes"], measured["disk_bytes"], "MB", 1e6),
        )
    )


def compared(foretold: float, measured: float, unit: str, size: float) -> str:
    ratio = foretold / measured
    verdict = "" if 1.0 / ALLOWED <= ratio <= ALLOWED else " OFF"
    return f"{foretold / size:.1f} / {measured / size:.1f} {unit} = {ratio:.2f}{verdict}"


def answer(*arguments: str) -> Any:
    """What a command says of itself."""
    command = [sys.executable, "-m", "tracer", *arguments, "--json"]
    return json.loads(subprocess.run(command, capture_output=True, text=True, check=True).stdout)


if __name__ == "__main__":
    forecast()
