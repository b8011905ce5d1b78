"""The file of a result about access (HDF5): written whole under another name, read on demand."""

from __future__ import annotations

import json
import math
import os
from collections.abc import Callable, Iterator, Mapping
from pathlib import Path
from typing import Any

import h5py
import numpy as np

from tracer.access_layout import ORBIT_TIME, Planned, datasets, depth, scales
from tracer.access_plan import Sector
from tracer.access_records import AccessResult, OrbitAccess
from tracer.outcomes import Outcome
from tracer.records import Column
from tracer.store_attrs import ACCESS_FORMAT, ACCESS_VERSION, iso_utc, provenance
from tracer.store_layout import LIBVER, create, label, label_flags, write_attrs
from tracer.store_log import write_at
from tracer.store_output import refuse_other_run
from tracer.store_overlay import Overlay
from tracer.store_patient import Patient
from tracer.store_places import place_of
from tracer.store_reader import checked_attrs, readable, refuse_content
from tracer.store_seal import seal
from tracer.targets import Targets

CHUNK = 2**17  # numbers in a chunk of a dataset, about
AGAIN = "driftrose access once more"
SCALES = {
    "species": Column("", "species", "1", "species", "i4"),
    "time": Column("", "time", "h", "run time"),
    "energy": Column("", "energy", "keV", "kinetic energy at the target; centre of a channel"),
    "pitch": Column("", "pitch", "deg", "equatorial pitch angle at the target"),
    "r": Column("", "r", "R_E", "equatorial distance of the target"),
    "mlt": Column("", "mlt", "h", "magnetic local time of the target"),
    "spacecraft": Column("", "spacecraft", "1", "spacecraft", "i4"),
}
COMMENTS = {
    "region": "; ".join(f"{int(o)}: {o.sentence}" for o in Outcome),
    "innermost_re": "NaN: no place of the map on that local time is open to the source",
    "next_inward_re": "NaN: as innermost_re, or the map begins with the innermost place",
    "first_open_h": "NaN: never open",
    "last_open_h": "NaN: never open",
    "b_ratio": "inf: the field line does not cross the equator",
    "r_re": "inf: the field line does not cross the equator",
}
NOT_OPEN = "NaN where the particles did not come in through the outer boundary"

Put = Callable[[str, Any, np.ndarray], None]


def described(targets: Targets) -> dict[str, Any]:
    """The root attributes that do not depend on the numbers.

    Lists are JSON text: ``species_names`` and ``orbits`` (name and every_min of each).
    """
    asked = targets.request
    names = [species.name for species in asked.species]
    found = provenance(targets.run)
    for unused in ("every_min", "tracks", "population_names", "seeds"):  # of particles that are not traced here
        del found[unused]
    return {
        **found,
        "format": ACCESS_FORMAT,
        "format_version": ACCESS_VERSION,
        "species_names": json.dumps(names, ensure_ascii=False),
        "back_hours": float(asked.back_hours),
        "record_begin_h": float(targets.record_h),
        "source_r_re": float(asked.source.r_re),
        "source_from_mlt_h": float(asked.source.from_h),
        "source_to_mlt_h": float(asked.source.to_h),
        "orbits": json.dumps([{"name": o.name, "every_min": o.every_min} for o in targets.orbits], ensure_ascii=False),
    }


def expected_bytes(targets: Targets) -> int:
    """About how large the file will be."""
    numbers = sum(math.prod(one.shape) * np.dtype(one.column.dtype).itemsize for one in datasets(targets))
    return numbers + 2**17 + len(targets.run.origin.text.encode("utf-8", "surrogatepass"))


def write(handle: int, targets: Targets, attrs: Mapping[str, Any], fill: Callable[[Put], None]) -> None:
    """Write the whole file.

    Parameters
    ----------
    handle : int
        Descriptor of an empty file.
    targets : Targets
    attrs : mapping
        Root attributes.
    fill : callable
        Called with a function that puts numbers into a dataset: path, index, values.
    """
    stream = Patient(handle)
    with h5py.File(stream, "w", libver=LIBVER, locking=False) as file:
        _skeleton(file, targets)
        write_attrs(file, {**attrs, "complete": True})

        def put(path: str, index: Any, values: np.ndarray) -> None:
            file[path][index] = values
            if stream.error is not None:
                raise stream.error

        fill(put)
    if stream.error is not None:
        raise stream.error
    os.ftruncate(handle, stream.size)
    written = Overlay(handle)
    with h5py.File(written, "r", locking=False) as file:
        places = {one.path: place_of(file[one.path]) for one in datasets(targets) if math.prod(one.shape)}
    write_at(handle, [seal(written, places)], stream.size)


