"""How fast all threads together get on, from short trials."""

from __future__ import annotations

import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from contextlib import suppress
from typing import Any

import numpy as np

from tracer.integrate import Interrupted, Tick

ROUNDS, ROUND_S = 3, 0.2  # of timing, and how long all threads compute in each

Work = Callable[[Any, Tick, Callable[[], bool]], None]


def measured(work: Work, chosen: Callable[[int], np.ndarray], seed: int, threads: int) -> float:
    """Particles per second of all threads together: the median of rounds, since others may use the machine too.

    Parameters
    ----------
    work : callable
        Takes a part of the particles, whom to tell of those done, and whom to ask whether it is enough.
    chosen : callable
        Gives the particles of a round, by its seed: as many as all threads can use, along the first axis.
    seed : int
        Of the first round.
    threads : int
    """
    rates = []
    with ThreadPoolExecutor(threads) as pool:
        for now in range(seed, seed + ROUNDS):
            shuffled = np.random.default_rng(now).permutation(chosen(now))  # a first part is as good as the whole
            rates.append(sum(pool.map(lambda part: _of_one(work, part), np.array_split(shuffled, threads))))
    return float(np.median(rates))


def _of_one(work: Work, part: np.ndarray) -> float:
    """Particles per second of one thread with as much of its part as it does in `ROUND_S`."""
    began = last = time.perf_counter()
    done = 0

    def tick(count: int) -> None:
        nonlocal done, last
        done, last = done + count, time.perf_counter()

    def enough() -> bool:
        return time.perf_counter() - began > ROUND_S

    with suppress(Interrupted):
        work(part, tick, enough)
    return done / (last - began) if done else 0.0
