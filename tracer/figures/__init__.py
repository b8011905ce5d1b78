"""Figures: a result in, images out. Nothing is computed here beyond scales."""

from tracer.figures.drawing import draw, fitting

__all__ = ["draw", "fitting"]
