"""Uniform dawn-dusk electric field."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, ClassVar

from fields.arith import pointwise
from fields.constants import MV_PER_M_RE_TO_KV
from fields.contract import Card, ElectricModel, MagneticModel, Parameter, Term, Varying


@pointwise
def uniform(r: Any, sin: Any, cos: Any, e0: Any) -> Any:
    """Potential and slopes of ``-e0 r sin(phi)``; `e0` in mV/m."""
    a = MV_PER_M_RE_TO_KV * e0
    return -a * r * sin, -a * sin, -a * r * cos


@dataclass(frozen=True, eq=False)
class Uniform(ElectricModel):
    """``Phi = -E0 r sin(phi)``: sunward flow for E0 > 0."""

    e0_mV_per_m: Varying

    card: ClassVar[Card] = Card(
        name="uniform",
        kind="electric",
        title="uniform field from dawn to dusk",
        formula="Phi = -e0 r sin(phi)",
        parameters=(
            Parameter("e0_mV_per_m", "mV/m", "field strength, positive from dawn to dusk", varies=True, required=True),
        ),
        reference="Kavanagh, Freeman & Chen (1968), J. Geophys. Res. 73, 5511 (from memory)",
    )

    def term(self, magnetic: MagneticModel) -> Term:
        """See ElectricModel."""
        return Term(uniform, (self.e0_mV_per_m,))
