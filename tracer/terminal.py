"""Progress on a terminal; nothing when there is none."""

from __future__ import annotations

import sys
import threading
import time

from tracer.progress import Silent, Watcher


def watcher(quiet: bool) -> Watcher:
    """A progress bar on stderr when that is a terminal, else silence."""
    if quiet or not sys.stderr.isatty():
        return Silent()
    return Bar()


class Bar:
    """A bar with rate and time left."""

    def __init__(self) -> None:
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
        self._progress.start()
        self._task = self._progress.add_task("compiling or loading the kernel", total=None, rate="")

    def compiling(self) -> None:
        """See Watcher."""
        self._progress.update(self._task, description="compiling or loading the kernel")

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
