"""A Result as one xarray Dataset."""

from __future__ import annotations

from datetime import datetime
from typing import TYPE_CHECKING, Any

import numpy as np

from tracer.records import GROUPS, Column, Result, flag_word
from tracer.status import Cause

if TYPE_CHECKING:
    import xarray

PREFIX = {"particle": "initial_", "track": "", "end": "end_"}
NS_PER_H = 3.6e12


def dataset(result: Result) -> xarray.Dataset:
    """Tracks on (particle_index, time), the rest on particle_index, prefixed ``initial_`` and ``end_``.

    All columns are loaded. `time` holds UTC dates, the coordinate `time_h` the run time in hours.

    Raises
    ------
    ImportError
        When xarray is not installed.
    """
    try:
        import xarray
    except ImportError as error:
        raise ImportError('to_xarray needs xarray: pip install "driftrose[xarray]"') from error
    variables = {
        PREFIX[group] + column.name: (
            ("particle_index", "time")[: 2 if group == "track" else 1],
            getattr(result, group)[column.name],
            _labels(result, column),
        )
        for group, columns in GROUPS.items()
        if group != "track" or result.time_h.size
        for column in columns
    }
    index_labels = {"units": "1", "long_name": "index of the particle in the run"}
    coordinates: dict[str, Any] = {"particle_index": ("particle_index", np.arange(result.count), index_labels)}
    if result.time_h.size:
        coordinates["time"] = ("time", utc_times(result), {"long_name": "time", "standard_name": "time"})
        coordinates["time_h"] = ("time", result.time_h, {"units": "h", "long_name": "run time"})
    return xarray.Dataset(variables, coordinates, {name: _netcdf_value(value) for name, value in result.attrs.items()})


def utc_times(result: Result) -> np.ndarray:
    """The times of the tracks as datetime64[ns], UTC."""
    start = datetime.fromisoformat(result.attrs["start"]).replace(tzinfo=None)
    return np.datetime64(start, "ns") + np.round(result.time_h * NS_PER_H).astype("timedelta64[ns]")


def _labels(result: Result, column: Column) -> dict[str, Any]:
    labels: dict[str, Any] = {"units": column.unit, "long_name": column.long_name}
    if column.name == "cause":
        meanings: tuple[str, ...] = tuple(cause.word for cause in Cause)
    elif column.name in ("population", "species"):
        meanings = result.population_names if column.name == "population" else result.species_names
    else:
        return labels
    flags = np.arange(len(meanings), dtype=column.dtype)
    return labels | {"flag_values": flags, "flag_meanings": " ".join(flag_word(m) for m in meanings)}


def _netcdf_value(value: Any) -> Any:
    """NetCDF knows no truth values."""
    return int(value) if isinstance(value, (bool, np.bool_)) else value
