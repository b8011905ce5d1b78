"""What the kernel costs with tracks, on two threads, and compiled for lesser processors, as ratios of neighbours."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from contextlib import ExitStack
from typing import Any

import numpy as np
from bench_contenders import OURS, one_thread
from bench_problems import Problem, tuned
from bench_process import Process
from bench_timing import Spread, core_seconds, ratios, seconds

from tracer.integrate import advance
from tracer.pipeline import CHUNK

EVERY_H = 5.0 / 60.0
ALLOWED = 1.4  # of the time without tracks
WANTED = 1.9  # of one thread, by two
FEWER = 4000  # particles of a process for another processor
PROCESSORS = {
    "AVX2 (haswell)": {"NUMBA_CPU_NAME": "haswell", "NUMBA_CPU_FEATURES": ""},
    "no extra features (x86-64)": {"NUMBA_CPU_NAME": "x86-64", "NUMBA_CPU_FEATURES": ""},
}


def tracks(asked: Problem, rounds: int) -> dict[str, Any]:
    """Print the time of a chunk with a track saved every 5 minutes over that with end states only."""
    tolerance, state = tuned(OURS, asked), asked.state[:CHUNK]
    times = np.linspace(0.0, asked.scenario.end_h, round(asked.scenario.end_h / EVERY_H) + 1)

    def chunk(saved: np.ndarray) -> Callable[[], object]:
        return lambda: advance(asked.scenario, asked.kernel, state, tolerance, saved)

    seconds(chunk(times))
    pairs = [(core_seconds(chunk(times)), core_seconds(chunk(np.empty(0)))) for _ in range(rounds)]
    ratio = ratios(*zip(*pairs))
    verdict = "" if ratio.median <= ALLOWED else f", more than {ALLOWED:g}"
    print(f"{asked.name}: {times.size} saved times cost {ratio.text()} of the time of end states only{verdict}")
    return {"saved_times": times.size, "time_over_end_states_only": ratio.record()}


def threads(asked: Problem, rounds: int) -> dict[str, Any]:
    """Print what two threads do beside one, and two processes at once beside one."""
    tolerance, state = tuned(OURS, asked), asked.state[: OURS.count]
    parts = np.array_split(state, 8)
    by_threads, by_processes = [], []
    with ExitStack() as stack:
        pool = stack.enter_context(ThreadPoolExecutor(2))
        both = [stack.enter_context(Process(asked.name, OURS.count, tolerance)) for _ in range(2)]
        for process in both:
            process.ready()
        for _ in range(rounds):
            two = seconds(lambda: list(pool.map(lambda part: one_thread(asked, part, tolerance), parts)))
            by_threads.append((seconds(lambda: one_thread(asked, state, tolerance)), two))
            by_processes.append((2.0 * at_once(both[:1]), at_once(both)))
    threaded, separate = (ratios(*zip(*pairs)) for pairs in (by_threads, by_processes))
    said = verdict(threaded, separate)
    print(f"{asked.name}: two threads do {threaded.text()} times the work of one,")
    print(f"  two processes at once {separate.text()} times that of one: {said}")
    return {"two_threads": threaded.record(), "two_processes": separate.record(), "verdict": said}


def at_once(processes: list[Process]) -> float:
    """Seconds until the last of them is done."""
    for process in processes:
        process.go()
    return max(process.took()[0] for process in processes)


def alone(process: Process) -> float:
    """Seconds of a processor."""
    process.go()
    return process.took()[1]


def verdict(threaded: Spread, separate: Spread) -> str:
    if threaded.median >= WANTED:
        return f"{WANTED:g} reached"
    return f"{WANTED:g} MISSED" if separate.median >= WANTED else "not measurable on this machine"


def processors(asked: Problem, rounds: int) -> dict[str, Any]:
    """Print the time of the kernel compiled for lesser processors over that of the one for this processor."""
    tolerance, found = tuned(OURS, asked), {}
    with Process(asked.name, FEWER, tolerance) as native:
        native.ready()
        for name, environment in PROCESSORS.items():
            with Process(asked.name, FEWER, tolerance, environment) as other:
                other.ready()
                ratio = ratios(*zip(*((alone(other), alone(native)) for _ in range(rounds))))
            print(f"{asked.name}: {name:27} {ratio.text()} times the time of this processor's own code", flush=True)
            found[name] = {"time_over_native": ratio.record()}
    return found
