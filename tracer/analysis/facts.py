"""What a result says about its run: title, times, boundaries, provenance."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, datetime, timedelta

import numpy as np

from tracer.access_records import AccessResult
from tracer.records import Result
from tracer.store_attrs import DIGEST, digest

ERROR_KEY = "end_error_99_re"


@dataclass(frozen=True)
class Facts:
    """The run behind a result.

    Attributes
    ----------
    title : str
    start : datetime
        UTC.
    hours : float
        Length of the run, h.
    backward : bool
    outer_re, inner_re : float
        Boundaries of the domain, R_E.
    version : str
        Of the program that wrote the result.
    fingerprint : str
        Hex digest that identifies the run.
    error_re : float or None
        Measured error that 99 % of the end positions keep, R_E; None where it was not measured.
    """

    title: str
    start: datetime
    hours: float
    backward: bool
    outer_re: float
    inner_re: float
    version: str
    fingerprint: str
    error_re: float | None

    @property
    def direction(self) -> float:
        """+1 forward, -1 backward in time."""
        return -1.0 if self.backward else 1.0

    @property
    def span_h(self) -> tuple[float, float]:
        """First and last run time, h, in the order of time."""
        return (-self.hours, 0.0) if self.backward else (0.0, self.hours)

    def utc(self, time_h: float) -> datetime:
        """The date of a run time."""
        return self.start + timedelta(hours=float(time_h))


def facts(result: Result | AccessResult) -> Facts:
    """Gather the facts of a run from the attributes of its result."""
    attrs = result.attrs
    start = datetime.fromisoformat(str(attrs["start"]))
    error = attrs.get(ERROR_KEY)
    return Facts(
        title=" ".join(str(attrs["title"]).split()),
        start=start.replace(tzinfo=UTC) if start.tzinfo is None else start.astimezone(UTC),
        hours=float(attrs["hours"]),
        backward=bool(attrs["backward"]),
        outer_re=float(attrs["outer_re"]),
        inner_re=float(attrs["inner_re"]),
        version=str(attrs["driftrose_version"]),
        fingerprint=str(attrs.get(DIGEST) or digest(attrs)),
        error_re=float(error) if error is not None and np.isfinite(error) else None,
    )
