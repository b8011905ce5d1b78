"""Stopping early: what Ctrl-C, SIGTERM and a full disk have in common."""

from __future__ import annotations


class Stopped(RuntimeError):  # noqa: N818 - the name is part of the public interface
    """A run that stopped before its end, for a reason outside its input."""


class WorkersLost(Stopped):
    """Those who computed a run are gone, and it cannot be given to others."""
