"""Magnetic and electric fields of the inner magnetosphere, and what drives them, at a point and a time."""

from fields.compose import Field, compose
from fields.contract import Card, ElectricModel, LineAverages, MagneticModel, MagneticTerms, Parameter, Term
from fields.drivers import Driver
from fields.electric.corotation import Corotation
from fields.electric.uniform import Uniform
from fields.electric.volland_stern import VollandStern
from fields.errors import InputError
from fields.magnetic.dipole import Dipole
from fields.series import Series, read_series

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
