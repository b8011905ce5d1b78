"""The kernel compiled from nothing, the command on the shipped storm, and the time to its help."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import tempfile
from pathlib import Path
from typing import Any

from bench_timing import seconds, spread

from tracer.templates import new_runfile

COLD_KERNEL = (
    "import sys, tracer; from tracer.integrate import compile_kernel; compile_kernel(tracer.load(sys.argv[1]))"
)


def call(*arguments: str, folder: Path) -> float:
    """Wall-clock time of one call."""
    command = [sys.executable, "-m", "tracer", *arguments]
    env = {**os.environ, "PYTHONPATH": str(Path(__file__).parents[1])}
    return seconds(lambda: subprocess.run(command, cwd=folder, env=env, check=True, capture_output=True))


def command(rounds: int) -> dict[str, Any]:
    """Print all three."""
    with tempfile.TemporaryDirectory(prefix="driftrose-bench-") as name:
        folder = Path(name)
        (run,) = (path for path in new_runfile(folder / "storm.toml") if path.suffix == ".toml")
        cold = {**os.environ, "DRIFTROSE_CACHE_DIR": str(folder / "empty")}
        compiling = [sys.executable, "-c", COLD_KERNEL, str(run)]
        cold_s = seconds(lambda: subprocess.run(compiling, env=cold, check=True))
        warm_s = seconds(lambda: subprocess.run(compiling, check=True))
        print(f"\nkernel in a new process: {cold_s:.1f} s compiled, {warm_s:.2f} s from the cache, imports included")
        shutil.rmtree(folder / "empty")
        traced = spread([call("trace", "storm.toml", "--overwrite", "--quiet", folder=folder) for _ in range(rounds)])
        megabytes = (folder / "storm.h5").stat().st_size / 1e6
        print(f"driftrose trace storm.toml, 20,000 particles, {megabytes:.0f} MB: {traced.text()} s")
        helped = spread([call("--help", folder=folder) for _ in range(rounds)])
        print(f"driftrose --help: {helped.text('.3f')} s")
    return {
        "cold_s": round(cold_s, 1),
        "warm_s": round(warm_s, 2),
        "trace_s": traced.record(),
        "help_s": helped.record(),
    }
