"""Who takes part. The opponents are frozen: a change of one needs a line in the record, see `bench_record`."""

from __future__ import annotations

from importlib.util import find_spec

import bench_heyoka
import bench_numbalsoda
import numpy as np
from bench_plain import STAGES as PLAIN_STAGES
from bench_plain import plain
from bench_problems import Contender, Problem
from bench_scipy import by_scipy

from tracer.integrate import advance

STAGES = 12  # right-hand sides of a step: eleven, and one at its end


def one_thread(asked: Problem, state: np.ndarray, tolerance: float) -> np.ndarray:
    """The project's kernel."""
    return advance(asked.scenario, asked.kernel, state, tolerance, np.empty(0))[0]


OURS = Contender("driftrose, 1 thread", one_thread, 20000, STAGES)
PRANGE = Contender("numba prange, DOP853, (x, y)", plain, 5000, PLAIN_STAGES)


def by_heyoka() -> list[Contender]:
    """One particle at a time and batches of the recommended size and twice that, in both systems of coordinates."""
    size = bench_heyoka.recommended()
    return [
        Contender(f"heyoka, {f'batch of {n}' if n else 'scalar'}, {state}", bench_heyoka.contender(state, n), 4000)
        for state in (bench_heyoka.POLAR, bench_heyoka.PLANE)
        for n in (0, size, 2 * size)
    ]


def by_numbalsoda() -> list[Contender]:
    """Both of its methods."""
    return [
        Contender("numbalsoda, dop853, (r, phi)", bench_numbalsoda.contender("dop853"), 2048, finest=2.0**-47),
        Contender("numbalsoda, lsoda, (r, phi)", bench_numbalsoda.contender("lsoda"), 2048, finest=2.0**-41),
    ]


# Those that take part where their package is there; the extra `bench` installs it.
OPTIONAL = {"heyoka": by_heyoka, "numbalsoda": by_numbalsoda}
ABSENT = [package for package in OPTIONAL if find_spec(package) is None]

CONTENDERS = [
    OURS,
    PRANGE,
    *(contender for package, made in OPTIONAL.items() if package not in ABSENT for contender in made()),
    Contender("scipy solve_ivp, DOP853, (r, phi)", by_scipy, 100, finest=2.0**-44),
]
