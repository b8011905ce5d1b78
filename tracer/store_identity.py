"""What must be the same for a run to be resumed to the same bits: its input, and what it is computed with."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from typing import Any

from fields.errors import InputError
from tracer.scenario import Scenario
from tracer.store_attrs import digest, processor, provenance, versions

AGAIN = "--overwrite to start again"


def identity(scenario: Scenario, program: str) -> dict[str, Any]:
    """The run in hashes, and what it is computed with, as JSON values.

    Parameters
    ----------
    scenario : Scenario
    program : str
        Hash of the compiled code.
    """
    computed_with = {**versions(), **processor()}
    described = hashlib.sha256()
    described.update(digest({k: v for k, v in provenance(scenario).items() if k not in computed_with}).encode())
    for item in (scenario.populations, scenario.domain, scenario.output, scenario.start, scenario.hours):
        described.update(repr(item).encode("utf-8", "surrogatepass"))
    for driver in scenario.field.drivers:
        for values in (driver.start_h, driver.value, driver.slope):
            described.update(values.tobytes())
    return {
        "run_file": _sha256(scenario.origin.text),
        "inputs": dict(scenario.origin.input_sha256),
        "versions": versions(),
        "processor": processor(),
        "program": program,
        "run": described.hexdigest(),
    }


def refuse_other(begun: Mapping[str, Any], now: Mapping[str, Any], name: str) -> None:
    """See that what was begun can go on here.

    Parameters
    ----------
    begun, now : mapping
        From `identity`.
    name : str
        Of the unfinished file.

    Raises
    ------
    InputError
        Naming what differs.
    """
    if begun["run_file"] != now["run_file"]:
        remedy = f"the run file as it was, or {AGAIN}"
        raise InputError("was begun with another run file, or that has changed", remedy, file=name)
    for path in sorted({*begun["inputs"], *now["inputs"]}):
        if begun["inputs"].get(path) != now["inputs"].get(path):
            raise InputError(f"{path} has changed since it was begun", f"that file as it was, or {AGAIN}", file=name)
    for library, version in begun["versions"].items():
        current = now["versions"].get(library)
        if current != version:
            remedy = f"{version}, with which it was begun, or {AGAIN}"
            raise InputError("another version", remedy, key=library, value=current, file=name)
    if differing := _instructions(begun["processor"]) ^ _instructions(now["processor"]):
        remedy = f"a processor with the same instruction sets, or {AGAIN}"
        shown = ", ".join(sorted(differing)[:8]) + (", ..." if len(differing) > 8 else "")
        raise InputError(f"was begun on another kind of processor (only one has {shown})", remedy, file=name)
    if begun["program"] != now["program"]:
        problem = "was begun with other sources of this program, or compiled for another processor"
        raise InputError(problem, f"those, or {AGAIN}", file=name)
    if begun["run"] != now["run"]:
        raise InputError("was begun by another run", f"another name for the output, or {AGAIN}", file=name)


def _instructions(described: Mapping[str, str]) -> set[str]:
    """Architecture and instruction sets; not the name of the model."""
    return {*described["cpu_features"].split(), described["cpu"].rpartition("(")[2].rstrip(")")}


def _sha256(text: str) -> str:
    return hashlib.sha256(text.encode("utf-8", "surrogatepass")).hexdigest()


def damaged(name: str) -> InputError:
    """The fault of an unfinished file that cannot be gone on with."""
    return InputError("damaged, cannot be resumed", AGAIN, file=name)
