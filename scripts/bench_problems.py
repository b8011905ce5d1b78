"""What the benchmark asks of every contender: populations in an invented storm, and the end states to be met."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any

import numpy as np

import tracer
from tracer.accuracy import quantiles, separation
from tracer.integrate import advance, compile_kernel, prepare
from tracer.kernels.build import Kernel
from tracer.scenario import Scenario

TARGET_RE = 1e-5  # error of the end point that 99 % of the particles are to stay below
TRUTH = 1e-13  # local tolerance of the reference
SAMPLE = 2048  # particles by which a tolerance is judged
COARSEST = 8.0  # minus the binary logarithm of a tolerance that nobody can do with

PITCHES: dict[str, Any] = {
    "equatorial": 90.0,
    "bounce-averaged": {"from": 5.0, "to": 90.0, "spacing": "isotropic"},
}


def scenario(pitch: str, count: int) -> Scenario:
    """24 hours of three-hourly Kp; protons and electrons, half each, over 4 to 9 R_E and 1 to 300 keV. All invented."""
    common = {
        "count": count // 2,
        "draw": "sobol",
        "r_re": {"from": 4.0, "to": 9.0},
        "mlt_h": {"from": 0.0, "to": 24.0},
        "energy_keV": {"from": 1.0, "to": 300.0, "spacing": "log"},
        "pitch_deg": PITCHES[pitch],
    }
    kp = [3.333, 5.0, 6.667, 7.0, 5.0, 3.667, 2.667, 2.333]
    hours = [datetime(2027, 3, 4, 3 * i, tzinfo=UTC) for i in range(8)]
    return tracer.build(
        {
            "title": f"Invented storm: {pitch}",
            "time": {"start": hours[0], "hours": 24.0},
            "series": {"kp": {"time": hours, "value": kp, "interval_h": 3.0, "hold": "step"}},
            "magnetic": {"model": "dipole", "b0_nT": 30000.0},
            "electric": [{"model": "corotation"}, {"model": "volland-stern", "gamma": 2.0, "kp": "series:kp"}],
            "population": [
                {"name": "protons", "species": "H+", "seed": 1, **common},
                {"name": "electrons", "species": "e-", "seed": 2, **common},
            ],
            "losses": {"loss_cone": "off"},
            "output": {"every_min": 0.0},
        }
    )


@dataclass(frozen=True, eq=False)
class Problem:
    """Particles to be carried to their ends.

    Attributes
    ----------
    state : ndarray, shape (n, 7 or more)
        r, phi, release, mu, k, 1/q, 2/(m c^2) first, as `tracer.integrate.prepare` makes it; shuffled: any first
        part is a fair sample.
    truth : ndarray, shape (SAMPLE, 10)
        End states of the first particles, as `tracer.integrate.advance` gives them, at a far finer tolerance.
    """

    name: str
    scenario: Scenario
    kernel: Kernel
    state: np.ndarray
    truth: np.ndarray

    def error(self, end: np.ndarray) -> float:
        """99 % quantile of the distance of the first particles' ends from the truth, R_E."""
        return quantiles(separation(end, self.truth[: len(end)])).most


def problem(pitch: str, count: int) -> Problem:
    """A population with its kernel and the truth about its first particles."""
    run = scenario(pitch, max(count, SAMPLE))
    kernel = compile_kernel(run)
    state = np.random.default_rng(0).permutation(prepare(run, 0, run.count).state)
    truth, _ = advance(run, kernel, state[:SAMPLE], TRUTH, np.empty(0))
    return Problem(pitch, run, kernel, state, truth)


Run = Callable[[Problem, np.ndarray, float], np.ndarray]
"""(problem, state, tolerance) -> end states, shape (n, 10); columns 1 (r), 5 (cause) and 6 (turns) are judged; 8 and 9
are accepted and rejected steps, or NaN."""


@dataclass(frozen=True)
class Contender:
    """A way to carry particles to their ends.

    Attributes
    ----------
    name : str
    run : callable
        See `Run`. Its tolerance is its own affair: it is tuned to the wanted error.
    count : int
        How many particles it is given in a round: as many as it takes about half a second for.
    stages : int
        Right-hand sides of one step; 0 when its end states do not count them.
    finest : float
        The smallest tolerance that it bears.
    """

    name: str
    run: Run
    count: int
    stages: int = 0
    finest: float = 2.0**-48


class OutOfReach(RuntimeError):  # noqa: N818 - an answer like any other
    """No tolerance is fine enough."""


def tuned(contender: Contender, asked: Problem, target: float | None = None) -> float:
    """The largest tolerance with which the contender meets the target (`TARGET_RE`), to a factor of 2^(1/4).

    Found by halving, first among powers of two, then between the last that failed and the first that did not, as if a
    finer one never did worse.

    Raises
    ------
    OutOfReach
    """
    wanted = TARGET_RE if target is None else target
    state = asked.state[: min(SAMPLE, contender.count)]

    def meets(exponent: float) -> bool:
        return asked.error(contender.run(asked, state, 2.0**-exponent)) <= wanted

    finest = float(round(-np.log2(contender.finest)))
    fails, passes = COARSEST, 2.0 * COARSEST  # coarse ones cost little, fine ones much
    while not meets(passes):
        if passes == finest:
            raise OutOfReach(f"{contender.name} does not reach {wanted:g} R_E")
        fails, passes = passes, min(2.0 * passes, finest)
    for grain in (1.0, 0.25):
        while passes - fails > grain:
            middle = fails + grain * round(0.5 * (passes - fails) / grain)
            if meets(middle):
                passes = middle
            else:
                fails = middle
    return float(2.0**-passes)
