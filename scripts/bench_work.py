"""What the kernel makes of the processor: its operations, counted, beside the most that one core can do, measured."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
from bench_contenders import OURS, STAGES
from bench_flops import counter
from bench_peak import gflops, width
from bench_problems import TARGET_RE, Problem, tuned
from bench_race import turn
from bench_storm import BAD, GOOD
from bench_timing import spread

from tracer.integrate import LARGEST_BATCH, advance

# Particles counted: a full batch, as those that are timed. In a small one most lanes idle at its end; 64 particles take
# four times the operations each.
COUNTED = LARGEST_BATCH


class Caught(Exception):  # noqa: N818 - not an error
    """The arguments of a call."""


def arguments_of(asked: Problem, tolerance: float) -> list[Any]:
    """What `tracer.integrate.advance` hands to the compiled entry point, for `COUNTED` particles in one batch."""

    class Catching:
        @staticmethod
        def advance(*arguments: Any) -> None:
            raise Caught(*arguments)

    kernel = replace(asked.kernel, module=Catching)  # type: ignore[arg-type]
    try:
        advance(asked.scenario, kernel, asked.state[:COUNTED], tolerance, np.empty(0))
    except Caught as caught:
        first, *others = caught.args
        rows = len(first)
        return [asked.state[:COUNTED], *(longer(a) if np.ndim(a) > 1 and len(a) == rows else a for a in others)]
    raise AssertionError("the kernel was not called")


def longer(results: np.ndarray) -> np.ndarray:
    """Room for the results of `COUNTED` particles."""
    return np.full((COUNTED, *results.shape[1:]), np.nan)


def work(asked: Problem, rounds: int) -> dict[str, Any]:
    """Print operations of a right-hand side, its share of the step included, and the fraction of the peak."""
    tolerance = tuned(OURS, asked)
    arguments = arguments_of(asked, tolerance)
    total = counter(asked.kernel.module.advance, *arguments)()
    (ends,) = (a for a in arguments if np.ndim(a) == 2 and a.shape == (COUNTED, 10))
    assert asked.error(ends[: len(asked.truth)]) <= TARGET_RE  # the counting twin did the same work
    each = total / (STAGES * float(np.sum(ends[:, GOOD] + ends[:, BAD])))
    peaks, reached = [], []
    for _ in range(rounds):
        made = turn(OURS, asked, tolerance)
        reached.append(made.rate * total / len(ends) * 1e-9)
        peaks.append(gflops())
    # a peak is a ceiling: the highest of all rounds, for one measured in a bad moment would flatter the kernel
    highest = max(peaks)
    share, rate = spread([one / highest for one in reached]), spread(reached)
    print(f"\n{asked.name}, {TARGET_RE:g} R_E: what the kernel makes of one core")
    print(f"  {each:.0f} operations to a right-hand side, its share of the step and idle lanes included")
    print(f"  {rate.text('.1f')} GFLOP/s of at most {highest:.1f}, {8 * width()} bytes wide: {share.text('.1%')}")
    if share.most > 1.0:
        raise RuntimeError(f"{share.most:.0%} of the peak: the operations are counted wrong")
    return {
        "operations_per_right_hand_side": round(each, 1),
        "gflops": rate.record(),
        "peak_gflops": round(highest, 1),
        "fraction_of_peak": share.record(),
    }
