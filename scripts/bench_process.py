"""The kernel in a process of its own: ready when it says so, and at work whenever it is told to.

    python bench_process.py PITCH COUNT TOLERANCE

Each line on standard input is answered with the seconds that the particles took, on the wall and of a processor.
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from pathlib import Path
from types import TracebackType

ROOT = Path(__file__).resolve().parents[1]


def serve(pitch: str, count: int, tolerance: float) -> None:
    from bench_contenders import one_thread
    from bench_problems import problem

    asked = problem(pitch, count)
    state = asked.state[:count]
    one_thread(asked, state, tolerance)
    print("ready", flush=True)
    for _ in sys.stdin:
        wall, core = time.perf_counter(), time.process_time()
        one_thread(asked, state, tolerance)
        print(time.perf_counter() - wall, time.process_time() - core, flush=True)


class Process:
    """The other end. `environment` is added to this process's own."""

    def __init__(self, pitch: str, count: int, tolerance: float, environment: dict[str, str] | None = None) -> None:
        env = {**os.environ, "PYTHONPATH": str(ROOT), **(environment or {})}
        command = [sys.executable, __file__, pitch, str(count), repr(tolerance)]
        self.process = subprocess.Popen(command, env=env, stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True)

    def __enter__(self) -> Process:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        self.process.communicate()

    def answer(self) -> str:
        assert self.process.stdout is not None
        line = self.process.stdout.readline().strip()
        if not line:
            raise RuntimeError("a process of the benchmark has ended; its message stands above")
        return line

    def ready(self) -> None:
        """Wait until it is."""
        assert self.answer() == "ready"

    def go(self) -> None:
        assert self.process.stdin is not None
        self.process.stdin.write("\n")
        self.process.stdin.flush()

    def took(self) -> tuple[float, float]:
        """Seconds of the work last asked for, on the wall and of a processor."""
        wall, core = map(float, self.answer().split())
        return wall, core


if __name__ == "__main__":
    serve(sys.argv[1], int(sys.argv[2]), float(sys.argv[3]))
