"""Writing a trajectory file: under another name until it is whole, then moved into place; resumed when broken off.

HDF5 makes the skeleton in memory, before there are any numbers, and is closed for good: a process that dies while
HDF5 holds a file open leaves an unreadable one. The columns of a stripe of particles are then put at the places of
their chunks, and a line of the log says so. The last change to the skeleton is logged before it is made. So whatever
the moment of a kill, what stands in the log can be taken up again, and the finished file has the same bits.
"""

from __future__ import annotations

import base64
import os
from collections.abc import Mapping
from contextlib import suppress
from pathlib import Path
from types import TracebackType
from typing import Any, Self

import h5py
import numpy as np

from tracer.records import Chunk, Result
from tracer.scenario import Scenario
from tracer.spans import Span, joined
from tracer.stopping import Stopped
from tracer.store_attrs import provenance
from tracer.store_identity import damaged, identity, refuse_other
from tracer.store_layout import amend, groups_of, skeleton, stripe_rows
from tracer.store_log import CLOSING_BYTES, Log, reserve, write_at
from tracer.store_output import LOG, PART, check_output, check_replaced, locked, publish, room_for, sync_directory
from tracer.store_overlay import Overlay
from tracer.store_places import Stripes, places_of
from tracer.store_reader import open as read
from tracer.store_seal import seal

LOG_FORMAT = "driftrose log 1"


