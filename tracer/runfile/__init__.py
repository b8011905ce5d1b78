"""The way in: a run file, or the same tables from code, to a validated scenario."""

from tracer.runfile.assemble import build, load

__all__ = ["build", "load"]