def open(path: str | os.PathLike[str]) -> AccessResult:
    """The file as a result whose larger columns are read when asked for.

    Raises
    ------
    InputError
        When it is missing, holds something else, or is damaged.
    """
    name = str(path)
    refuse_content(path, ACCESS_FORMAT, AGAIN)
    with readable(path, "", again=AGAIN) as file:
        attrs = checked_attrs(file, name, ACCESS_FORMAT, ACCESS_VERSION, AGAIN)
        axes = {axis: np.asarray(file[axis]) if axis in file else np.empty(0) for axis in SCALES}
        orbits = tuple(_orbit(path, file, **told) for told in json.loads(attrs["orbits"]))
        boundary, exposure = (_small(file, group) for group in ("boundary", "exposure"))
        access = Parts(path, "access", list(file["access"]) if "access" in file else [])
    source = Sector(attrs["source_r_re"], attrs["source_from_mlt_h"], attrs["source_to_mlt_h"])
    return AccessResult(
        tuple(json.loads(attrs["species_names"])),
        axes["energy"],
        axes["pitch"],
        axes["time"],
        axes["r"],
        axes["mlt"],
        source,
        access,
        boundary,
        orbits,
        exposure,
        attrs,
    )


def finished(path: Path, new: Path, targets: Targets) -> AccessResult | None:
    """The file of a run when it is complete, so that there is nothing to resume; else None.

    Raises
    ------
    InputError
        When what stands there is the file of another run, and nothing of this one waits beside it.
    """
    if not path.exists():
        return None
    if new.exists():
        if not new.samefile(path):
            return None
        new.unlink()  # a kill between the last two steps
    result = open(path)
    refuse_other_run(result.attrs, described(targets), str(path))
    return result


class Parts(Mapping[str, np.ndarray]):
    """The columns of a group, read from the file when asked for, and kept nowhere."""

    def __init__(self, path: str | os.PathLike[str], group: str, names: list[str]) -> None:
        self._shown = str(path)
        self._path = Path(path).resolve()
        self._group = group
        self._names = tuple(name for name in names if name not in (*SCALES, ORBIT_TIME.name))

    def __getitem__(self, name: str) -> np.ndarray:
        return self.part(name, ...)

    def part(self, name: str, index: Any) -> np.ndarray:
        """A part of a column, without reading the rest; `index` as h5py takes it."""
        if name not in self._names:
            raise KeyError(name)
        with readable(self._path, f"/{self._group}/{name}", self._shown, AGAIN) as file:
            return _plain(file[f"{self._group}/{name}"], index)

    def __iter__(self) -> Iterator[str]:
        return iter(self._names)

    def __len__(self) -> int:
        return len(self._names)


def _plain(dataset: h5py.Dataset, index: Any = ...) -> np.ndarray:
    data = np.asarray(dataset[index])
    return data.astype(np.uint8) if dataset.name.endswith("/region") else data


def _small(file: h5py.File, group: str) -> dict[str, np.ndarray]:
    if group not in file:
        return {}
    return {name: _plain(item) for name, item in file[group].items() if name not in SCALES}


def _orbit(path: str | os.PathLike[str], file: h5py.File, name: str, every_min: float) -> OrbitAccess:
    group = file[f"orbit/{name}"]
    place = ("r_re", "mlt_h", "b_ratio")
    time, r, mlt, ratio = (np.asarray(group[column]) for column in (ORBIT_TIME.name, *place))
    names = [column for column in group if column not in place]
    return OrbitAccess(name, every_min, time, r, mlt, ratio, Parts(path, f"orbit/{name}", names))


def _skeleton(file: h5py.File, targets: Targets) -> None:
    start = iso_utc(targets.run.start)
    shared = scales(targets)
    for axis, values in shared.items():
        _scale(file, SCALES[axis], values, start)
    label_flags(file["species"], shared["species"].tolist(), [s.name for s in targets.request.species])
    if targets.orbits:
        label_flags(file["spacecraft"], shared["spacecraft"].tolist(), [orbit.name for orbit in targets.orbits])
    for orbit in targets.orbits:
        _scale(file.require_group(f"orbit/{orbit.name}"), ORBIT_TIME, orbit.time_h, start)
    for one in datasets(targets):
        group = file.require_group(one.path.rpartition("/")[0])
        dataset = _dataset(group, one)
        for axis, name in zip(dataset.dims, one.axes):
            if name in file and name not in group:
                group[name] = file[name]
            axis.attach_scale(group[name])


def _scale(parent: h5py.Group, column: Column, values: np.ndarray, start: str) -> None:
    scale = create(parent, column, values.shape, (max(values.size, 1),), True)
    if column in (SCALES["time"], ORBIT_TIME):
        label(scale, units=f"hours since {start}", standard_name="time", calendar="standard", axis="T")
    if values.size:
        scale[:] = values
    scale.make_scale(column.name)


def _dataset(group: h5py.Group, one: Planned) -> h5py.Dataset:
    leading = depth(one.shape, CHUNK)
    chunk = tuple(max(1 if axis < leading else size, 1) for axis, size in enumerate(one.shape))
    column = one.column
    codes = {outcome.word: int(outcome) for outcome in Outcome} if column.name == "region" else None
    dataset = create(group, column, one.shape, chunk, True, codes)
    if codes:
        label_flags(dataset, list(codes.values()), list(codes))
    comment = COMMENTS.get(column.name) or (NOT_OPEN if column.group == "access" else "")
    if comment:
        label(dataset, comment=comment)
    return dataset
