"""How soon the command gets to work when its kernel is compiled already."""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

from tracer.templates import new_runfile

ROUNDS = 5
FEW = 200  # particles of a small run
# The command itself, but it says when the kernel has moved its first particles, the pilot's, and ends there.
FIRST_PARTICLE = """
import os
import tracer.accuracy

def first_moved(*arguments, advance=tracer.accuracy.advance):
    found = advance(*arguments)
    os.write(1, b"moved")
    os._exit(0 if found[0].shape[0] else 1)

tracer.accuracy.advance = first_moved
from tracer.cli import main
main(["trace", "storm.toml", "--overwrite"])
"""


def start(rounds: int = ROUNDS) -> None:
    """Print the time from the command to the first particle moved, and that of a small run from end to end."""
    with tempfile.TemporaryDirectory(prefix="driftrose-bench-") as name:
        folder = Path(name)
        new_runfile(folder / "storm.toml")
        first = [sys.executable, "-c", FIRST_PARTICLE]
        until(first, folder)  # compiles what is not compiled yet
        told("first particle moved", [until(first, folder) for _ in range(rounds)])
        text = (folder / "storm.toml").read_text("utf-8")
        (folder / "storm.toml").write_text(text.replace("count = 20000", f"count = {FEW}"), "utf-8")
        whole = [sys.executable, "-m", "tracer", "trace", "storm.toml", "--overwrite", "--quiet"]
        told(f"{FEW} particles traced", [until(whole, folder) for _ in range(rounds)])


def until(command: list[str], folder: Path) -> float:
    """Seconds until a command prints something, or ends."""
    env = {**os.environ, "PYTHONPATH": str(Path(__file__).parents[1])}
    env.pop("PYTHONDONTWRITEBYTECODE", None)  # as with any installed package, what was imported before is at hand
    began = time.perf_counter()
    with subprocess.Popen(command, cwd=folder, env=env, stdout=subprocess.PIPE) as process:
        assert process.stdout is not None
        process.stdout.read(1)
        took = time.perf_counter() - began
    if process.returncode:
        raise subprocess.CalledProcessError(process.returncode, command)
    return took


def told(what: str, times: list[float]) -> None:
    print(f"{what}: {min(times):.2f} s at best, median {statistics.median(times):.2f} s of {len(times)}", flush=True)


if __name__ == "__main__":
    start()
