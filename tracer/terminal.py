"""What a run says on stderr while it goes: its warnings, and progress where that is a terminal.

Nothing is said before the run has passed every check, so that a fault is the only line there is.
"""

from __future__ import annotations

import sys
import threading
import time
from collections.abc import Sequence

from fields.errors import PREFIX
from tracer.progress import Silent, Watcher


def watcher(quiet: bool, warnings: Sequence[str] = ()) -> Watcher:
    """Says the warnings, and shows a progress bar unless `quiet` or stderr is no terminal."""
    if quiet or not sys.stderr.isatty():
        return Warned(warnings)
    return Bar(warnings)


def say(warnings: Sequence[str]) -> None:
    """One line on stderr for each warning."""
    for warning in warnings:
        print(f"{PREFIX}: warning: {warning}", file=sys.stderr)


class Warned(Silent):
    """Says the warnings and no more."""

    def __init__(self, warnings: Sequence[str]) -> None:
        self._warnings = warnings

    def compiling(self) -> None:
        """See Watcher."""
        say(self._warnings)


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
        self._task = self._progress.add_task("compiling or loading the kernel", total=None, rate="")

    def compiling(self) -> None:
        """See Watcher."""
        say(self._warnings)
        self._progress.start()

    def piloting(self) -> None:
        """See Watcher."""
        self._progress.update(self._task, description="pilot sample")

    def tracing(self, count: int) -> None:
        """See Watcher."""
        self._began = time.perf_counter()
        self._progress.reset(self._task, total=count, description="tracing", rate="")

    def advanced(self, count: int) -> None:
        """See Watcher."""
        with self._lock:
            self._count += count
            rate = self._count / max(time.perf_counter() - self._began, 1e-3)
            self._progress.update(self._task, completed=self._count, rate=f"{rate:,.0f}/s")

    def done(self) -> None:
        """See Watcher."""
        self._progress.stop()
