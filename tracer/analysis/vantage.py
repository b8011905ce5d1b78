"""A sensible place to watch arrivals from, when the user names none."""

from __future__ import annotations

import numpy as np

from fields.units import Floats
from tracer.analysis.arrivals import Crossings
from tracer.analysis.polylines import evenly_over_energy, polylines
from tracer.records import Result
from tracer.status import Cause

SAMPLE = 1000
GRID_RE = 0.5
SECTOR_H = 3.0
SECTOR_STEP_H = 1.0
CLEARANCE_H = 3.0
LOCAL_SHARE = 0.02  # of all particles; a sector near which more of them start is passed over


def watched_radius(result: Result) -> float | None:
    """The circle to watch, R_E: half of the particles come as close, or nearly; inside all release points if any do.

    A multiple of 0.5 R_E; None when a sample of the particles crosses no such circle.
    """
    released = np.flatnonzero(np.asarray(result.end["cause"]) != Cause.NEVER_RELEASED)
    if released.size == 0 or result.time_h.size == 0:
        return None
    paths = polylines(result, evenly_over_energy(result, released, SAMPLE))
    nearest, farthest = np.nanmin(paths.r_re, axis=1), np.nanmax(paths.r_re, axis=1)
    release = np.asarray(result.particle["r_re"], dtype=float)[paths.index]
    inside = (np.ceil(float(release.min()) / GRID_RE) - 1.0) * GRID_RE
    wanted = min(inside, float(np.ceil(np.median(nearest) / GRID_RE)) * GRID_RE)
    outside = (np.floor(float(release.max()) / GRID_RE) + 1.0) * GRID_RE
    for radius in (wanted, inside, outside, *np.arange(GRID_RE, farthest.max(), GRID_RE)):
        if np.any((nearest < radius) & (farthest > radius)):
            return float(radius)
    return None


def busiest_sector(result: Result, found: Crossings) -> tuple[float, float]:
    """The three hours of local time, from a full hour, in which most particles first arrive.

    Sectors near which particles start are passed over, for arrivals there say little of the drift; unless no other
    sees any.
    """
    begins: Floats = np.arange(0.0, 24.0, SECTOR_STEP_H)
    sectors = [(float(begin), float((begin + SECTOR_H) % 24.0)) for begin in begins]
    counts = np.array([found.within(sector).first().count for sector in sectors])
    release = np.asarray(result.particle["mlt_h"], dtype=float)
    near = SECTOR_H + 2.0 * CLEARANCE_H
    starts = np.array([np.count_nonzero((release - begin + CLEARANCE_H) % 24.0 < near) for begin in begins])
    away = np.where(starts <= LOCAL_SHARE * release.size, counts, 0)
    return sectors[int(np.argmax(away if away.any() else counts))]
