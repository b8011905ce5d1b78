"""Print how fast the drift kernel and the command are, on this machine.

All contenders are tuned to the same error of the end point and take turns, so that a change of the machine's mood hits
all alike. Medians over the rounds, and in brackets the smallest and the largest.
"""

from __future__ import annotations

import argparse
import json
import os
import platform
import shutil
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from importlib.metadata import version
from pathlib import Path

import numpy as np
from bench_contenders import CONTENDERS
from bench_problems import PITCHES, TARGET_RE, Contender, Problem, problem, tuned
from bench_size import size

from tracer.pipeline import processors
from tracer.store_attrs import processor
from tracer.templates import new_runfile

ROUNDS = 7
COLD_KERNEL = (
    "import sys, tracer; from tracer.integrate import compile_kernel; compile_kernel(tracer.load(sys.argv[1]))"
)


def spread(values: list[float], digits: int = 3) -> str:
    """Median, and smallest to largest."""
    shown = [f"{value:,.{digits}f}" for value in (np.median(values), min(values), max(values))]
    return f"{shown[0]}  ({shown[1]} to {shown[2]})"


def seconds(work: Callable[[], object]) -> float:
    began = time.perf_counter()
    work()
    return time.perf_counter() - began


def machine() -> None:
    names = ("numba", "llvmlite", "numpy", "scipy", "h5py")
    system = f"{platform.system()} {platform.release()}"
    print(f"{processor()['cpu']}, {processors()} processors, load {os.getloadavg()[0]:.1f}, {system}")
    print(f"Python {platform.python_version()}, " + ", ".join(f"{name} {version(name)}" for name in names))


# ------------------------------------------------------------------------------------------------------------- kernels


def race(asked: Problem, contenders: list[Contender], rounds: int) -> None:
    """Tune, warm up, then take turns."""
    tolerance = {c.name: tuned(c, asked) for c in contenders}
    print(f"\n{asked.name}: {TARGET_RE:g} R_E at 99 %, particles per second")
    rates: dict[str, list[float]] = {c.name: [] for c in contenders}
    ends: dict[str, np.ndarray] = {}
    for _ in range(rounds):
        for c in contenders:
            state = asked.state[: c.count]
            began = time.perf_counter()
            ends[c.name] = c.run(asked, state, tolerance[c.name])
            rates[c.name].append(len(state) / (time.perf_counter() - began))
    base = np.median(rates[contenders[0].name])
    for c in contenders:
        share = np.median(rates[c.name]) / base
        told = f"tolerance {tolerance[c.name]:.1e}{work(c, ends, rates)}"
        print(f"  {c.name:28} {spread(rates[c.name], 0):34} x {share:.3g}   {told}")


def work(contender: Contender, ends: dict[str, np.ndarray], rates: dict[str, list[float]]) -> str:
    """Steps of a particle and time of a right-hand side, where they are counted."""
    if not contender.stages:
        return ""
    steps = float(np.mean(ends[contender.name][:, 8] + ends[contender.name][:, 9]))
    each_ns = 1e9 / (np.median(rates[contender.name]) * steps * contender.stages)
    return f", {steps:.0f} steps, {each_ns:.2f} ns a right-hand side"


# ------------------------------------------------------------------------------------------------------------- command


def command(*arguments: str, folder: Path) -> float:
    """Wall-clock time of one call."""
    call = [sys.executable, "-m", "tracer", *arguments]
    root = str(Path(__file__).parents[1])
    env = {**os.environ, "PYTHONPATH": root}
    return seconds(lambda: subprocess.run(call, cwd=folder, env=env, check=True, capture_output=True))


def commands(rounds: int) -> None:
    """The kernel compiled from nothing, the storm traced with a warm cache, and the time to the first help."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        (run,) = (path for path in new_runfile(folder / "storm.toml") if path.suffix == ".toml")
        cold = {**os.environ, "DRIFTROSE_CACHE_DIR": str(folder / "empty")}
        call = [sys.executable, "-c", COLD_KERNEL, str(run)]
        cold_s = seconds(lambda: subprocess.run(call, env=cold, check=True))
        warm_s = seconds(lambda: subprocess.run(call, check=True))
        print(f"\nkernel in a new process: {cold_s:.1f} s compiled, {warm_s:.2f} s from the cache, imports included")
        shutil.rmtree(folder / "empty")
        traced = [command("trace", "storm.toml", "--overwrite", "--quiet", folder=folder) for _ in range(rounds)]
        megabytes = (folder / "storm.h5").stat().st_size / 1e6
        print(f"driftrose trace storm.toml, 20,000 particles, {megabytes:.0f} MB: {spread(traced, 2)} s")
        helped = [command("--help", folder=folder) for _ in range(rounds)]
        print(f"driftrose --help: {spread(helped)} s")


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--rounds", type=int, default=ROUNDS, help=f"how often each is timed [default: {ROUNDS}]")
    parser.add_argument("--only", metavar="TEXT", default="", help="contenders whose name holds TEXT")
    parser.add_argument("--no-commands", action="store_true", help="leave out the command line")
    parser.add_argument("--size", action="store_true", help="instead: writing, and the memory of large runs")
    given = parser.parse_args()
    machine()
    if given.size:
        size()
        return
    chosen = [c for c in CONTENDERS if given.only in c.name]
    if not chosen:
        parser.error(f"no contender of that name; there are {json.dumps([c.name for c in CONTENDERS])}")
    for pitch in PITCHES:
        race(problem(pitch, max(c.count for c in chosen)), chosen, given.rounds)
    if not given.no_commands:
        commands(given.rounds)


if __name__ == "__main__":
    main()
