"""The skeleton of a trajectory file: groups, datasets, chunks and labels, all but the numbers."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import Any

import h5py
import numpy as np

from fields.drivers import Driver
from fields.field import Field
from tracer.records import GROUPS, Column, flag_word
from tracer.scenario import Scenario
from tracer.status import Cause
from tracer.store_attrs import DIGEST, digest, iso_utc
from tracer.store_checksum import fletcher32
from tracer.store_overlay import Overlay

ROWS = 4096  # particles in a chunk of a column, at most
LEAST_ROWS, STRIPES = 64, 64  # a run of few particles is cut into about so many stripes, but not of fewer rows
STRIPE_BYTES = 2**25
TRACK_CHUNK_BYTES = 2**20
STATE_COLUMNS = len(GROUPS["track"])
LIBVER = ("v110", "v110")  # every piece of metadata carries a checksum; HDF5 1.10 (2016) and later read it

TIME = Column("", "time", "", "run time", "f8")  # its unit holds the start
PARTICLE_INDEX = Column("", "particle_index", "1", "index of the particle in the run", "i8")
SINGLE_QUANTUM = float(np.finfo(np.float32).eps)


def stripe_rows(count: int, n_time: int) -> int:
    """Particles of a stripe: those whose columns share a chunk, are written together and are logged as one.

    A power of two, unless one stripe holds all: small enough that stopping a run costs a small part of it and that
    a stripe's tracks fit into `STRIPE_BYTES`.
    """
    return min(count, _power_of_two(max(count // STRIPES, LEAST_ROWS)), _fitting(n_time))


def most_rows(scenario: Scenario) -> int:
    """The most particles that a chunk in memory should hold: those of a stripe when there are many."""
    return _fitting(scenario.save_times_h.size)


def _fitting(n_time: int) -> int:
    return min(_power_of_two(max(STRIPE_BYTES // (8 * STATE_COLUMNS * max(n_time, 1)), 1)), ROWS)


def track_chunk(count: int, n_time: int, itemsize: int) -> tuple[int, int]:
    """Chunk of a track: whole rows where they fit into `TRACK_CHUNK_BYTES`, their number a divisor of a stripe's."""
    columns = min(n_time, TRACK_CHUNK_BYTES // itemsize)
    rows = _power_of_two(max(1, TRACK_CHUNK_BYTES // (columns * itemsize)))
    return min(rows, stripe_rows(count, n_time)), columns


def _power_of_two(most: int) -> int:
    return 1 << (most.bit_length() - 1)


def groups_of(scenario: Scenario) -> dict[str, tuple[Column, ...]]:
    """The groups that the file of a scenario has, and their columns."""
    return {name: columns for name, columns in GROUPS.items() if name != "track" or scenario.save_times_h.size}


def build_skeleton(file: h5py.File, scenario: Scenario, attrs: Mapping[str, Any], allocate: bool) -> None:
    """Make everything but the numbers; `allocate` takes the space of all chunks at once."""
    count, n_time = scenario.count, scenario.save_times_h.size
    rows = stripe_rows(count, n_time)
    index = create(file, PARTICLE_INDEX, (count,), (rows,), allocate)
    index.make_scale(PARTICLE_INDEX.name)
    scales = [index]
    if n_time:
        start = iso_utc(scenario.start)
        time = create(file, TIME, (n_time,), (min(n_time, ROWS),), allocate)
        label(time, units=f"hours since {start}", standard_name="time", calendar="standard", axis="T")
        time.make_scale(TIME.name)
        scales.append(time)
    for group, columns in groups_of(scenario).items():
        parent = file.create_group(group)
        for column in columns:
            if group == "track":
                single = scenario.output.tracks == "single"
                dataset = _create_track(parent, column, (count, n_time), single, allocate)
            else:
                codes = {c.word: int(c) for c in Cause} if column.name == "cause" else None
                dataset = create(parent, column, (count,), (rows,), allocate, codes)
            for axis, scale in zip(dataset.dims, scales):
                axis.attach_scale(scale)
    if n_time:
        file["track/time"] = file["time"]
    _label_codes(file, scenario)
    for number, (driver, unit, use) in enumerate(drivers_of(scenario.field)):
        _create_driver(file.create_group(f"driver/{number}"), driver, unit, use, allocate)
    write_attrs(file, {**attrs, "complete": False})


def skeleton(scenario: Scenario, attrs: Mapping[str, Any]) -> Overlay:
    """The file without the columns of particles: their chunks have their places, and nothing stands there yet."""
    made = Overlay(ignored=_fills(scenario))
    with h5py.File(made, "w", libver=LIBVER, locking=False) as file:
        build_skeleton(file, scenario, attrs, allocate=True)
        fill_coordinates(file, scenario)
    return made


def amend(file: Overlay, attrs: Mapping[str, Any]) -> None:
    """Set root attributes of a file in an overlay."""
    with h5py.File(file, "r+", libver=LIBVER, locking=False) as opened:
        write_attrs(opened, attrs)


def _fills(scenario: Scenario) -> list[np.ndarray]:
    """What HDF5 writes into the chunks of empty columns when it makes them."""
    count, n_time = scenario.count, scenario.save_times_h.size
    rows: tuple[int, ...] = (stripe_rows(count, n_time),)
    shapes = {(rows, column.dtype) for column in (PARTICLE_INDEX, *GROUPS["particle"], *GROUPS["end"])}
    if n_time:
        width = "f4" if scenario.output.tracks == "single" else "f8"
        shapes.add((track_chunk(count, n_time, np.dtype(width).itemsize), width))
    filled = [np.full(shape, np.nan if dtype.startswith("f") else 0, dtype) for shape, dtype in sorted(shapes)]
    return [np.frombuffer(data.tobytes() + fletcher32(data), np.uint8) for data in filled]


def fill_coordinates(file: h5py.File, scenario: Scenario) -> None:
    """Write the numbers that belong to no particle."""
    if scenario.save_times_h.size:
        file["time"][:] = scenario.save_times_h
    for number, (driver, _, _) in enumerate(drivers_of(scenario.field)):
        for name in ("start_h", "value", "slope"):
            file[f"driver/{number}/{name}"][:] = getattr(driver, name)


def write_attrs(file: h5py.File, attrs: Mapping[str, Any]) -> None:
    """Set root attributes and the hash over all of them."""
    for name, value in attrs.items():
        file.attrs[name] = value
    file.attrs[DIGEST] = digest(dict(file.attrs))


def create(
    parent: h5py.Group,
    column: Column,
    shape: tuple[int, ...],
    chunk: tuple[int, ...],
    allocate: bool,
    codes: Mapping[str, int] | None = None,
) -> h5py.Dataset:
    """An empty, chunked, checksummed dataset with its unit and name; floats are NaN until written. `codes`: the words
    of an enumeration."""
    dtype = np.dtype(column.dtype)
    plan = h5py.h5p.create(h5py.h5p.DATASET_CREATE)
    plan.set_chunk(chunk)
    plan.set_fletcher32()
    plan.set_alloc_time(h5py.h5d.ALLOC_TIME_EARLY if allocate else h5py.h5d.ALLOC_TIME_INCR)
    if dtype.kind == "f":
        plan.set_fill_value(np.array(np.nan, dtype))
    stored = h5py.enum_dtype(dict(codes), basetype=dtype) if codes else dtype
    kind = h5py.h5t.py_create(np.dtype(stored), logical=True)
    space = h5py.h5s.create_simple(shape)
    dataset = h5py.Dataset(h5py.h5d.create(parent.id, column.name.encode(), kind, space, plan))
    label(dataset, units=column.unit, long_name=column.long_name)
    if dtype.kind == "f" and column.group:
        dataset.attrs["_FillValue"] = dtype.type(np.nan)
    return dataset


def label(item: h5py.Dataset | h5py.Group, **texts: str) -> None:
    """Text for human readers; nothing here is read back."""
    for name, text in texts.items():
        item.attrs[name] = text


def drivers_of(field: Field) -> Iterator[tuple[Driver, str, str]]:
    """The drivers of a field, with the unit of the parameter that each stands for and the places of its use."""
    for driver in field.drivers:
        used = [
            (parameter.unit, f"{model.card.name} {parameter.name}")
            for model in field.electric
            for parameter in model.card.parameters
            if getattr(model, parameter.name) is driver
        ]
        yield driver, (used[0][0] if used else "") or "1", ", ".join(use for _, use in used)


def padded_bytes(dataset: h5py.Dataset) -> tuple[int, int]:
    """Bytes that all chunks of a dataset take, checksums included, and the number of chunks."""
    chunks = 1
    for size, chunk in zip(dataset.shape, dataset.chunks):
        chunks *= -(-size // chunk)
    return chunks * (int(np.prod(dataset.chunks)) * dataset.dtype.itemsize + 4), chunks


def _create_track(
    parent: h5py.Group, column: Column, shape: tuple[int, int], single: bool, allocate: bool
) -> h5py.Dataset:
    stored = Column(column.group, column.name, column.unit, column.long_name, "f4") if single else column
    dataset = create(parent, stored, shape, track_chunk(*shape, np.dtype(stored.dtype).itemsize), allocate)
    if single:
        dataset.attrs["relative_quantum"] = SINGLE_QUANTUM
        label(dataset, comment="single precision: neighbouring values differ by relative_quantum of their size or less")
    return dataset


def _label_codes(file: h5py.File, scenario: Scenario) -> None:
    populations = [p.name for p in scenario.populations]
    label_flags(file["particle/population"], range(len(populations)), populations)
    species = [s.name for s in scenario.species]
    label_flags(file["particle/species"], range(len(species)), species)
    label_flags(file["end/cause"], [int(c) for c in Cause], [c.word for c in Cause])
    label(file["end/cause"], comment="; ".join(f"{int(c)}: {c.sentence}" for c in Cause))


def label_flags(dataset: h5py.Dataset, values: Sequence[int], names: Sequence[str]) -> None:
    """What the numbers of a dataset stand for, as CF has it."""
    dataset.attrs["flag_values"] = np.asarray(values, dtype=np.dtype(dataset.dtype.str))
    label(dataset, flag_meanings=" ".join(flag_word(n) for n in names))


def _create_driver(group: h5py.Group, driver: Driver, unit: str, use: str, allocate: bool) -> None:
    size = driver.start_h.size
    columns = (
        Column("", "start_h", "h", "run time at which a segment starts"),
        Column("", "value", unit, f"{driver.name} at the start of a segment"),
        Column("", "slope", f"{unit} h^-1", f"change of {driver.name} along a segment"),
    )
    scale, *rest = (create(group, column, (size,), (min(size, ROWS),), allocate) for column in columns)
    scale.make_scale("start_h")
    for dataset in rest:
        dataset.dims[0].attach_scale(scale)
    label(group, name=driver.name, hold=driver.hold, use=use)
    group.attrs["end_h"] = float(driver.end_h)
