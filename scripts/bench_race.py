"""The kernel and its opponents in turn, each tuned to the same error of the end point."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from bench_problems import Contender, OutOfReach, Problem, tuned
from bench_storm import BAD, GOOD
from bench_timing import core_seconds, ratios, spread


class Turn(NamedTuple):
    """One timing."""

    rate: float
    steps: float


def turn(contender: Contender, asked: Problem, tolerance: float) -> Turn:
    """Particles per second of one core, and steps of a particle; NaN where they are not counted."""
    state, found = asked.state[: contender.count], []
    took = core_seconds(lambda: found.append(contender.run(asked, state, tolerance)))
    ends = found[0]
    steps = float(np.nanmean(ends[:, GOOD])) if np.any(np.isfinite(ends[:, GOOD])) else np.nan
    return Turn(len(state) / took, steps + float(np.mean(np.nan_to_num(ends[:, BAD]))))


def race(asked: Problem, target: float, ours: Contender, others: list[Contender], rounds: int) -> dict[str, Any]:
    """Tune, then take turns: the kernel before and after each opponent, so that a change of the machine's mood hits
    both.

    Returns
    -------
    dict
        By name: tolerance, particles per second, how many times faster the kernel is, steps, time of a right-hand side.
    """
    print(f"\n{asked.name}, {target:g} R_E at 99 %, one core; particles per second, and how many times the kernel's")
    tolerance, found = {ours.name: tuned(ours, asked, target)}, {}
    for other in others:
        try:
            tolerance[other.name] = tuned(other, asked, target)
        except OutOfReach as answer:
            print(f"  {answer}", flush=True)
            found[other.name] = {"out_of_reach": True}
    racing = [other for other in others if other.name in tolerance]
    turns: dict[str, list[Turn]] = {contender.name: [] for contender in (ours, *racing)}
    beside: dict[str, list[float]] = {contender.name: [] for contender in (ours, *racing)}
    for _ in range(rounds):
        before = turn(ours, asked, tolerance[ours.name])
        turns[ours.name].append(before)
        beside[ours.name].append(before.rate)
        for other in racing:
            turns[other.name].append(turn(other, asked, tolerance[other.name]))
            after = turn(ours, asked, tolerance[ours.name])
            beside[other.name].append(0.5 * (before.rate + after.rate))
            before = after
    for contender in (ours, *racing):
        told = result(contender, turns[contender.name], beside[contender.name], tolerance[contender.name])
        found[contender.name] = told["record"]
        print(f"  {contender.name:33} {told['text']}", flush=True)
    return found


def result(contender: Contender, turns: list[Turn], beside: list[float], tolerance: float) -> dict[str, Any]:
    """One line, and what the record holds."""
    rates, steps = [t.rate for t in turns], turns[0].steps
    rate, faster = spread(rates), ratios(beside, rates)
    record = {"tolerance": tolerance, "particles_per_s": rate.record(), "kernel_is_faster_by": faster.record()}
    text = f"{rate.text(',.0f'):32} {faster.text('.2f'):25} tolerance {tolerance:.1e}"
    if np.isfinite(steps):
        record["steps"] = float(f"{steps:.4g}")
        text += f", {steps:.0f} steps"
    if contender.stages:
        each = spread([1e9 / (r * steps * contender.stages) for r in rates])
        record["ns_per_right_hand_side"] = each.record()
        text += f", {each.median:.2f} ns a right-hand side"
    return {"text": text, "record": record}
