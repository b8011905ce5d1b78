"""Draw the figures that fit a result, and put them into files."""

from __future__ import annotations

import errno
import io
import os
import re
import warnings
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import matplotlib
from matplotlib.figure import Figure

from fields.errors import InputError, nearest
from tracer.access_records import AccessResult
from tracer.analysis.facts import Facts, facts
from tracer.figures.access_maps import draw_access_maps
from tracer.figures.access_orbits import draw_access_orbits
from tracer.figures.arrivals import draw_arrivals
from tracer.figures.drivers import draw_drivers
from tracer.figures.ends import draw_ends
from tracer.figures.paths import draw_paths
from tracer.figures.style import SETTINGS, settle
from tracer.opening import open as open_result
from tracer.records import CAUTION, Result
from tracer.stopping import Stopped

FORMATS = ("png", "svg", "pdf")
Kinds = dict[str, Callable[[], list[Figure]]]


def draw(
    result: Result | AccessResult | str | Path,
    directory: str | Path,
    format: str = "png",
    overwrite: bool = False,
    *,
    arrival_r_re: float | None = None,
    arrival_mlt_h: tuple[float, float] | None = None,
) -> list[Path]:
    """Draw all figures that fit a result.

    Parameters
    ----------
    result : Result, AccessResult, str or Path
        Traced particles or access, or the file that holds them.
    directory : str or Path
        Where the figures go; made when missing.
    format : {"png", "svg", "pdf"}
    overwrite : bool
        Whether files of the same names may be replaced.
    arrival_r_re : float, optional
        Circle at which arrivals are shown, R_E; chosen from the data when absent.
    arrival_mlt_h : tuple of two floats, optional
        Sector of local time, hours, eastward from the first to the second; the busiest three hours when absent.

    Returns
    -------
    list of Path
        The files written, as far as they fit: paths, drivers, arrivals, ends; of access, maps and orbits.

    Raises
    ------
    InputError
        On an unknown format, a place outside the domain, or a file that exists; nothing is written then.
    Stopped
        When the disk is full; nothing is left behind then.
    """
    if format not in FORMATS:
        raise InputError("unknown format", nearest(format, FORMATS), key="format", value=format)
    given = result if isinstance(result, (Result, AccessResult)) else open_result(result)
    run = facts(given)
    _check_place(run, arrival_r_re, arrival_mlt_h)
    stem = _stem(run.title) if isinstance(result, (Result, AccessResult)) else Path(result).stem
    targets = {
        Path(directory) / f"{stem}-{name}.{format}": (name, figure)
        for name, figure in fitting(given, arrival_r_re, arrival_mlt_h).items()
    }
    _check_targets(list(targets), overwrite)
    return _put({target: _rendered(figure, format, name, run) for target, (name, figure) in targets.items()})


def fitting(
    result: Result | AccessResult, r_re: float | None = None, sector_h: tuple[float, float] | None = None
) -> dict[str, Figure]:
    """The figures that fit a result, by name, not yet in files; the place of arrivals as in `draw`."""
    kinds = _of_access(result) if isinstance(result, AccessResult) else _of_tracks(result, r_re, sector_h)
    found = {}
    with matplotlib.rc_context(SETTINGS), _any_script():
        for kind, make in kinds.items():
            for number, figure in enumerate(make(), start=1):
                settle(figure)
                found[kind if number == 1 else f"{kind}-{number}"] = figure
    return found


def _of_access(result: AccessResult) -> Kinds:
    return {"access": lambda: draw_access_maps(result), "orbits": lambda: draw_access_orbits(result)}


def _of_tracks(result: Result, r_re: float | None, sector_h: tuple[float, float] | None) -> Kinds:
    return {
        "paths": lambda: draw_paths(result),
        "drivers": lambda: draw_drivers(result),
        "arrivals": lambda: draw_arrivals(result, r_re, sector_h),
        "ends": lambda: draw_ends(result),
    }


@contextmanager
def _any_script() -> Iterator[None]:
    """Titles may be in any script; letters that the font lacks become boxes, without a warning for each."""
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="Glyph .* missing from", category=UserWarning)
        yield


def _rendered(figure: Figure, format: str, name: str, run: Facts) -> bytes:
    """The file's bytes: the same for the same result, whenever they are made."""
    with matplotlib.rc_context(SETTINGS), io.BytesIO() as buffer, _any_script():
        figure.savefig(buffer, format=format, metadata=_metadata(format, name, run))
        return buffer.getvalue()


def _metadata(format: str, name: str, run: Facts) -> dict[str, Any]:
    title = f"{run.title}: {name}" if run.title else name
    software, about = f"driftrose {run.version}".strip(), f"run {run.fingerprint}. {CAUTION}"
    if format == "png":
        return {"Title": title, "Software": software, "Description": about}
    if format == "svg":
        return {"Title": title, "Creator": software, "Description": about, "Date": None}
    return {"Title": title, "Creator": software, "Subject": about, "CreationDate": None}


def _check_place(run: Facts, r_re: float | None, sector_h: tuple[float, float] | None) -> None:
    if r_re is not None and not run.inner_re <= r_re <= run.outer_re:
        remedy = f"a number from {run.inner_re:g} to {run.outer_re:g} R_E"
        raise InputError("outside the domain", remedy, key="arrival_r_re", value=r_re)
    if sector_h is not None and not all(0.0 <= hour <= 24.0 for hour in sector_h):
        raise InputError("not hours of local time", "two numbers from 0 to 24", key="arrival_mlt_h", value=sector_h)


def _check_targets(targets: list[Path], overwrite: bool) -> None:
    for target in targets:
        if target.is_dir() or (target.exists() and not overwrite):
            raise InputError("exists", "another directory, or --overwrite", file=str(target))


def _stem(title: str) -> str:
    return "-".join(re.findall(r"[a-z0-9]+", title.lower())[:6]) or "run"


def _put(pages: dict[Path, bytes]) -> list[Path]:
    """Write all pages under temporary names, then move them into place."""
    waiting: list[tuple[Path, Path]] = []
    try:
        for target, content in pages.items():
            target.parent.mkdir(parents=True, exist_ok=True)
            part = target.with_name(f".{target.name}.{os.getpid()}.part")
            waiting.append((part, target))
            part.write_bytes(content)
        for part, target in waiting:
            part.replace(target)
    except OSError as error:
        if error.errno in (errno.ENOSPC, errno.EDQUOT):
            raise Stopped(f"the disk is full; no figure was written to {target.parent}") from error
        problem, remedy = f"cannot be written ({error.strerror})", "a directory that can be written to"
        raise InputError(problem, remedy, file=str(target)) from error
    finally:
        for part, _ in waiting:
            part.unlink(missing_ok=True)
    return list(pages)
