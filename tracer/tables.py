"""What `check` and `trace` print: plain values, and the same as text."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from tracer.memory import peak_bytes
from tracer.records import CAUTION, Result
from tracer.status import Cause
from tracer.store import size_text


def closing(result: Result) -> dict[str, Any]:
    """How a run ended, as plain values.

    Returns
    -------
    dict
        ``particles``; ``ended``, their number by cause; ``tolerance_re``, asked for, and ``local_tolerance_re``;
        ``end_error_re``, as measured, by quantile in per cent; ``memory_bytes``, see `tracer.memory.peak_bytes`. When
        this process did the work also ``seconds``, by the clock, from loading the kernel to the closed file;
        ``particles_per_s`` while they were traced; ``steps_per_particle`` and ``rejected_share``.
    """
    causes = np.bincount(np.asarray(result.end["cause"]), minlength=len(Cause))
    attrs, work = result.attrs, result.work
    took = {}
    if work:  # none when the file was complete before
        took = {
            "steps_per_particle": (work["accepted"] + work["rejected"]) / max(work["particles"], 1),
            "rejected_share": work["rejected"] / max(work["accepted"] + work["rejected"], 1.0),
            "seconds": work["wall_s"],
            "particles_per_s": work["particles_per_s"],
        }
    return {
        "particles": result.count,
        "ended": {cause.word: int(causes[cause]) for cause in Cause if causes[cause]},
        **errors(attrs),
        **took,
        "memory_bytes": peak_bytes(),
    }


def errors(attrs: Mapping[str, Any]) -> dict[str, Any]:
    """What a result says of its numerical error: asked for, and met."""
    return {
        "tolerance_re": float(attrs["tolerance_re"]),
        "local_tolerance_re": float(attrs["local_tolerance_re"]),
        "end_error_re": {
            "50": float(attrs["end_error_50_re"]),
            "99": float(attrs["end_error_99_re"]),
            "100": float(attrs["end_error_100_re"]),
            "sample": int(attrs["end_error_sample"]),
        },
    }


def closing_text(result: Result) -> str:
    """The closing table."""
    found = closing(result)
    rows = [
        (f"{found['ended'].get(cause.word, 0)}", cause.sentence) for cause in Cause if found["ended"].get(cause.word)
    ]
    rows += error_rows(found)
    rows += [
        (f"{found['steps_per_particle']:.0f}", f"steps a particle, {found['rejected_share']:.0%} of them rejected"),
        (f"{found['particles_per_s']:,.0f}", "particles per second"),
        (f"{found['seconds']:.2f}", "s in all"),
    ]
    return aligned(rows)


def error_rows(found: Mapping[str, Any], what: str = "particles") -> list[tuple[str, str]]:
    """The lines of a closing table about the numerical error."""
    error = found["end_error_re"]
    return [
        (_re(error["50"]), f"R_E, end error of half the {what} ({error['sample']} re-run 1000 times finer)"),
        (_re(error["99"]), f"R_E, end error of 99 %; asked for {found['tolerance_re']:.0e}"),
        (_re(error["100"]), "R_E, largest end error in the sample"),
    ]


def aligned(rows: Sequence[tuple[str, str]]) -> str:
    """A closing table."""
    width = max(len(left) for left, _ in rows)
    return "\n".join(f"  {left:>{width}}  {right}" for left, right in rows)


def _re(value: float) -> str:
    return f"{value:.1e}" if np.isfinite(value) else "another cause"


def preview_text(found: dict[str, Any]) -> str:
    """The text of `check`."""
    lines = [found["title"] or "untitled", f"  from {found['start']} for {found['end_h']:g} h"]
    lines += _field_lines(found["field"])
    for population in found["populations"]:
        lines += ["", *_population_lines(population)]
    if work := found["work"]:
        lines += [
            "",
            f"  {found['particles']:,} particles at {found['saved_times']} saved times",
            f"  about {work['seconds']:.1f} s on {work['threads']} threads: "
            f"{work['steps_per_particle']:.0f} steps a particle, "
            f"{work['right_hand_sides']:.2g} right-hand sides, local tolerance {work['local_tolerance_re']:.1e} R_E",
            f"  about {size_text(found['memory_bytes'])} of memory, {size_text(found['disk_bytes'])} of disk",
        ]
    if found["access"]:
        lines += ["", *_access_lines(found["access"])]
    lines += [f"  warning: {warning}" for warning in found["warnings"]]
    return "\n".join([*lines, "", f"  {CAUTION}"])


def _access_lines(access: dict[str, Any]) -> list[str]:
    source = access["source"]
    lines = [
        f"access: {access['targets']:,} targets, {access['traced']:,} of them to trace, "
        f"back {access['back_hours']:g} h or to the record's beginning at {access['record_begin_h']:g} h",
        f"  source: {source['r_re']:g} R_E, from {source['from_mlt_h']:g} to {source['to_mlt_h']:g} h local time",
    ]
    if access["map"]:
        lines.append("  map: " + " x ".join(f"{size} {axis}" for axis, size in access["map"].items()))
    for orbit in access["orbits"]:
        reach = ", ".join(f"{share:.0%} at {pitch} deg" for pitch, share in orbit["share_in_reach"].items())
        span = "{:.3g} to {:.3g} R_E".format(*orbit["r_re"]) if orbit["r_re"] else "never in the domain"
        when = f"every {orbit['every_min']:g} min from {orbit['from']} to {orbit['to']}"
        lines += [
            f"  orbit {orbit['name']}: {orbit['times']} times, {when}",
            f"    on the equator {span}, {orbit['share_inside']:.0%} of them in the domain; within reach {reach}",
        ]
    return [
        *lines,
        f"  about {access['seconds']:.1f} s on {access['threads']} threads: "
        f"{access['steps_per_target']:.0f} steps a target, local tolerance {access['local_tolerance_re']:.1e} R_E",
        f"  about {size_text(access['disk_bytes'])} of disk at the most",
    ]


def _field_lines(field: dict[str, Any]) -> list[str]:
    shown = [field["magnetic"], *field["electric"]]
    return [f"  {m['model']}  " + ", ".join(f"{k} = {v}" for k, v in m.items() if k != "model") for m in shown]


def _population_lines(population: dict[str, Any]) -> list[str]:
    head = f"{population['name']}: {population['count']:,} {population['species']}, {population['draw']}"
    lines = [f"  {head}" + (f", seed {population['seed']}" if population["draw"] != "grid" else "")]
    for name, values in population["periods_s"].items():
        text = "none, nothing moves" if values is None else " / ".join(map(_duration, values))
        lines.append(f"    {name + ' period':14} {text}" + ("" if values is None else "   (least / median / most)"))
    for ratio in population["validity"]:
        flag = f"   {ratio['share_above']:.0%} above 0.1" if ratio["share_above"] else ""
        values = f"{ratio['median']:.1e}, at most {ratio['largest']:.1e} ({ratio['worst']})"
        lines.append(f"    {ratio['name']:34} {values}{flag}")
    return lines


def _duration(seconds: float) -> str:
    for unit, size in (("d", 86400.0), ("h", 3600.0), ("min", 60.0), ("s", 1.0), ("ms", 1e-3)):
        if seconds >= size:
            return f"{seconds / size:.3g} {unit}"
    return f"{seconds * 1e6:.3g} us"
