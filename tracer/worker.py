"""What a worker process does: hold runs, compute chunks of them on demand. Knows nothing of how it is reached.

A worker needs none of the user's files: the scenario itself is shipped, histories and all. It needs the same code, the
same libraries and the same kind of processor, else its last bits would differ; `identity` is how that is told.
"""

from __future__ import annotations

import hashlib
import pickle
import threading
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path

import fields
import tracer
from fields.errors import InputError
from fields.field import Field
from tracer.integrate import compile_kernel, run_chunk
from tracer.kernels.build import Kernel, function_files, target
from tracer.records import Chunk
from tracer.scenario import Scenario
from tracer.store_attrs import processor, versions

KEPT = 16  # runs that a worker holds: a client that died did not dismiss its own
FIELDS, TRACER = (Path(package.__file__ or "").parent for package in (fields, tracer))
DECIDING = ("adiabatic.py", "integrate.py", "population.py", "scenario.py", "spacing.py", "status.py")


class NotHeld(LookupError):  # noqa: N818 - nothing went wrong: the worker has been started anew
    """This worker process does not hold the run."""


@dataclass(eq=False)
class Held:
    """A run in a worker: its scenario, whether it was called off, and its kernel once that is needed."""

    scenario: Scenario
    halt: threading.Event = field(default_factory=threading.Event)
    lock: threading.Lock = field(default_factory=threading.Lock)
    kernel: Kernel | None = None


_runs: dict[str, Held] = {}


def packed(scenario: Scenario) -> bytes:
    """A scenario as bytes, without what it has worked out for itself so far.

    Raises
    ------
    InputError
        When it holds a model that another process cannot import.
    """
    own = scenario.field
    for model in (own.magnetic, *own.electric):
        kind = type(model)
        if kind.__module__ == "__main__" or "<locals>" in kind.__qualname__:
            remedy = "put its class into a module, at the top level"
            raise InputError("stands where other processes cannot import it", remedy, key="model", value=kind.card.name)
    return pickle.dumps(replace(scenario, field=Field(own.magnetic, own.electric)), pickle.HIGHEST_PROTOCOL)


def identity(scenario: Scenario) -> dict[str, str]:
    """All on which the bits of a result depend, apart from the scenario."""
    name, features = target()
    compiled = {"kernel_cpu": name, "kernel_cpu_features": " ".join(sorted(features.split(",")))}
    sources = {"sources_sha256": sources_digest(function_files(scenario.field, scenario.equatorial))[:16]}
    return {**versions(), "cpu_features": processor()["cpu_features"], **compiled, **sources}


def sources_digest(more: Iterable[str]) -> str:
    """Hash of those sources of this program that numbers pass through, and of the files of a user's models."""
    digest = hashlib.sha256()
    whole = [path for folder in (FIELDS, TRACER / "kernels") for path in sorted(folder.rglob("*.py"))]
    for path in (*whole, *(TRACER / name for name in DECIDING), *sorted(set(map(Path, more)))):
        digest.update(path.name.encode() + b"\0" + path.read_bytes())
    return digest.hexdigest()


def differences(theirs: Mapping[str, str], ours: Mapping[str, str]) -> list[str]:
    """What of `theirs` is not as `ours`, in words; of lists only what is missing or too much."""
    found = []
    for name, wanted in ours.items():
        given = theirs.get(name, "unknown")
        if given == wanted:
            continue
        if not name.endswith("features"):
            found.append(f"{name} {given}, not {wanted}")
            continue
        lists = (("lacks", set(wanted.split()) - set(given.split())), ("has", set(given.split()) - set(wanted.split())))
        found += [f"{name} {verb} {_few(sorted(words))}" for verb, words in lists if words]
    return found


def _few(words: list[str], most: int = 3) -> str:
    return " ".join(words[:most]) + (f" and {len(words) - most} more" if len(words) > most else "")


def enlist(key: str, data: bytes) -> dict[str, str]:
    """Take a run from `packed` under a name, and say what this worker is."""
    scenario = pickle.loads(data)
    if key not in _runs:
        while len(_runs) >= KEPT:
            dismiss(next(iter(_runs)))
        _runs[key] = Held(scenario)
    return identity(scenario)


def dismiss(key: str) -> None:
    """Forget a run; what still computes chunks of it stops at its next batch."""
    held = _runs.pop(key, None)
    if held is not None:
        held.halt.set()


def ready(key: str) -> tuple[Scenario, Kernel, threading.Event]:
    """A run taken with `enlist`, its kernel loaded or compiled; and how it will be known that it was called off."""
    held = _runs.get(key)
    if held is None:
        raise NotHeld(key)
    with held.lock:  # one thread compiles, the others wait
        if held.kernel is None:
            held.kernel = compile_kernel(held.scenario)
        return held.scenario, held.kernel, held.halt


def work(key: str, first: int, stop: int, tolerance: float) -> Chunk:
    """Trace particles `first` to `stop` - 1 of a run taken with `enlist`; any number of threads may.

    Raises
    ------
    NotHeld
        When there was no `enlist`.
    Interrupted
        When the run was dismissed meanwhile.
    """
    scenario, kernel, halt = ready(key)
    return run_chunk(scenario, kernel, first, stop, tolerance, stopped=halt.is_set)
