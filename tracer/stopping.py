"""Stopping early: what Ctrl-C, SIGTERM and a full disk have in common."""

from __future__ import annotations


class Stopped(RuntimeError):
    """A run that stopped before its end, for a reason outside its input."""
