"""Print how fast the drift kernel and the command are, on this machine.

All contenders are tuned to the same error of the end point and take turns with the kernel, so that a change of the
machine's mood hits both. Medians over the rounds, and in brackets the smallest and the largest.
"""

from __future__ import annotations

import argparse
import os
import platform
from collections.abc import Callable, Iterator
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

import bench_record
from bench_access import access
from bench_command import command
from bench_contenders import ABSENT, CONTENDERS, OURS
from bench_forecast import forecast
from bench_problems import PITCHES, TARGET_RE, Problem, problem
from bench_race import race
from bench_scaling import processors, threads, tracks
from bench_size import size
from bench_start import start
from bench_work import work

import tracer
from tracer.pipeline import processors as processors_here
from tracer.store_attrs import processor

ROUNDS = 7
PACKAGES = ("numba", "llvmlite", "numpy", "scipy", "h5py", "heyoka", "numbalsoda")
# each of both problems, and each of the command
KERNEL: dict[str, Callable[[Problem, int], dict[str, Any]]] = {
    "work": work, "tracks": tracks, "threads": threads, "processors": processors,
}  # fmt: skip
COMMAND: dict[str, Callable[[int], Any]] = {
    "command": command, "start": start, "forecast": lambda _: forecast(), "access": access,
}  # fmt: skip
PARTS = ("opponents", *KERNEL, *COMMAND)


def machine() -> dict[str, Any]:
    """Print where this runs."""
    system = f"{platform.system()} {platform.release()}"
    print(f"{processor()['cpu']}, {processors_here()} processors, load {os.getloadavg()[0]:.1f}, {system}")
    versions = {"driftrose": tracer.__version__, "Python": platform.python_version()}
    for name in PACKAGES:
        try:
            versions[name] = version(name)
        except PackageNotFoundError:
            continue
    print(", ".join(f"{name} {number}" for name, number in versions.items()))
    for package in ABSENT:
        print(f"{package}: not installed, left out; pip install {package}")
    return {"cpu": processor()["cpu"], "processors": processors_here(), "system": system, "versions": versions}


def measured(parts: list[str], targets: list[float], only: str, rounds: int) -> Iterator[dict[str, Any]]:
    """All parts, one after another; what was found so far, after each."""
    found: dict[str, Any] = {part: {} for part in parts}
    others = [contender for contender in CONTENDERS[1:] if only in contender.name]
    for pitch in PITCHES if {"opponents", *KERNEL} & set(parts) else ():
        asked = problem(pitch, OURS.count)
        if "opponents" in parts:
            found["opponents"][pitch] = {}
            for target in targets:
                found["opponents"][pitch][f"{target:g} R_E"] = race(asked, target, OURS, others, rounds)
                yield found
        for part in KERNEL:
            if part in parts:
                found[part][pitch] = KERNEL[part](asked, rounds)
                yield found
    for part in COMMAND:
        if part in parts:
            said = COMMAND[part](rounds)
            found[part] = "printed only" if said is None else said
            yield found


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--rounds", type=int, default=ROUNDS, help=f"how often each is timed [default: {ROUNDS}]")
    parser.add_argument(
        "--parts", nargs="+", choices=PARTS, metavar="PART", default=list(PARTS),
        help=f"of {', '.join(PARTS)} [default: all]",
    )  # fmt: skip
    parser.add_argument("--only", metavar="TEXT", default="", help="opponents whose name holds TEXT")
    parser.add_argument(
        "--target", type=float, nargs="+", metavar="R_E", default=[TARGET_RE],
        help="errors of the end point, 99 %% to be below, that the opponents are tuned to [default: 1e-5]",
    )  # fmt: skip
    parser.add_argument("--size", action="store_true", help="instead: writing, and the memory of large runs")
    parser.add_argument("--record", type=Path, metavar="FILE", help="write what was found, as JSON")
    parser.add_argument("--changed", metavar="TEXT", default="", help="what was changed in the opponents, and why")
    given = parser.parse_args()
    lines = bench_record.changes(given.record, given.changed) if given.record else []
    here = machine()
    if given.size:
        size()
        return
    asked = {"rounds": given.rounds, "only": given.only}
    found: dict[str, Any] = {}
    for found in measured(given.parts, given.target, given.only, given.rounds):
        if given.record:  # after every part: a long run may be stopped
            bench_record.write(given.record, lines, {"complete": False, "machine": here, **asked, **found})
    if given.record:
        bench_record.write(given.record, lines, {"complete": True, "machine": here, **asked, **found})


if __name__ == "__main__":
    main()
