"""Instants as whole microseconds since 1970-01-01T00:00Z: exact differences, no loss below a second."""

from __future__ import annotations

from datetime import UTC, date, datetime, timedelta
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fields.errors import InputError
from fields.units import Floats

Micros = NDArray[np.int64]

MICROS_PER_HOUR = 3_600_000_000
MICROS_PER_DAY = 24 * MICROS_PER_HOUR
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
_MICROSECOND = timedelta(microseconds=1)
_WIDEST = 2.0**62


def micros(moment: datetime) -> int:
    """A datetime as an instant; one without an offset is UTC."""
    aware = moment.replace(tzinfo=UTC) if moment.tzinfo is None else moment
    return (aware - _EPOCH) // _MICROSECOND


def iso_micros(text: str) -> int | None:
    """An ISO 8601 text as an instant, None when it is none; without an offset it is UTC."""
    try:
        return micros(datetime.fromisoformat(text))
    except (ValueError, OverflowError):
        return None


def day_micros(year: str, month: str, day: str) -> int | None:
    """Midnight UTC of a calendar day, None when there is no such day."""
    try:
        days = date(int(year), int(month), int(day)).toordinal() - _EPOCH.toordinal()
    except (ValueError, OverflowError):
        return None
    return days * MICROS_PER_DAY


def array_micros(times: Any, key: str) -> Micros:
    """Instants from datetime64, datetimes or ISO texts.

    Raises
    ------
    InputError
        Naming `key` and the first entry that is no time.
    """
    array = np.asarray(times)
    if array.dtype.kind == "M":
        if np.isnat(array).any():
            raise InputError("not a time", "times without NaT", key=key, value="NaT")
        return np.array(array.astype("datetime64[us]").view(np.int64))
    stamps = []
    for given in array.ravel():
        stamp = micros(given) if isinstance(given, datetime) else iso_micros(str(given))
        if stamp is None:
            raise InputError("not a time", "datetimes or ISO 8601 text, UTC", key=key, value=given)
        stamps.append(stamp)
    return np.array(stamps, dtype=np.int64).reshape(array.shape)


def hours_since(stamps: Any, origin: int) -> Floats:
    """Hours from the instant `origin`, each rounded once."""
    return np.asarray((stamps - origin) / MICROS_PER_HOUR, dtype=np.float64)


def hours_later(origin: int, hours: float) -> int:
    """The instant `hours` after `origin`, cut to what an int64 holds."""
    return int(min(max(hours * MICROS_PER_HOUR + origin, -_WIDEST), _WIDEST))


def utc_text(stamp: int) -> str:
    """ISO 8601 UTC, with a fraction of a second only where there is one."""
    unit = "s" if stamp % 1_000_000 == 0 else "us"
    return str(np.datetime_as_string(np.datetime64(int(stamp), "us"), unit=unit)) + "Z"  # type: ignore[call-overload]
