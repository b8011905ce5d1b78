"""From the global error that is asked for to the local one that the kernel takes, and back to the error that was
met."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fields.units import Floats
from tracer.integrate import advance, prepare_at
from tracer.kernels.build import Kernel
from tracer.scenario import Scenario

PILOTS = 384
PILOT_SEED = 20270304
AUDIT_SEED = 20270305
# The pilot's two local tolerances: of the target, and of the coarse one. The coarse one is also the loosest in use: it
# holds the Hamiltonian of a steady field to 1e-9 at a target of 1e-6, where slow particles meet that target with less.
COARSE, FINE = 1e-4, 1e-3
FINEST = 1e-14  # R_E
SAFETY = 0.1  # a quarter was not enough for three days at Kp 9, where errors have a long tail
PILOT_QUANTILE = 0.996
RETRY = 0.03


@dataclass(frozen=True)
class Errors:
    """Distance between end positions of the same particles at two tolerances, R_E: quantiles over `count`
    particles."""

    median: float
    most: float
    worst: float
    count: int

    def attrs(self) -> dict[str, float | int]:
        """As the attributes of a file."""
        return {
            "end_error_50_re": self.median,
            "end_error_99_re": self.most,
            "end_error_100_re": self.worst,
            "end_error_sample": self.count,
        }


@dataclass(frozen=True)
class Pilot:
    """What the pilot found: the local tolerance to use, and the work a particle takes with it."""

    local_tolerance: float
    steps: float


def sample(scenario: Scenario, size: int, seed: int) -> np.ndarray:
    """Sorted indices of `size` particles drawn without repetition; all of them when there are no more."""
    return sample_of(scenario.count, size, seed)


def sample_of(count: int, size: int, seed: int) -> np.ndarray:
    """The same of `count` things."""
    if count <= size:
        return np.arange(count)
    return np.sort(np.random.default_rng(seed).choice(count, size, replace=False))


def states_of(scenario: Scenario, index: np.ndarray) -> Floats:
    """Kernel states of scattered particles."""
    return prepare_at(scenario, index).state


def separation(end: Floats, other: Floats) -> Floats:
    """Distance in R_E between two sets of end states; infinite where they ended for different causes.

    The angle is compared unwrapped, so that a lost turn counts.
    """
    angle = 2.0 * np.pi * (end[:, 6] - other[:, 6])
    apart = np.hypot(end[:, 1] - other[:, 1], other[:, 1] * angle)
    return np.asarray(np.where(end[:, 5] == other[:, 5], apart, np.inf))


def quantiles(apart: Floats) -> Errors:
    """50, 99 and 100 %, by the nearest of the larger values: no interpolation into an infinite tail."""
    ranked = np.sort(apart)
    at = [min(int(np.ceil(share * ranked.size)) - 1, ranked.size - 1) for share in (0.5, 0.99, 1.0)]
    median, most, worst = (float(ranked[max(i, 0)]) for i in at)
    return Errors(median, most, worst, int(ranked.size))


def run_pilot(scenario: Scenario, kernel: Kernel) -> Pilot:
    """The local tolerance for the particles of a run, from a sample; see `pilot_of`."""
    return pilot_of(scenario, kernel, states_of(scenario, sample(scenario, PILOTS, PILOT_SEED)))


def pilot_of(scenario: Scenario, kernel: Kernel, state: Floats) -> Pilot:
    """Find the local tolerance with which 99 % of the ends fall within the target.

    A sample is traced at two local tolerances. The finer one stands for the truth, the difference is the error of the
    coarser one, and errors go as the local tolerance (the method holds its error per step), so the wanted tolerance
    follows by proportion. Near a separatrix errors have a long tail; the larger quantile of `PILOT_QUANTILE` keeps
    its scatter from one sample to the next within the safety factor. Where too many ends differ in their cause to
    say how far off they are, the sample is traced again, finer.
    """
    target = scenario.output.tolerance_re
    coarse = COARSE * target
    while True:
        coarse = max(coarse, 100.0 * FINEST)
        rough, _ = advance(scenario, kernel, state, coarse, np.empty(0))
        fine, _ = advance(scenario, kernel, state, max(FINE * coarse, FINEST), np.empty(0))
        found = float(np.quantile(separation(rough, fine), PILOT_QUANTILE, method="higher"))
        if np.isfinite(found) or coarse == 100.0 * FINEST:
            break
        coarse *= RETRY
    local = float(max(coarse * min(SAFETY * target / max(found, 1e-300), 1.0), FINEST))
    # steps go as the eighth root of the tolerance
    steps = float((rough[:, 8] + rough[:, 9]).mean() * (coarse / local) ** 0.125)
    return Pilot(local, steps)


def audit(scenario: Scenario, kernel: Kernel, local_tolerance: float) -> Errors:
    """Re-run a sample, other than the pilot's, a thousand times finer, and say how far the ends lie apart."""
    return audit_of(scenario, kernel, states_of(scenario, sample(scenario, PILOTS, AUDIT_SEED)), local_tolerance)


def audit_of(scenario: Scenario, kernel: Kernel, state: Floats, local_tolerance: float) -> Errors:
    """The same of given states."""
    kept, _ = advance(scenario, kernel, state, local_tolerance, np.empty(0))
    finer, _ = advance(scenario, kernel, state, max(FINE * local_tolerance, FINEST), np.empty(0))
    return quantiles(separation(kept, finer))
