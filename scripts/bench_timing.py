"""Clocks, and how a set of measurements is told: its median, and in brackets the smallest and the largest."""

from __future__ import annotations

import statistics
import time
from collections.abc import Callable, Sequence
from typing import NamedTuple


class Spread(NamedTuple):
    """What a set of measurements says."""

    median: float
    least: float
    most: float

    def text(self, form: str = ",.2f") -> str:
        return f"{self.median:{form}}  ({self.least:{form}} to {self.most:{form}})"

    def record(self) -> dict[str, float]:
        """To four digits."""
        return {name: float(f"{value:.4g}") for name, value in self._asdict().items()}


def spread(values: Sequence[float]) -> Spread:
    return Spread(statistics.median(values), min(values), max(values))


def ratios(values: Sequence[float], others: Sequence[float]) -> Spread:
    """Of measurements that belong together, one by one."""
    return spread([value / other for value, other in zip(values, others, strict=True)])


def seconds(work: Callable[[], object]) -> float:
    """On the clock on the wall."""
    began = time.perf_counter()
    work()
    return time.perf_counter() - began


def core_seconds(work: Callable[[], object]) -> float:
    """Of a processor, for what keeps one core busy: what others do meanwhile does not count. All threads do."""
    began = time.process_time()
    work()
    return time.process_time() - began
