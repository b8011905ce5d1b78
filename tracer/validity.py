"""Where drift theory stops holding: the ratios that must be small, over a sample of a population at release.

Those that need a model of the plasma density (Alfven travel time, electron inertial length) are not among them.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fields.constants import EARTH_RADIUS_M, ELEMENTARY_CHARGE_C, SPEED_OF_LIGHT_M_S
from fields.field import Field
from fields.units import RAD_PER_MLT_HOUR, Floats, phi_from_mlt, rest_energy_keV
from tracer.adiabatic import drift_rate, periods
from tracer.scenario import Species

LIMIT = 0.1  # common practice: a ratio above it deserves a second thought


@dataclass(frozen=True)
class Ratio:
    """One ratio over a population.

    Attributes
    ----------
    name, meaning : str
    median, largest : float
    share_above : float
        Share of the sample above `LIMIT`.
    worst : str
        The particle in which it is largest.
    """

    name: str
    meaning: str
    median: float
    largest: float
    share_above: float
    worst: str


def driver_time_scale_h(field: Field) -> float:
    """Shortest time over which any driver holds a value or changes by a factor e, hours; infinite in a steady
    field."""
    scales = [np.inf]
    for driver in field.drivers:
        lengths = np.diff(driver.corners())
        if driver.value.size > 1 and np.any(np.diff(driver.value)):
            scales.append(float(lengths.min()))
        changing = driver.slope != 0
        if np.any(changing):
            scales.append(float(np.min(np.abs(driver.value[changing] / driver.slope[changing]).clip(min=1e-3))))
    return min(scales)


def gyroradius_re(field: Field, species: Species, energy_keV: Floats, r_re: Floats, mlt_h: Floats) -> Floats:
    """Gyroradius of the whole momentum at the equator, ``p / (|q| B)``, R_E."""
    rest = float(rest_energy_keV(species.mass_kg))
    momentum = np.sqrt(energy_keV * (energy_keV + 2.0 * rest)) * 1e3 * ELEMENTARY_CHARGE_C / SPEED_OF_LIGHT_M_S
    strength = abs(species.charge_e) * ELEMENTARY_CHARGE_C * field.b_eq_nT(r_re, mlt_h) * 1e-9
    return np.asarray(momentum / strength / EARTH_RADIUS_M)


def ratios(field: Field, species: Species, sample: dict[str, np.ndarray]) -> list[Ratio]:
    """The validity ratios of physics of drift over the particles of `sample` (release columns, one species).

    Returns
    -------
    list of Ratio
        Gyroradius over field-line curvature radius; bounce over drift period; bounce period over the drivers' time
        scale; drift speed over particle speed (Northrop 1963, The Adiabatic Motion of Charged Particles). Cold
        particles, which do not gyrate, are left out.
    """
    moving = sample["energy_keV"] > 0
    if not np.any(moving):
        return []
    energy, pitch, r, mlt, release = (
        sample[name][moving] for name in ("energy_keV", "pitch_deg", "r_re", "mlt_h", "release_h")
    )
    time = periods(field, species, energy, pitch, r, mlt)
    rate = drift_rate(field, species, energy, pitch, r, mlt, release)
    drift_re_per_s = np.hypot(rate.dr_re_per_h, r * rate.dmlt_per_h * RAD_PER_MLT_HOUR) / 3600.0
    rest = float(rest_energy_keV(species.mass_kg))
    speed_re_per_s = np.sqrt(energy * (energy + 2 * rest)) / (energy + rest) * SPEED_OF_LIGHT_M_S / EARTH_RADIUS_M
    table = {
        "gyroradius / curvature radius": (
            "the field changes little over a gyration",
            gyroradius_re(field, species, energy, r, mlt) / field.curvature_radius(r, phi_from_mlt(mlt)),
        ),
        "bounce period / drift period": ("many bounces in a drift", time.bounce_s / time.drift_s),
        "bounce period / driver time scale": (
            "many bounces before the drivers change",
            time.bounce_s / 3600.0 / driver_time_scale_h(field),
        ),
        "drift speed / particle speed": ("the drift is slow", drift_re_per_s / speed_re_per_s),
    }
    named = zip(energy, pitch, r, mlt, strict=True)
    words = [f"{e:.4g} keV, {a:.3g} deg, {d:.3g} R_E, {t:.3g} h" for e, a, d, t in named]
    return [
        Ratio(
            name,
            meaning,
            float(np.median(values)),
            float(values.max()),
            float(np.mean(values > LIMIT)),
            words[int(np.argmax(values))],
        )
        for name, (meaning, values) in table.items()
    ]
