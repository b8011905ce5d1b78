"""The one list of field models. Run files, listings, tests and figures find a model here by the name on its card.

A model of one's own is used by name once its package names it in the entry point group ``driftrose.fields``; these
are looked at only when a name is not built in, or for a listing.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from importlib.metadata import EntryPoint, entry_points
from typing import Literal

from fields.contract import ElectricModel, MagneticModel, Model
from fields.electric.corotation import Corotation
from fields.electric.uniform import Uniform
from fields.electric.volland_stern import VollandStern
from fields.errors import InputError, nearest
from fields.magnetic.dipole import Dipole

Kind = Literal["magnetic", "electric"]

GROUP = "driftrose.fields"
BASES = (MagneticModel, ElectricModel)


def _by_name(models: Iterable[type[Model]]) -> dict[str, type[Model]]:
    return {model.card.name: model for model in models}


MAGNETIC: Mapping[str, type[Model]] = _by_name([Dipole])
ELECTRIC: Mapping[str, type[Model]] = _by_name([Corotation, Uniform, VollandStern])
BUILT_IN: dict[Kind, Mapping[str, type[Model]]] = {"magnetic": MAGNETIC, "electric": ELECTRIC}


def find(kind: Kind, name: str) -> type[Model]:
    """The model of this kind and name.

    Parameters
    ----------
    kind : {"magnetic", "electric"}
    name : str
        As on the model's card.

    Raises
    ------
    InputError
        When there is no such model; names the nearest one. Also when a registered model does not load.
    """
    if name in BUILT_IN[kind]:
        return BUILT_IN[kind][name]
    models = listing(kind)
    if name in models:
        return models[name]
    other: Kind = "electric" if kind == "magnetic" else "magnetic"
    if name in BUILT_IN[other]:
        raise InputError(f"is {_a(other)} model, not {_a(kind)} one", nearest(name, models), key="model", value=name)
    raise InputError(f"unknown {kind} model", nearest(name, models), key="model", value=name)


def listing(kind: Kind) -> dict[str, type[Model]]:
    """All models of a kind by name: the built-in ones, then the registered ones in order of name.

    Raises
    ------
    InputError
        When a registered model does not load or takes the name of another.
    """
    models = dict(BUILT_IN[kind])
    for entry in sorted(entry_points(group=GROUP), key=lambda entry: entry.name):
        model = _loaded(entry)
        if model.card.kind != kind:
            continue
        if model.card.name in models and models[model.card.name] is not model:
            problem = f"registers a second {kind} model called {model.card.name}"
            raise InputError(problem, "another name", key=_origin(entry))
        models[model.card.name] = model
    return models


def _loaded(entry: EntryPoint) -> type[Model]:
    try:
        model = entry.load()
    except Exception as error:  # whatever a foreign module does when imported
        raise InputError(f"does not load: {error!r}", "repair or uninstall it", key=_origin(entry)) from error
    if not (isinstance(model, type) and issubclass(model, BASES) and hasattr(model, "card")):
        remedy = "a class derived from MagneticModel or ElectricModel"
        raise InputError("is not a field model", remedy, key=_origin(entry))
    return model


def _origin(entry: EntryPoint) -> str:
    return f"entry point {GROUP}: {entry.name} = {entry.value}"


def _a(kind: Kind) -> str:
    return "an electric" if kind == "electric" else "a magnetic"
