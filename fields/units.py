"""Units at the boundary. Inside, one system: R_E, hours, keV, elementary charges, nT, kV, radians.

Charge times potential is then an energy in keV, and the drift needs the single constant
`fields.constants.KV_PER_NT_RE2_TO_PER_H`.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fields.constants import ELEMENTARY_CHARGE_C, SPEED_OF_LIGHT_M_S

Floats = NDArray[np.float64]

NT_PER_GAUSS = 1e5
KEV_PER_NT_PER_MEV_PER_GAUSS = 1e3 / NT_PER_GAUSS  # 1 MeV/G in keV/nT
SQRT_NT_PER_SQRT_GAUSS = float(np.sqrt(NT_PER_GAUSS))
RAD_PER_MLT_HOUR = np.pi / 12.0


def mu_from_MeV_per_G(mu: ArrayLike) -> Floats:
    """First invariant, MeV/G to keV/nT."""
    return np.asarray(mu, dtype=float) * KEV_PER_NT_PER_MEV_PER_GAUSS


def mu_to_MeV_per_G(mu: ArrayLike) -> Floats:
    """First invariant, keV/nT to MeV/G."""
    return np.asarray(mu, dtype=float) / KEV_PER_NT_PER_MEV_PER_GAUSS


def k_from_re_sqrtG(k: ArrayLike) -> Floats:
    """Second invariant, R_E G^(1/2) to R_E nT^(1/2)."""
    return np.asarray(k, dtype=float) * SQRT_NT_PER_SQRT_GAUSS


def k_to_re_sqrtG(k: ArrayLike) -> Floats:
    """Second invariant, R_E nT^(1/2) to R_E G^(1/2)."""
    return np.asarray(k, dtype=float) / SQRT_NT_PER_SQRT_GAUSS


def rest_energy_keV(mass_kg: ArrayLike) -> Floats:
    """Rest energy m c^2."""
    return np.asarray(np.asarray(mass_kg, dtype=float) * SPEED_OF_LIGHT_M_S**2 / ELEMENTARY_CHARGE_C * 1e-3)


def phi_from_mlt(mlt_h: ArrayLike) -> Floats:
    """Azimuth in radians, eastward from noon (SM x axis), in [-pi, pi), from magnetic local time in hours."""
    return np.asarray((np.mod(np.asarray(mlt_h, dtype=float), 24.0) - 12.0) * RAD_PER_MLT_HOUR)


def mlt_from_phi(phi: ArrayLike) -> Floats:
    """Magnetic local time in [0, 24) hours from azimuth in radians."""
    mlt = np.mod(12.0 + np.asarray(phi, dtype=float) / RAD_PER_MLT_HOUR, 24.0)
    return np.where(mlt >= 24.0, 0.0, mlt)  # mod of a tiny negative number rounds up to 24


def cot2_of_pitch(pitch_deg: ArrayLike) -> Floats:
    """cot^2 of the equatorial pitch angle, with full relative accuracy near 90 degrees and near 0."""
    pitch = np.asarray(pitch_deg, dtype=float)
    return np.asarray((np.sin(np.radians(90.0 - pitch)) / np.sin(np.radians(pitch))) ** 2)


def pitch_of_cot2(cot2: ArrayLike) -> Floats:
    """Equatorial pitch angle in (0, 90] degrees from its cot^2."""
    cot = np.sqrt(np.asarray(cot2, dtype=float))
    steep = cot > 1.0
    return np.where(
        steep,
        np.degrees(np.arctan(1.0 / np.where(steep, cot, 1.0))),
        90.0 - np.degrees(np.arctan(np.where(steep, 0.0, cot))),
    )
