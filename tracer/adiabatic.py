"""Energy and pitch angle to adiabatic invariants and back; periods, drift rates and the Hamiltonian. User units,
numpy broadcasting.

Everything that the field contributes comes through `fields.contract.LineAverages`; nothing here knows what field it
is.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from fields import constants
from fields.contract import LineAverages
from fields.errors import InputError, nearest
from fields.field import Field
from fields.units import (
    RAD_PER_MLT_HOUR,
    Floats,
    cot2_of_pitch,
    k_from_re_sqrtG,
    k_to_re_sqrtG,
    mu_from_MeV_per_G,
    mu_to_MeV_per_G,
    phi_from_mlt,
    pitch_of_cot2,
    rest_energy_keV,
)
from tracer.scenario import SPECIES, Species


@dataclass(frozen=True, eq=False)
class Invariants:
    """First and second adiabatic invariants."""

    mu_MeV_per_G: Floats
    K_re_sqrtG: Floats


@dataclass(frozen=True, eq=False)
class Motion:
    """Kinetic energy and equatorial pitch angle."""

    energy_keV: Floats
    pitch_deg: Floats


@dataclass(frozen=True, eq=False)
class Periods:
    """The three periods in seconds; `drift_s` by gradient and curvature alone, at the local rate."""

    gyro_s: Floats
    bounce_s: Floats
    drift_s: Floats


@dataclass(frozen=True, eq=False)
class DriftRate:
    """Velocity of the equatorial crossing point; eastward positive."""

    dr_re_per_h: Floats
    dmlt_per_h: Floats


def species_named(species: str | Species) -> Species:
    """A species from its name.

    Raises
    ------
    InputError
        For a name not in `tracer.scenario.SPECIES`.
    """
    if isinstance(species, Species):
        return species
    if species not in SPECIES:
        raise InputError("unknown species", nearest(str(species), SPECIES), key="species", value=species)
    return SPECIES[species]


def checked(name: str, value: ArrayLike, low: float, high: float = math.inf, low_open: bool = False) -> Floats:
    """`value` as an array.

    Raises
    ------
    InputError
        Unless every element is finite and between `low` and `high`.
    """
    array = np.asarray(value, dtype=float)
    bad = ~np.isfinite(array) | (array < low) | (array > high) | ((array == low) if low_open else False)
    if np.any(bad):
        upper = f" up to {high:g}" if math.isfinite(high) else ""
        lower = f"a number {'above' if low_open else 'from'} {low:g}" if math.isfinite(low) else "a finite number"
        raise InputError("not a possible value", lower + upper, key=name, value=float(array[bad].ravel()[0]))
    return array


def place(r_re: ArrayLike, mlt_h: ArrayLike) -> tuple[Floats, Floats]:
    """Checked distance in R_E and azimuth in radians."""
    return checked("r_re", r_re, 0.0, low_open=True), phi_from_mlt(checked("mlt_h", mlt_h, -math.inf))


def momentum_term(energy_keV: Floats, rest_keV: ArrayLike) -> Floats:
    """``p^2 / (2 m)`` in keV: W (W + 2 m c^2) / (2 m c^2)."""
    return np.asarray(energy_keV * (1.0 + 0.5 * energy_keV / np.asarray(rest_keV)))


def energy_of(mu: ArrayLike, mirror_nT: ArrayLike, rest_keV: float) -> Floats:
    """Kinetic energy in keV from mu (keV/nT) and the mirror field; no difference of roots, so an eV ion keeps its
    digits."""
    w = np.asarray(mu, dtype=float) * np.asarray(mirror_nT, dtype=float)
    return np.asarray(2.0 * w / (1.0 + np.sqrt(1.0 + 2.0 * w / rest_keV)))


def invariants(
    field: Field, species: str | Species, energy_keV: ArrayLike, pitch_deg: ArrayLike, r_re: ArrayLike, mlt_h: ArrayLike
) -> Invariants:
    """First and second invariant of a particle on the equator.

    ``mu = p_perp^2 / (2 m B)`` with the rest mass; ``K = integral of sqrt(B_m - B) ds`` between the mirror points
    (Roederer 1970, Dynamics of Geomagnetically Trapped Radiation).

    Parameters
    ----------
    field : fields.Field
    species : str or Species
    energy_keV, pitch_deg, r_re, mlt_h : array_like
        Kinetic energy, equatorial pitch angle (0 excluded, up to 90), equatorial distance and magnetic local time;
        they broadcast.

    Returns
    -------
    Invariants
        ``mu_MeV_per_G`` and ``K_re_sqrtG`` of the broadcast shape.

    Raises
    ------
    InputError
        For an unknown species or an impossible value.
    """
    rest = float(rest_energy_keV(species_named(species).mass_kg))
    energy = checked("energy_keV", energy_keV, 0.0)
    cot2 = cot2_of_pitch(checked("pitch_deg", pitch_deg, 0.0, 90.0, low_open=True))
    r, phi = place(r_re, mlt_h)
    mirror = field.equatorial_field(r, phi) * (1.0 + cot2)
    mu, k = np.broadcast_arrays(momentum_term(energy, rest) / mirror, field.lines.second_invariant(cot2, r, phi))
    return Invariants(mu_to_MeV_per_G(mu), k_to_re_sqrtG(k))


def from_invariants(
    field: Field,
    species: str | Species,
    mu_MeV_per_G: ArrayLike,
    K_re_sqrtG: ArrayLike,
    r_re: ArrayLike,
    mlt_h: ArrayLike,
) -> Motion:
    """Energy and equatorial pitch angle where a particle of given invariants crosses the equator: the inverse of
    `invariants`."""
    rest = float(rest_energy_keV(species_named(species).mass_kg))
    mu = mu_from_MeV_per_G(checked("mu_MeV_per_G", mu_MeV_per_G, 0.0))
    k = k_from_re_sqrtG(checked("K_re_sqrtG", K_re_sqrtG, 0.0))
    r, phi = place(r_re, mlt_h)
    cot2 = field.lines.cot2_at(k, r, phi)
    energy = energy_of(mu, field.equatorial_field(r, phi) * (1.0 + cot2), rest)
    energy, pitch = np.broadcast_arrays(energy, pitch_of_cot2(cot2))
    return Motion(energy, pitch)


def periods(
    field: Field, species: str | Species, energy_keV: ArrayLike, pitch_deg: ArrayLike, r_re: ArrayLike, mlt_h: ArrayLike
) -> Periods:
    """Gyro-, bounce- and drift period, arguments as of `invariants`; infinite where the motion stops (zero energy).

    The gyroperiod is that at the equator, ``2 pi gamma m / (|q| B)``; the bounce period the closed integral of ``ds
    / v_par``; the drift period ``2 pi`` over the local rate of the gradient-curvature drift.
    """
    kind = species_named(species)
    rest = float(rest_energy_keV(kind.mass_kg))
    energy = checked("energy_keV", energy_keV, 0.0)
    cot2 = cot2_of_pitch(checked("pitch_deg", pitch_deg, 0.0, 90.0, low_open=True))
    r, phi = place(r_re, mlt_h)
    b = field.equatorial_field(r, phi)
    gamma = 1.0 + energy / rest
    gyro = 2.0 * np.pi * gamma * kind.mass_kg / (abs(kind.charge_e) * constants.ELEMENTARY_CHARGE_C * b * 1e-9)
    speed = np.sqrt(energy * (energy + 2.0 * rest)) / (energy + rest) * constants.SPEED_OF_LIGHT_M_S
    _, rate = _slopes(field, kind, energy, cot2, r, phi, 0.0, electric=False)
    with np.errstate(divide="ignore"):
        bounce = field.lines.bounce_path(cot2, r, phi) * constants.EARTH_RADIUS_M / speed
        drift = 2.0 * np.pi / np.abs(rate) * 3600.0
    return Periods(*np.broadcast_arrays(gyro, bounce, drift))


def drift_rate(
    field: Field,
    species: str | Species,
    energy_keV: ArrayLike,
    pitch_deg: ArrayLike,
    r_re: ArrayLike,
    mlt_h: ArrayLike,
    time_h: ArrayLike = 0.0,
) -> DriftRate:
    """Bounce-averaged drift: ``d(x)/dt = zhat x grad H / (q B_eq)`` at fixed mu and K (Northrop 1963; Roederer 1970).

    Arguments as of `invariants`, and `time_h` in hours since start.
    """
    kind = species_named(species)
    cot2 = cot2_of_pitch(checked("pitch_deg", pitch_deg, 0.0, 90.0, low_open=True))
    r, phi = place(r_re, mlt_h)
    energy = checked("energy_keV", energy_keV, 0.0)
    radial, turning = _slopes(field, kind, energy, cot2, r, phi, checked("time_h", time_h, -math.inf))
    radial, turning = np.broadcast_arrays(radial, turning / RAD_PER_MLT_HOUR)
    return DriftRate(radial, turning)


def hamiltonian_keV(
    field: Field,
    species: str | Species,
    energy_keV: ArrayLike,
    pitch_deg: ArrayLike,
    r_re: ArrayLike,
    mlt_h: ArrayLike,
    time_h: ArrayLike = 0.0,
) -> Floats:
    """Kinetic energy plus charge times potential, keV: constant along a path in a steady field."""
    kind = species_named(species)
    checked("pitch_deg", pitch_deg, 0.0, 90.0, low_open=True)
    r, phi = place(r_re, mlt_h)
    potential = field.potential_and_slopes(r, phi, checked("time_h", time_h, -math.inf))[0]
    total = checked("energy_keV", energy_keV, 0.0) + kind.charge_e * potential
    return np.asarray(total + 0.0 * np.asarray(pitch_deg, dtype=float))


def _slopes(
    field: Field,
    kind: Species,
    energy: Floats,
    cot2: Floats,
    r: Floats,
    phi: Floats,
    time_h: ArrayLike,
    electric: bool = True,
) -> tuple[Any, Any]:
    """dr/dt in R_E/h and dphi/dt in rad/h."""
    rest = float(rest_energy_keV(kind.mass_kg))
    # mu B_m / gamma = p^2 / (2 m gamma): what dW is for a relative change of the mirror field
    weight = momentum_term(energy, rest) / (1.0 + energy / rest) / kind.charge_e
    by_r, by_phi = field.lines.mirror_slopes(cot2, r, phi)
    h_r, h_phi = weight * by_r, weight * by_phi
    if electric:
        _, e_r, e_phi = field.potential_and_slopes(r, phi, time_h)
        h_r, h_phi = h_r + e_r, h_phi + e_phi
    scale = constants.KV_PER_NT_RE2_TO_PER_H / (field.equatorial_field(r, phi) * r)
    return -scale * h_phi, scale * h_r


def bounce_T(pitch_deg: ArrayLike) -> Floats:
    """The dipole's bounce integral T: the bounce period is ``4 r T / v`` (Hamlin et al. 1961), by exact
    quadrature."""
    cot2 = cot2_of_pitch(checked("pitch_deg", pitch_deg, 0.0, 90.0, low_open=True))
    return np.asarray(_unit_dipole().bounce_path(cot2, 1.0, 0.0) / 4.0)


def bounce_Y(pitch_deg: ArrayLike) -> Floats:
    """The dipole's bounce integral Y: ``K = R_E sqrt(B0 / r) Y / sin(pitch)`` (Schulz & Lanzerotti 1974), by exact
    quadrature."""
    pitch = checked("pitch_deg", pitch_deg, 0.0, 90.0, low_open=True)
    cot2 = cot2_of_pitch(pitch)
    return np.asarray(_unit_dipole().second_invariant(cot2, 1.0, 0.0) / np.sqrt(1.0 + cot2))


def _unit_dipole() -> LineAverages:
    from fields import Dipole  # nothing else here knows which magnetic model it works in

    return Dipole(b0_nT=1.0).lines()
