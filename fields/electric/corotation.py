"""The electric field of a plasma that turns with the Earth."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, ClassVar

from fields.arith import pointwise, reciprocal
from fields.constants import EARTH_RADIUS_M, ROTATION_RAD_PER_H
from fields.contract import Card, ElectricModel, MagneticModel, Parameter, Term, Varying


@pointwise
def corotation(r: Any, sin: Any, cos: Any, amplitude: Any) -> Any:
    """Potential and slopes of ``-C / r``; `amplitude` C in kV."""
    inverse = reciprocal(r)
    potential = -amplitude * inverse
    return potential, -potential * inverse, 0.0 * sin


def corotation_potential_kV(b0_nT: float) -> float:
    """``C = Omega B0 R_E^2`` with one turn in a solar day, kV."""
    return ROTATION_RAD_PER_H / 3600.0 * b0_nT * 1e-9 * EARTH_RADIUS_M**2 * 1e-3


@dataclass(frozen=True, eq=False)
class Corotation(ElectricModel):
    """``Phi = -C / r`` in a dipole, C worked out from the magnetic model unless given."""

    potential_kV: Varying | None = None

    card: ClassVar[Card] = Card(
        name="corotation",
        kind="electric",
        title="corotation with the Earth, one turn in 24 h",
        formula="Phi = -C / r",
        parameters=(
            Parameter(
                "potential_kV",
                "kV",
                "C, the potential drop from 1 R_E to infinity; worked out as Omega B0 R_E^2 when left out",
                low=0.0,
                varies=True,
            ),
        ),
        reference="Volland (1984), Atmospheric Electrodynamics (from memory)",
    )

    def term(self, magnetic: MagneticModel) -> Term:
        """See ElectricModel."""
        if self.potential_kV is None:
            return Term(corotation, (corotation_potential_kV(magnetic.reference_b0_nT()),))
        return Term(corotation, (self.potential_kV,))
