"""Windows of energy: at a place and a time, which energies have access."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from tracer.access_records import AccessResult
from tracer.analysis.boundary_history import runs
from tracer.outcomes import Outcome


@dataclass(frozen=True)
class Window:
    """An unbroken run of energies that are open to the source at a place and time. All edges are energies of the grid.

    Attributes
    ----------
    species : str
    time_h, r_re, mlt_h, pitch_deg : float
    closed_below_keV, lowest_keV, highest_keV, closed_above_keV : float
        The nearest energy below that is not open, the lowest and the highest that are, the nearest above that is not;
        NaN where the grid has none. The window's edges lie between the first two, and between the others.
    """

    species: str
    time_h: float
    r_re: float
    mlt_h: float
    pitch_deg: float
    closed_below_keV: float
    lowest_keV: float
    highest_keV: float
    closed_above_keV: float


def windows(result: AccessResult, r_re: float | None = None, mlt_h: float | None = None) -> Iterator[Window]:
    """The windows at places of a map, in the order (species, time, r, mlt, pitch, energy).

    Parameters
    ----------
    result : AccessResult
    r_re, mlt_h : float, optional
        Only there, or at the nearest that the map has.
    """
    if not result.has_map:
        return
    chosen_r = range(result.r_re.size) if r_re is None else [int(np.argmin(abs(result.r_re - r_re)))]
    chosen_mlt = range(result.mlt_h.size) if mlt_h is None else [_nearest_mlt(result.mlt_h, mlt_h)]
    order = np.argsort(result.energy_keV)
    padded = np.concatenate([[np.nan], result.energy_keV[order], [np.nan]])
    region = result.access["region"]
    for species, time in np.ndindex(region.shape[:2]):
        for r in chosen_r:
            for mlt in chosen_mlt:
                is_open = region[species, time, :, :, r, mlt][order] == Outcome.OPEN
                for pitch in range(result.pitch_deg.size):
                    place = (result.time_h[time], result.r_re[r], result.mlt_h[mlt], result.pitch_deg[pitch])
                    for begin, end in runs(is_open[:, pitch]):
                        edges = (padded[begin], padded[begin + 1], padded[end], padded[end + 1])
                        yield Window(result.species_names[species], *map(float, (*place, *edges)))


def _nearest_mlt(mlt_h: np.ndarray, wanted: float) -> int:
    return int(np.argmin(abs((mlt_h - wanted + 12.0) % 24.0 - 12.0)))
