"""How a long run tells where it stands."""

from __future__ import annotations

from typing import Protocol


class Watcher(Protocol):
    """What a run reports, in this order; `advanced` comes from many threads."""

    def compiling(self, anew: bool) -> None:
        """The kernel is being compiled; or, when not `anew`, loaded from the disk."""

    def piloting(self) -> None:
        """The pilot sample is being traced."""

    def tracing(self, count: int) -> None:
        """`count` particles are about to move."""

    def advanced(self, count: int) -> None:
        """`count` more particles are done."""

    def auditing(self) -> None:
        """All particles are done; a sample is traced again to measure the error."""

    def done(self) -> None:
        """The run is over, whatever ended it."""


class Silent:
    """Says nothing."""

    def compiling(self, anew: bool) -> None:
        """See Watcher."""

    def piloting(self) -> None:
        """See Watcher."""

    def tracing(self, count: int) -> None:
        """See Watcher."""

    def advanced(self, count: int) -> None:
        """See Watcher."""

    def auditing(self) -> None:
        """See Watcher."""

    def done(self) -> None:
        """See Watcher."""
