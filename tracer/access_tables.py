"""What `access` prints: plain values, and the same as text."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np

from tracer.access_csv import Clock
from tracer.access_records import AccessResult
from tracer.memory import peak_bytes
from tracer.outcomes import Outcome
from tracer.tables import aligned, error_rows, errors


def closing(result: AccessResult) -> dict[str, Any]:
    """How a run ended, as plain values.

    Returns
    -------
    dict
        ``targets``; ``found``, their number by outcome; ``tolerance_re`` and ``end_error_re`` as for a trace;
        ``innermost``, for each species the innermost open place of the map; ``orbits``, for each spacecraft and species
        the energies with access. When this process did the work also ``seconds`` and ``targets_per_s``.
    """
    counts = _counts(result)
    work = result.work
    took = {}
    if work:  # none when the file was complete before
        took = {
            "steps_per_target": (work["accepted"] + work["rejected"]) / max(work["traced"], 1.0),
            "seconds": work["wall_s"],
            "targets_per_s": work["targets_per_s"],
        }
    return {
        "targets": int(counts.sum()),
        "found": {outcome.word: int(counts[outcome]) for outcome in Outcome if counts[outcome]},
        **errors(result.attrs),
        **took,
        "innermost": list(_innermost(result)),
        "orbits": list(_orbits(result)),
        "memory_bytes": peak_bytes(),
    }


def closing_text(result: AccessResult) -> str:
    """The closing table, and what was found in a few lines."""
    found = closing(result)
    rows = [(f"{found['found'][o.word]}", o.sentence) for o in Outcome if o.word in found["found"]]
    if found["end_error_re"]["sample"]:
        rows += error_rows(found, "targets")
    if "seconds" in found:
        rows += [
            (f"{found['targets_per_s']:,.0f}", "targets traced per second"),
            (f"{found['seconds']:.2f}", "s in all"),
        ]
    lines = [aligned(rows)]
    if found["innermost"] or found["orbits"]:
        lines.append("")
    for one in found["innermost"]:
        where = f"open in to {one['r_re']:.4g} R_E at {one['mlt_h']:.4g} h local time, {one['utc']}"
        lines.append(f"{one['species']}: {where}, {one['energy_keV']:.4g} keV, {one['pitch_deg']:.4g} deg")
    for one in found["orbits"]:
        lines.append(f"{one['orbit']}, {one['species']}: {_orbit_text(one)}")
    return "\n".join(lines)


def _counts(result: AccessResult) -> np.ndarray:
    """Targets by outcome; a part of the map in memory at a time."""
    counts = np.zeros(len(Outcome), np.int64)
    if result.has_map:
        for at in np.ndindex(len(result.species_names), result.time_h.size):
            counts += np.bincount(result.part("region", at).ravel(), minlength=len(Outcome))
    for orbit in result.orbits:
        counts += np.bincount(orbit.access["region"].ravel(), minlength=len(Outcome))
    return counts


def _innermost(result: AccessResult) -> Iterator[dict[str, Any]]:
    utc = Clock(result.attrs["start"])
    for number, species in enumerate(result.species_names if result.has_map else ()):
        found = result.boundary["innermost_re"][number]
        if np.isnan(found).all():
            continue
        time, energy, pitch, mlt = np.unravel_index(np.nanargmin(found), found.shape)
        yield {
            "species": species,
            "r_re": float(found[time, energy, pitch, mlt]),
            "mlt_h": float(result.mlt_h[mlt]),
            "utc": utc(float(result.time_h[time])),
            "energy_keV": float(result.energy_keV[energy]),
            "pitch_deg": float(result.pitch_deg[pitch]),
        }


def _orbits(result: AccessResult) -> Iterator[dict[str, Any]]:
    for number, orbit in enumerate(result.orbits):
        for place, species in enumerate(result.species_names):
            share = result.exposure["share_open"][number, place]
            known = ~np.isnan(share)
            reaching = result.energy_keV[np.any(known & (share > 0.0), axis=1)]
            yield {
                "orbit": orbit.name,
                "species": species,
                "in_reach": bool(known.any()),
                "largest_share": float(np.max(share[known])) if known.any() else None,
                "energies_keV": [float(reaching.min()), float(reaching.max())] if reaching.size else [],
            }


def _orbit_text(one: dict[str, Any]) -> str:
    if not one["in_reach"]:
        return "never in reach"
    if not one["energies_keV"]:
        return "no access"
    low, high = one["energies_keV"]
    share = f"at most {one['largest_share']:.1%} of the time in reach"
    return f"access at {low:.4g} keV, {share}" if low == high else f"access from {low:.4g} to {high:.4g} keV, {share}"
