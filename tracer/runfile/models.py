"""``[magnetic]`` and ``[[electric]]``: tables to field models, by the cards of the catalogue."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, cast

from fields.catalogue import Kind, find, listing
from fields.contract import Card, ElectricModel, MagneticModel, Model
from fields.drivers import Driver
from fields.errors import InputError
from fields.field import Field, compose
from fields.series import Series
from tracer.runfile.faults import Fault, unknown_key
from tracer.runfile.places import Path, fault, under

REFERENCE = "series:"


def model_faults(tables: Mapping[str, Any]) -> list[Fault]:
    """Everything wrong with the keys and the single values of the model tables."""
    found: list[Fault] = []
    for kind, path, table in _model_tables(tables):
        found += _table_faults(kind, path, table)
    return found


def references(tables: Mapping[str, Any]) -> list[tuple[Path, str]]:
    """Where series are named, and which."""
    return [
        ((*path, key), value.removeprefix(REFERENCE))
        for _, path, table in _model_tables(tables)
        for key, value in table.items()
        if isinstance(value, str) and value.startswith(REFERENCE)
    ]


def build_field(tables: Mapping[str, Any], drivers: Mapping[str, Driver]) -> Field:
    """The field of a run.

    Parameters
    ----------
    tables : mapping
        Of a run file, already without `model_faults`.
    drivers : mapping
        By series name.

    Raises
    ------
    InputError
        When a model refuses its parameters.
    """
    magnetic: list[Model] = []
    electric: list[Model] = []
    for kind, path, table in _model_tables(tables):
        values = {key: _driven(value, drivers) for key, value in table.items() if key != "model"}
        try:
            model = find(kind, table["model"])(**values)
        except InputError as error:
            raise under(path, error) from None
        (magnetic if kind == "magnetic" else electric).append(model)
    return compose(cast(MagneticModel, magnetic[0]), cast(list[ElectricModel], electric))


def _model_tables(tables: Mapping[str, Any]) -> list[tuple[Kind, Path, Mapping[str, Any]]]:
    found: list[tuple[Kind, Path, Mapping[str, Any]]] = []
    if isinstance(tables.get("magnetic"), Mapping):
        found.append(("magnetic", ("magnetic",), tables["magnetic"]))
    listed = tables.get("electric")
    for i, table in enumerate(listed if isinstance(listed, list) else []):
        if isinstance(table, Mapping):
            found.append(("electric", ("electric", i), table))
    return found


def _table_faults(kind: Kind, path: Path, table: Mapping[str, Any]) -> list[Fault]:
    place = (*path, "model")
    name = table.get("model")
    if not isinstance(name, str):
        problem = "missing" if name is None else "wrong type"
        return [(place, fault(place, name, problem, "one of " + ", ".join(listing(kind))))]
    try:
        card = find(kind, name).card
    except InputError as error:
        return [(place, under(path, error))]
    found: list[Fault] = []
    for key, value in table.items():
        wrong = None if key == "model" else _value_fault((*path, key), value, card)
        if wrong is not None:
            found.append(((*path, key), wrong))
    for parameter in card.parameters:
        if parameter.required and parameter.name not in table:
            place = (*path, parameter.name)
            found.append((place, fault(place, None, "missing", parameter.range_text())))
    return found


def _value_fault(path: Path, value: Any, card: Card) -> InputError | None:
    parameter = next((p for p in card.parameters if p.name == path[-1]), None)
    if parameter is None:
        return unknown_key(path, value, ["model", *(p.name for p in card.parameters)])
    if isinstance(value, str) and value.startswith(REFERENCE):
        return None if parameter.varies else fault(path, value, "cannot vary in time", parameter.range_text())
    if isinstance(value, (str, list, Mapping, Series)):
        wanted = 'a number, or a series such as "series:NAME"' if parameter.varies else parameter.range_text()
        return fault(path, value, "wrong type", wanted)
    try:
        parameter.check(value)
    except InputError as error:
        return under(path[:-1], error)
    return None


def _driven(value: Any, drivers: Mapping[str, Driver]) -> Any:
    if isinstance(value, str):
        return drivers[value.removeprefix(REFERENCE)]
    return float(value)
