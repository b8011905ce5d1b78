"""Earth's dipole."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any, ClassVar

import numpy as np

from fields.arith import pointwise, reciprocal, square_root
from fields.contract import Card, LineAverages, MagneticModel, MagneticTerms, Parameter
from fields.errors import InputError
from fields.magnetic.dipole_lines import DipoleLines
from fields.magnetic.igrf import EPOCHS, dipole_field_nT
from fields.magnetic.mirror_ratio import cot2_and_slope
from fields.units import Floats


@pointwise
def equator(r: Any, sin: Any, cos: Any, b0: Any, inverse_root_b0: Any) -> Any:
    """B at the equator, nT."""
    inverse = reciprocal(r)
    return b0 * (inverse * inverse * inverse)


@pointwise
def drift_factor(r: Any, sin: Any, cos: Any, b0: Any, inverse_root_b0: Any) -> Any:
    """``1 / (r B_eq)``, without its divisions."""
    return r * r * (inverse_root_b0 * inverse_root_b0)


@pointwise
def mirror(k: Any, r: Any, sin: Any, cos: Any, b0: Any, inverse_root_b0: Any) -> Any:
    """Mirror field at fixed k, its slopes, and cot^2 of the equatorial pitch angle."""
    kappa = k * inverse_root_b0 * square_root(r)
    cot2, slope = cot2_and_slope(kappa)
    inverse = reciprocal(r)
    b = b0 * (inverse * inverse * inverse)
    # kappa goes as sqrt(r): r d(cot2)/dr = kappa/2 d(cot2)/dkappa
    return b * (1.0 + cot2), b * inverse * (0.5 * kappa * slope - 3.0 * (1.0 + cot2)), 0.0 * sin, cot2


@pointwise
def mirror_at_equator(k: Any, r: Any, sin: Any, cos: Any, b0: Any, inverse_root_b0: Any) -> Any:
    """`mirror` for k = 0."""
    inverse = reciprocal(r)
    b = b0 * (inverse * inverse * inverse)
    return b, -3.0 * b * inverse, 0.0 * sin, 0.0 * r


@pointwise
def foot(r: Any, sin: Any, cos: Any, foot_re: Any, b0: Any, inverse_root_b0: Any) -> Any:
    """B where the line meets the sphere of radius `foot_re`, nT."""
    return b0 / (foot_re * foot_re * foot_re) * square_root(4.0 - 3.0 * foot_re / r)


@dataclass(frozen=True, eq=False)
class Dipole(MagneticModel):
    """``B_eq = B0 / r^3``; B0 given, or that of the IGRF at an epoch."""

    b0_nT: float | None = None
    epoch: float | None = None

    card: ClassVar[Card] = Card(
        name="dipole",
        kind="magnetic",
        title="Earth's dipole",
        formula="B_eq = b0 / r^3",
        parameters=(
            Parameter("b0_nT", "nT", "equatorial field at 1 R_E", low=0.0, high=1e7, low_open=True),
            Parameter(
                "epoch",
                "year",
                "decimal year whose IGRF-14 degree-1 terms give b0, in place of b0_nT",
                low=EPOCHS[0],
                high=EPOCHS[-1],
            ),
        ),
        reference="IGRF-14 degree-1 terms: Alken et al. (2021), Earth Planets Space 73, 49, and its 2024 update",
    )

    def __post_init__(self) -> None:
        super().__post_init__()
        if (self.b0_nT is None) == (self.epoch is None):
            problem = "missing" if self.b0_nT is None else "given twice, by b0_nT and by epoch"
            raise InputError(problem, "one of b0_nT and epoch", key="b0_nT", value=self.b0_nT)

    def reference_b0_nT(self) -> float:
        """See MagneticModel."""
        return float(self.b0_nT) if self.b0_nT is not None else dipole_field_nT(float(self.epoch or 0.0))

    def field_nT(self, x: Floats, y: Floats, z: Floats) -> tuple[Floats, Floats, Floats]:
        """See MagneticModel; the moment points along -z."""
        r2 = x * x + y * y + z * z
        scale = self.reference_b0_nT() / (r2 * r2 * np.sqrt(r2))
        return -3.0 * scale * x * z, -3.0 * scale * y * z, scale * (r2 - 3.0 * z * z)

    def lines(self) -> LineAverages:
        """See MagneticModel."""
        return DipoleLines(self.reference_b0_nT())

    def terms(self) -> MagneticTerms:
        """See MagneticModel."""
        b0 = self.reference_b0_nT()
        return MagneticTerms(equator, mirror, foot, (b0, b0**-0.5), drift_factor)

    def equatorial_terms(self) -> MagneticTerms:
        """See MagneticModel."""
        return replace(self.terms(), mirror=mirror_at_equator)
