"""Magnetic and electric fields of the inner magnetosphere, and what drives them, at a point and a time."""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from fields.contract import Card, ElectricModel, LineAverages, MagneticModel, MagneticTerms, Parameter, Term
    from fields.drivers import Driver
    from fields.electric.corotation import Corotation
    from fields.electric.uniform import Uniform
    from fields.electric.volland_stern import VollandStern
    from fields.errors import InputError
    from fields.field import Field, compose
    from fields.magnetic.dipole import Dipole
    from fields.series import Series, read_series

# Public name -> module that holds it. Resolved on first use, so that the command's help loads no model.
_HOMES = {
    "Card": "fields.contract",
    "Corotation": "fields.electric.corotation",
    "Dipole": "fields.magnetic.dipole",
    "Driver": "fields.drivers",
    "ElectricModel": "fields.contract",
    "Field": "fields.field",
    "InputError": "fields.errors",
    "LineAverages": "fields.contract",
    "MagneticModel": "fields.contract",
    "MagneticTerms": "fields.contract",
    "Parameter": "fields.contract",
    "Series": "fields.series",
    "Term": "fields.contract",
    "Uniform": "fields.electric.uniform",
    "VollandStern": "fields.electric.volland_stern",
    "compose": "fields.field",
    "read_series": "fields.series",
}

__all__ = [
    "Card",
    "Corotation",
    "Dipole",
    "Driver",
    "ElectricModel",
    "Field",
    "InputError",
    "LineAverages",
    "MagneticModel",
    "MagneticTerms",
    "Parameter",
    "Series",
    "Term",
    "Uniform",
    "VollandStern",
    "compose",
    "read_series",
]


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'fields' has no attribute {name!r}")
    return getattr(import_module(_HOMES[name]), name)


def __dir__() -> list[str]:
    return sorted(__all__)
