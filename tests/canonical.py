"""At least one instance of every field model: what the inherited exam of tests/fields/test_models.py sits on.

A new model adds its instance here and is examined. The exam fails when the catalogue holds a model that has none.
"""

from __future__ import annotations

import numpy as np

from fields.contract import ElectricModel, MagneticModel, Model
from fields.drivers import Driver
from fields.electric.corotation import Corotation
from fields.electric.uniform import Uniform
from fields.electric.volland_stern import VollandStern
from fields.magnetic.dipole import Dipole

RISING_KP = Driver(  # steps and a ramp; invented
    name="series:kp",
    start_h=np.array([0.0, 3.0, 6.0]),
    value=np.array([1.0, 5.0, 5.0]),
    slope=np.array([0.0, 0.0, 0.5]),
    end_h=9.0,
)

MAGNETIC: list[MagneticModel] = [
    Dipole(b0_nT=30000.0),
]

ELECTRIC: list[ElectricModel] = [
    Corotation(),
    Corotation(potential_kV=90.0),
    Uniform(e0_mV_per_m=0.3),
    VollandStern(gamma=2.0, kp=4.0),
    VollandStern(gamma=2.0, kp=RISING_KP, phi0_deg=15.0),
    VollandStern(gamma=2.0, amplitude_kV=1.6),
    VollandStern(gamma=2.5, amplitude_kV=0.8, phi0_deg=-20.0),
]


def label(model: Model) -> str:
    """A readable test id: the model and the parameters that are set."""
    described = model.described()
    name = described.pop("model")
    return " ".join([str(name), *(f"{key}={value}" for key, value in described.items())])
