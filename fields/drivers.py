"""A quantity as a function of time: piecewise linear between corners, never extrapolated."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from fields.errors import InputError
from fields.units import Floats


@dataclass(frozen=True, eq=False)
class Driver:
    """A piecewise-linear function of time in hours since the start of the run.

    Between ``start_h[i]`` and ``start_h[i + 1]`` (the last segment ends at `end_h`) it is
    ``value[i] + slope[i] * (t - start_h[i])``. Steps and kinks sit at the corners only; an integrator lands on them.

    Attributes
    ----------
    name : str
        As the user knows it, for example ``series:kp``.
    start_h, value, slope : ndarray, shape (n_segment,)
        Hours; the quantity; the quantity per hour.
    end_h : float
        End of the cover.
    hold : str
        ``step`` or ``linear``: how the values were joined.
    """

    name: str
    start_h: Floats
    value: Floats
    slope: Floats
    end_h: float
    hold: str = field(default="step")

    def corners(self) -> Floats:
        """All segment boundaries in hours, shape (n_segment + 1,)."""
        return np.append(self.start_h, self.end_h)

    def end_values(self) -> Floats:
        """Limits at the end of each segment, shape (n_segment,)."""
        return np.asarray(self.value + self.slope * np.diff(self.corners()))

    def corner_values(self) -> Floats:
        """The values at both ends of every segment, which bound the quantity."""
        return np.concatenate([self.value, self.end_values()])

    def segment(self, time_h: ArrayLike, backward: bool = False) -> np.ndarray:
        """Index of the segment entered at `time_h`: the later one at a corner, the earlier one when `backward`."""
        side: Literal["left", "right"] = "left" if backward else "right"
        index = np.searchsorted(self.start_h, np.asarray(time_h, dtype=float), side=side) - 1
        return np.asarray(np.clip(index, 0, self.start_h.size - 1))

    def at(self, time_h: ArrayLike, backward: bool = False) -> Floats:
        """The value at `time_h`; at a corner the limit from the later side, from the earlier one when `backward`.

        Raises
        ------
        InputError
            When a time lies outside the cover.
        """
        t = np.asarray(time_h, dtype=float)
        if np.any(t < self.start_h[0]) or np.any(t > self.end_h) or np.any(np.isnan(t)):
            raise InputError(
                f"asked outside its cover {self.start_h[0]:g} to {self.end_h:g} h", "a time inside it", key=self.name
            )
        i = self.segment(t, backward)
        return np.asarray(self.value[i] + self.slope[i] * (t - self.start_h[i]))
