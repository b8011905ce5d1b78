"""What each driver of a run drives, and in which unit."""

from __future__ import annotations

import json
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

from fields.catalogue import Kind, find
from fields.drivers import Driver
from fields.errors import InputError
from tracer.records import Result


@dataclass(frozen=True)
class Driven:
    """A driver with the parameters that follow it.

    Attributes
    ----------
    driver : Driver
    uses : tuple of str
        "parameter of model", in the order of the field's terms.
    parameter : str
        Name of the first of these parameters; the driver's own name where no parameter does.
    unit : str
        Its unit; empty for a pure number or an index.
    """

    driver: Driver
    uses: tuple[str, ...]
    parameter: str
    unit: str


def driven(result: Result) -> list[Driven]:
    """The drivers of a run in their order, each with what it drives."""
    entries = list(_entries(json.loads(result.attrs["field"])))
    found = []
    for driver in result.drivers:
        uses = [(kind, model, key) for kind, model, key, value in entries if value == driver.name]
        parameter = uses[0][2] if uses else driver.name.removeprefix("series:")
        unit = _unit(*uses[0]) if uses else ""
        found.append(Driven(driver, tuple(f"{key} of {model}" for _, model, key in uses), parameter, unit))
    return found


def _entries(field: dict[str, Any]) -> Iterable[tuple[Kind, str, str, Any]]:
    """Kind, model, key and value of every parameter of a described field."""
    described: list[tuple[Kind, dict[str, Any]]] = [("magnetic", field["magnetic"])]
    described += [("electric", table) for table in field["electric"]]
    for kind, table in described:
        for key, value in table.items():
            yield kind, table["model"], key, value


def _unit(kind: Kind, model: str, key: str) -> str:
    """The unit on the model's card; empty where the model is not installed here."""
    try:
        parameters = find(kind, model).card.parameters
    except InputError:
        return ""
    return next((p.unit for p in parameters if p.name == key), "")
