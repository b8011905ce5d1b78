"""Shielded power-law convection, by amplitude or by Kp."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from fields.arith import pointwise, power
from fields.contract import Card, ElectricModel, MagneticModel, Parameter, Term, Varying
from fields.drivers import Driver
from fields.errors import InputError

KP_OF_PEAK = 0.159 / (2 * 0.0093)  # 8.55: the fit falls beyond it
KP_TRUSTED = 8.5


@pointwise
def maynard_chen_amplitude(kp: Any) -> Any:
    """Amplitude in kV/R_E^2 by Kp: Maynard & Chen (1975), constants from memory."""
    d = 1.0 - 0.159 * kp + 0.0093 * kp * kp
    return 0.045 / (d * d * d)


@pointwise
def shielded(r: Any, sin: Any, cos: Any, amplitude: Any, cos0: Any, sin0: Any) -> Any:
    """Potential and slopes of ``-A r^2 sin(phi - phi0)``, A in kV."""
    s = sin * cos0 - cos * sin0
    c = cos * cos0 + sin * sin0
    a = amplitude * r
    return -a * r * s, -2.0 * a * s, -a * r * c


@pointwise
def shielded_by_kp(r: Any, sin: Any, cos: Any, kp: Any, cos0: Any, sin0: Any) -> Any:
    """Potential and slopes of the shielded field with the amplitude of the present Kp."""
    return shielded(r, sin, cos, maynard_chen_amplitude(kp), cos0, sin0)


@pointwise
def power_law(r: Any, sin: Any, cos: Any, amplitude: Any, gamma: Any, cos0: Any, sin0: Any) -> Any:
    """Potential and slopes of ``-A r^gamma sin(phi - phi0)``, A in kV at 1 R_E."""
    s = sin * cos0 - cos * sin0
    c = cos * cos0 + sin * sin0
    a = amplitude * power(r, gamma)
    return -a * s, -gamma * a * s / r, -a * c


@dataclass(frozen=True, eq=False)
class VollandStern(ElectricModel):
    """``Phi = -A r^gamma sin(phi - phi0)``; A given, or for gamma 2 by Kp."""

    gamma: float = 2.0
    kp: Varying | None = None
    amplitude_kV: Varying | None = None
    phi0_deg: float = 0.0

    card: ClassVar[Card] = Card(
        name="volland-stern",
        kind="electric",
        title="dawn-dusk convection shielded by a power of distance",
        formula="Phi = -A r^gamma sin(phi - phi0); by Kp: A = 0.045 / (1 - 0.159 Kp + 0.0093 Kp^2)^3 kV",
        parameters=(
            Parameter("gamma", "", "shielding exponent: 1 uniform, 2 the usual choice", 0.0, 8.0, True, default=2.0),
            Parameter("kp", "", "planetary index that sets the amplitude, gamma 2 only", 0.0, 9.0, varies=True),
            Parameter("amplitude_kV", "kV", "A, amplitude of the potential at 1 R_E", low=0.0, varies=True),
            Parameter("phi0_deg", "deg", "eastward turn of the pattern", -360.0, 360.0, default=0.0),
        ),
        reference="Volland (1973), J. Geophys. Res. 78, 171; Stern (1975), J. Geophys. Res. 80, 595; "
        "Maynard & Chen (1975), J. Geophys. Res. 80, 1009 (constants from memory)",
    )

    def __post_init__(self) -> None:
        super().__post_init__()
        if (self.kp is None) == (self.amplitude_kV is None):
            problem = "missing" if self.kp is None else "given twice, by kp and by amplitude_kV"
            raise InputError(problem, "one of kp and amplitude_kV", key="amplitude_kV", value=self.amplitude_kV)
        if self.kp is not None and self.gamma != 2.0:
            problem = "Kp sets the amplitude for gamma 2 only"
            raise InputError(problem, "gamma = 2, or amplitude_kV", key="gamma", value=self.gamma)

    def term(self, magnetic: MagneticModel) -> Term:
        """See ElectricModel."""
        turn = math.radians(self.phi0_deg)
        turned = (math.cos(turn), math.sin(turn))
        if self.kp is not None:
            return Term(shielded_by_kp, (self.kp, *turned))
        assert self.amplitude_kV is not None
        if self.gamma == 2.0:
            return Term(shielded, (self.amplitude_kV, *turned))
        return Term(power_law, (self.amplitude_kV, self.gamma, *turned))

    def warnings(self) -> list[str]:
        """See ElectricModel."""
        if self.kp is None:
            return []
        largest = float(np.max(self.kp.corner_values())) if isinstance(self.kp, Driver) else float(self.kp)
        if largest <= KP_TRUSTED:
            return []
        fit = f"the amplitude's fit peaks at Kp {KP_OF_PEAK:.2f} and falls after it"
        return [f"volland-stern: Kp up to {largest:g}; {fit}"]
