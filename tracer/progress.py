"""How a long run tells where it stands."""

from __future__ import annotations

from typing import Protocol


class Watcher(Protocol):
    """What a run reports, in this order; `advanced` comes from many threads."""

    def compiling(self) -> None:
        """The kernel is being compiled or loaded."""

    def piloting(self) -> None:
        """The pilot sample is being traced."""

    def tracing(self, count: int) -> None:
        """`count` particles are about to move."""

    def advanced(self, count: int) -> None:
        """`count` more particles are done."""

    def done(self) -> None:
        """The run is over."""


class Silent:
    """Says nothing."""

    def compiling(self) -> None:
        """See Watcher."""

    def piloting(self) -> None:
        """See Watcher."""

    def tracing(self, count: int) -> None:
        """See Watcher."""

    def advanced(self, count: int) -> None:
        """See Watcher."""

    def done(self) -> None:
        """See Watcher."""
