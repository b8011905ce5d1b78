"""The boundary of access through time: the innermost open place on each local time; when a place opens and closes."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fields.units import Floats
from tracer.access_records import AccessResult
from tracer.outcomes import Outcome


def innermost(is_open: NDArray[np.bool_], r_re: Floats) -> dict[str, np.ndarray]:
    """The innermost open place on each local time, and its neighbour on the inner side.

    Parameters
    ----------
    is_open : ndarray of bool, shape (..., r, mlt)
    r_re : ndarray, shape (r,)
        In any order.

    Returns
    -------
    dict of ndarray, shape (..., mlt)
        ``innermost_re``, NaN where no place is open; ``next_inward_re``, NaN also where the map has none.
    """
    order = np.argsort(r_re)
    rising = r_re[order]
    first = np.argmax(is_open[..., order, :], axis=-2)
    found = np.any(is_open, axis=-2)
    below = np.append(np.nan, rising[:-1])
    return {
        "innermost_re": np.where(found, rising[first], np.nan),
        "next_inward_re": np.where(found, below[first], np.nan),
    }


def openings(is_open: NDArray[np.bool_], time_h: Floats) -> dict[str, np.ndarray]:
    """When places are open.

    Parameters
    ----------
    is_open : ndarray of bool, shape (time, ...)
    time_h : ndarray, shape (time,)
        In any order.

    Returns
    -------
    dict of ndarray, shape (...)
        ``first_open_h`` and ``last_open_h``, NaN where never; ``spells``: unbroken runs of open times.
    """
    order = np.argsort(time_h)
    rising, ordered = time_h[order], is_open[order]
    ever = ordered.any(axis=0)
    before = np.concatenate([np.zeros_like(ordered[:1]), ordered[:-1]])
    return {
        "first_open_h": np.where(ever, rising[np.argmax(ordered, axis=0)], np.nan),
        "last_open_h": np.where(ever, rising[::-1][np.argmax(ordered[::-1], axis=0)], np.nan),
        "spells": np.count_nonzero(ordered & ~before, axis=0).astype(np.int32),
    }


@dataclass(frozen=True)
class Spell:
    """An unbroken run of times of the map at which a place is open to the source.

    Attributes
    ----------
    species : str
    energy_keV, pitch_deg, r_re, mlt_h : float
    closed_before_h, first_h, last_h, closed_after_h : float
        Run times: the last one before at which it is not open, the first and the last at which it is, the first one
        after at which it is not; NaN where the map has none. It opens between the first two, closes between the others.
    """

    species: str
    energy_keV: float
    pitch_deg: float
    r_re: float
    mlt_h: float
    closed_before_h: float
    first_h: float
    last_h: float
    closed_after_h: float


def spells(result: AccessResult) -> Iterator[Spell]:
    """When each place of a map opens and closes, in the order (species, energy, pitch, r, mlt)."""
    if not result.has_map:
        return
    order = np.argsort(result.time_h)
    padded = np.concatenate([[np.nan], result.time_h[order], [np.nan]])
    is_open = np.moveaxis(result.access["region"][:, order] == Outcome.OPEN, 1, -1)
    for at in np.ndindex(*is_open.shape[:-1]):
        species, energy, pitch, r, mlt = at
        place = (result.energy_keV[energy], result.pitch_deg[pitch], result.r_re[r], result.mlt_h[mlt])
        for begin, end in runs(is_open[at]):
            times = (padded[begin], padded[begin + 1], padded[end], padded[end + 1])
            yield Spell(result.species_names[species], *map(float, (*place, *times)))


def runs(flags: NDArray[np.bool_]) -> list[tuple[int, int]]:
    """First index and one after the last of every unbroken run of true values."""
    steps = np.diff(np.concatenate([[False], flags, [False]]).astype(np.int8))
    return list(zip(np.flatnonzero(steps == 1).tolist(), np.flatnonzero(steps == -1).tolist()))
