"""What a run says on stderr while it goes: its warnings, that it compiles, and how far it is: as a bar on a terminal,
elsewhere as a line a minute.

Nothing is said before the run has passed every check, so that a fault is the only line there is.
"""

from __future__ import annotations

import sys
import threading
import time
from collections.abc import Callable, Sequence
from contextlib import suppress

from fields.errors import PREFIX
from tracer.progress import Silent, Watcher

COMPILING = "compiling the kernel for this combination of fields; takes half a minute, once on this machine"
INTERVAL_S = 60.0


def watcher(quiet: bool, warnings: Sequence[str] = ()) -> Watcher:
    """Says the warnings, and unless `quiet` how the run goes."""
    if quiet:
        return Warned(warnings)
    return Bar(warnings) if sys.stderr.isatty() else Lines(warnings)


def say(text: str) -> None:
    """One line on stderr, whole whichever thread writes it; nobody may be left to read it."""
    with suppress(OSError, ValueError):
        sys.stderr.write(f"{PREFIX}: {text}\n")


def warn(warnings: Sequence[str]) -> None:
    """One line for each warning."""
    for warning in warnings:
        say(f"warning: {warning}")


def span(seconds: float) -> str:
    """A time to wait: ``40 s``, ``12 min``, ``3 h 05 min``."""
    if seconds < 59.5:
        return f"{max(seconds, 1.0):.0f} s"
    minutes = round(seconds / 60.0)
    return f"{minutes} min" if minutes < 60 else f"{minutes // 60} h {minutes % 60:02} min"


def pace(rate: float) -> str:
    """Particles per second: ``43,361/s``, ``0.21/s``."""
    return f"{rate:,.0f}/s" if rate >= 10.0 else f"{rate:.2g}/s"


class Warned(Silent):
    """Says the warnings and no more."""

    def __init__(self, warnings: Sequence[str]) -> None:
        self._warnings = warnings

    def compiling(self, anew: bool) -> None:
        """See Watcher."""
        warn(self._warnings)


class Lines:
    """Plain lines: the warnings, that the kernel is being compiled, and from then on one at each interval.

    Parameters
    ----------
    warnings : sequence of str
    interval_s : float
        Between two lines, and before the first.
    clock : callable
        Seconds since some moment.
    """

    def __init__(
        self, warnings: Sequence[str], interval_s: float = INTERVAL_S, clock: Callable[[], float] = time.monotonic
    ) -> None:
        self._warnings = warnings
        self._interval_s = interval_s
        self._clock = clock
        self._lock = threading.Lock()
        self._over = threading.Event()
        self._teller: threading.Thread | None = None
        self._count = self._total = 0
        self._doing, self._since = "", 0.0

    def compiling(self, anew: bool) -> None:
        """See Watcher."""
        warn(self._warnings)
        if anew:
            say(COMPILING)
        self._begin("compiling the kernel" if anew else "loading the kernel")
        # a thread of its own: hours may pass between two calls from the run
        self._over.clear()
        self._teller = threading.Thread(target=self._tell, daemon=True)
        self._teller.start()

    def piloting(self) -> None:
        """See Watcher."""
        self._begin("tracing the pilot sample")

    def tracing(self, count: int) -> None:
        """See Watcher."""
        self._begin("tracing", count)

    def advanced(self, count: int) -> None:
        """See Watcher."""
        with self._lock:
            self._count += count

    def auditing(self) -> None:
        """See Watcher."""
        self._begin("all particles traced, measuring the error")

    def done(self) -> None:
        """See Watcher."""
        self._over.set()
        if self._teller is not None:
            self._teller.join()

    def standing(self) -> str:
        """Where the run stands: what is done, how fast, and the time left as far as it can be told."""
        with self._lock:
            doing, count, total, passed = self._doing, self._count, self._total, self._clock() - self._since
        if not total:
            return f"{doing}, {span(passed)} so far"
        told = f"{count:,} of {total:,} particles ({count / total:.0%}) after {span(passed)}"
        if not count:
            return told
        rate = count / max(passed, 1e-3)
        return f"{told}, {pace(rate)}, {span((total - count) / rate)} left"

    def _begin(self, doing: str, total: int = 0) -> None:
        with self._lock:
            self._doing, self._since = doing, self._clock()
            self._count, self._total = 0, total

    def _tell(self) -> None:
        while not self._over.wait(self._interval_s):
            say(self.standing())


class Bar:
    """A bar with rate and time left."""

    def __init__(self, warnings: Sequence[str]) -> None:
        from rich.console import Console
        from rich.progress import (
            BarColumn,
            MofNCompleteColumn,
            Progress,
            TextColumn,
            TimeElapsedColumn,
            TimeRemainingColumn,
        )

        self._progress = Progress(
            TextColumn("{task.description}"),
            BarColumn(),
            MofNCompleteColumn(),
            TextColumn("{task.fields[rate]}"),
            TimeElapsedColumn(),
            TextColumn("left"),
            TimeRemainingColumn(),
            console=Console(stderr=True),
            transient=True,
        )
        self._lock = threading.Lock()
        self._count = 0
        self._began = 0.0
        self._warnings = warnings
        self._task = self._progress.add_task("", total=None, rate="")

    def compiling(self, anew: bool) -> None:
        """See Watcher."""
        warn(self._warnings)
        if anew:
            say(COMPILING)
        self._describe("compiling the kernel" if anew else "loading the kernel")
        self._progress.start()

    def piloting(self) -> None:
        """See Watcher."""
        self._describe("pilot sample")

    def tracing(self, count: int) -> None:
        """See Watcher."""
        self._began = time.perf_counter()
        self._progress.reset(self._task, total=count, description="tracing", rate="")

    def advanced(self, count: int) -> None:
        """See Watcher."""
        with self._lock:
            self._count += count
            rate = self._count / max(time.perf_counter() - self._began, 1e-3)
            self._progress.update(self._task, completed=self._count, rate=pace(rate))

    def auditing(self) -> None:
        """See Watcher."""
        self._describe("measuring the error")

    def done(self) -> None:
        """See Watcher."""
        self._progress.stop()

    def _describe(self, text: str) -> None:
        self._progress.update(self._task, description=text)