class TrajectoryWriter:
    """Context manager that writes one trajectory file, chunk by chunk.

    It stands under `path` + ``.part``, locked, with the room for all datasets taken from the start, and a log beside
    it; `finish` completes it and moves it into place. Left earlier, it is kept for another run to resume when
    anything is in it or the process was told to stop.

    Parameters
    ----------
    path : path-like
    scenario : Scenario
    attrs : mapping, optional
        Root attributes beyond `tracer.store_attrs.provenance`. Without them `begin` must be called.
    overwrite : bool
        Replace an existing file, at the final move, and what an interrupted run has left, at once.
    resume : bool
        Go on with what an interrupted run has left.
    program : str
        Hash of the code that computes the chunks; a run is not resumed with another.

    Attributes
    ----------
    begun : dict or None
        The attributes with which the file was begun, by this run or the interrupted one; None before `begin`.

    Raises
    ------
    InputError
        See `check_output` and `tracer.store_identity.refuse_other`; also when another run is writing the same file.
    Stopped
        When the disk is full.
    """

    def __init__(
        self,
        path: str | os.PathLike[str],
        scenario: Scenario,
        attrs: Mapping[str, Any] | None = None,
        overwrite: bool = False,
        *,
        resume: bool = False,
        program: str = "",
    ) -> None:
        check_output(path, scenario, overwrite, resume)
        self.path = Path(path)
        self.part = Path(f"{path}{PART}")
        self.begun: dict[str, Any] | None = None
        self._scenario = scenario
        self._attrs = attrs
        self._overwrite = overwrite
        self._resume = resume
        self._program = program
        self._needed = 0
        self._file = -1
        self._log: Log | None = None
        self._stripes: Stripes | None = None
        self._done: dict[int, str] = {}
        self._partly: dict[int, Gathered] = {}
        self._finished = False

    def __enter__(self) -> Self:
        self._file = locked(self.path, self._resume)
        try:
            if self._resume:
                self._take_up()
            if self.begun is None and self._attrs is not None:
                self.begin(self._attrs)
        except BaseException as error:
            self._leave(error)
            raise
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._leave(error)

    def begin(self, attrs: Mapping[str, Any]) -> None:
        """Make the file and its log; `attrs` as for the class."""
        made = skeleton(self._scenario, {**provenance(self._scenario), **attrs})
        self._needed = made.size
        header = {
            "format": LOG_FORMAT,
            "identity": identity(self._scenario, self._program),
            "attrs": dict(attrs),
            "size": made.size,
            "overwrite": self._overwrite,
        }
        count = self._scenario.count
        stripes = -(-count // stripe_rows(count, self._scenario.save_times_h.size))
        with self._room():
            try:
                reserve(self._file, made.size + CLOSING_BYTES)
                for offset, data in made.changes():
                    write_at(self._file, [data], offset)
                os.fsync(self._file)
                self._log = Log.create(Path(f"{self.path}{LOG}"), header, stripes)
            except OSError:
                with suppress(OSError):
                    Path(f"{self.path}{LOG}").unlink()
                os.ftruncate(self._file, 0)  # gives the room back; a resumed run begins anew
                raise
            sync_directory(self.path)
        self._opened(dict(attrs))

    def stopped(self) -> str:
        """What to say of a run that was stopped."""
        kept = f"; {self.part} keeps them" if self._done else ""
        after = f"stopped after {self.written} of {self._scenario.count} particles"
        return f"{after}{kept}; the same command with --resume goes on"

    def result(self) -> Result:
        """The finished file."""
        return read(self.path)

    @property
    def written(self) -> int:
        """Particles whose columns stand in the file."""
        stripes = self._stripes
        return 0 if stripes is None else sum(stop - first for first, stop in map(stripes.span, self._done))

    def missing(self) -> list[Span]:
        """The particles that are not in the file yet, as spans, rising."""
        stripes = self._begun_stripes()
        return joined(stripes.span(s) for s in stripes.holding(0, stripes.count) if s not in self._done)

    def write(self, chunk: Chunk) -> None:
        """Put the columns of some consecutive particles at their place; chunks may come in any order and length."""
        stripes = self._begun_stripes()
        columns = self._columns(chunk)
        first, stop = chunk.first, chunk.first + chunk.end["cause"].size
        for stripe in stripes.holding(first, stop):
            low, high = stripes.span(stripe)
            part = slice(max(low, first) - first, min(high, stop) - first)
            if stripe in self._done:
                raise ValueError(f"particle {part.start + first} was written before")
            rows = {name: data[part] for name, data in columns.items()}
            if part.stop - part.start < high - low:
                gathered = self._partly.setdefault(stripe, Gathered(high - low))
                gathered.add(part.start + first - low, rows)
                if not gathered.whole:
                    continue
                rows = self._partly.pop(stripe).columns
            self._put(stripe, rows)

    def finish(self, extra_attrs: Mapping[str, Any] | None = None) -> Path:
        """Add attributes, mark the file complete, bring it to the disk and move it into place.

        Raises
        ------
        InputError
            When a file has come to stand at the path meanwhile; the finished one then stays under its ``.part`` name.
        """
        if missing := self.missing():
            raise ValueError(f"{self.written} of {self._scenario.count} particles were written, not {missing[0][0]}")
        log = self._begun_log()
        with self._room():
            os.fsync(self._file)
            if not isinstance(log.records[-1], dict) or "close" not in log.records[-1]:
                changed = Overlay(self._file)
                amend(changed, {**(extra_attrs or {}), "complete": True})
                end = (changed.size, seal(changed, self._begun_stripes().places))
                changes = [[offset, base64.b85encode(data).decode()] for offset, data in (*changed.changes(), end)]
                log.append({"close": changes, "size": changed.size})
                log.sync()
            self._close(log.records[-1])
            os.fsync(self._file)
        publish(self.part, self.path, self._overwrite or bool(log.records[0]["overwrite"]))
        self._finished = True
        Path(f"{self.path}{LOG}").unlink()
        return self.path

    def _take_up(self) -> None:
        """Read what an interrupted run has left. Without a header it got nowhere, and all begins anew."""
        log = Log.read(Path(f"{self.path}{LOG}"))
        if log is None:
            check_replaced(self.path, self._overwrite)
            os.ftruncate(self._file, 0)
            return
        self._log = log
        header = log.records[0]
        check_replaced(self.path, self._overwrite or bool(header["overwrite"]))
        refuse_other(header["identity"], identity(self._scenario, self._program), str(self.part))
        self._needed = header["size"]
        if os.fstat(self._file).st_size < self._needed:
            raise damaged(str(self.part))
        try:
            if isinstance(log.records[-1], dict) and "close" in log.records[-1]:
                self._close(log.records[-1])
            self._opened(header["attrs"])
        except (OSError, RuntimeError, KeyError, ValueError) as error:
            raise damaged(str(self.part)) from error
        stripes = self._begun_stripes()
        for record in log.records[1:]:
            if isinstance(record, list) and stripes.stands(*record):
                self._done[record[0]] = record[1]

    def _close(self, closing: Mapping[str, Any]) -> None:
        """Make the last change to the skeleton, once more if need be."""
        os.ftruncate(self._file, closing["size"])
        for offset, text in closing["close"]:
            write_at(self._file, [base64.b85decode(text)], offset)

    def _opened(self, attrs: dict[str, Any]) -> None:
        with h5py.File(self.part, "r", locking=False) as file:
            places = places_of(file)
        count, n_time = self._scenario.count, self._scenario.save_times_h.size
        self._stripes = Stripes(self._file, places, stripe_rows(count, n_time))
        self.begun = attrs

    def _columns(self, chunk: Chunk) -> dict[str, np.ndarray]:
        """The columns of a chunk in the types and under the names of the datasets."""
        size = chunk.end["cause"].size
        values = {"particle_index": np.arange(chunk.first, chunk.first + size)}
        for group, columns in groups_of(self._scenario).items():
            values |= {f"{group}/{column.name}": getattr(chunk, group)[column.name] for column in columns}
        places = self._begun_stripes().places
        for name, data in values.items():
            if data.shape != (size, *places[name].shape[1:]):
                raise ValueError(f"{name} of particles {chunk.first} to {chunk.first + size}: shape {data.shape}")
        return {
            name: stored(np.asarray(data), name.rpartition("/")[2], places[name].dtype) for name, data in values.items()
        }

    def _put(self, stripe: int, rows: Mapping[str, np.ndarray]) -> None:
        with self._room():
            digest = self._begun_stripes().write(stripe, rows)
            self._begun_log().append([stripe, digest])
        self._done[stripe] = digest

    def _room(self) -> Any:
        return room_for(self.path, self._needed)

    def _begun_stripes(self) -> Stripes:
        if self._stripes is None:
            raise ValueError("the writer is not open")
        return self._stripes

    def _begun_log(self) -> Log:
        if self._log is None:
            raise ValueError("the writer is not open")
        return self._log

    def _leave(self, error: BaseException | None) -> None:
        """Let go of the files; remove them unless there is something to resume, or the process was told to stop."""
        if self._log is not None:
            self._log.close()
        told = isinstance(error, Stopped) or not (error is None or isinstance(error, Exception))
        if not (self._finished or self._done or told or self._resume):
            for path in (Path(f"{self.path}{LOG}"), self.part):
                with suppress(OSError):
                    path.unlink()
        if self._file >= 0:
            os.close(self._file)
            self._file = -1


class Gathered:
    """Rows of a stripe that come in pieces."""

    def __init__(self, size: int) -> None:
        self.columns: dict[str, np.ndarray] = {}
        self._there = np.zeros(size, bool)

    @property
    def whole(self) -> bool:
        """Whether all have come."""
        return bool(self._there.all())

    def add(self, first: int, rows: Mapping[str, np.ndarray]) -> None:
        """Rows from `first` on, counted within the stripe."""
        size = next(iter(rows.values())).shape[0]
        if self._there[first : first + size].any():
            raise ValueError(f"row {first} of a stripe was written before")
        for name, data in rows.items():
            if name not in self.columns:
                self.columns[name] = np.empty((self._there.size, *data.shape[1:]), data.dtype)
            self.columns[name][first : first + size] = data
        self._there[first : first + size] = True


def stored(data: np.ndarray, name: str, dtype: np.dtype[Any]) -> np.ndarray:
    """`data` in the type of its dataset; local time stays below 24 h where single precision rounds it up."""
    converted = data.astype(dtype, copy=False)
    if name == "mlt_h" and dtype.itemsize < data.dtype.itemsize:
        converted[converted >= 24.0] = 0.0
    return converted
