"""Drift, bounce and gyro periods against quadrature of the textbook drift velocities, and against handbooks."""

from __future__ import annotations

from functools import lru_cache

import mpmath
import numpy as np
import pytest
from physics import made
from scipy import constants as codata

import fields
import tracer
from tracer.scenario import SPECIES

B0_NT = made.B0_NT
R_E_M = 6371.2e3
FIELD = fields.compose(fields.Dipole(b0_nT=B0_NT))
PITCHES_DEG = (5.0, 20.0, 45.0, 70.0, 85.0, 90.0)
ENERGIES_KEV = np.array([1.0, 10.0, 100.0, 1000.0, 5000.0])
SHELLS = np.array([2.0, 3.5, 5.0, 6.6, 8.0])
MASSES_KG = {"e-": codata.m_e, "H+": codata.m_p, "O+": 15.999 * codata.atomic_mass - codata.m_e}
AGREEMENT = 1e-9


@lru_cache
def bounce_averages(pitch_deg: float) -> tuple[float, float]:
    """(bounce path / 4 r, mean of the azimuthal rate in units of p v / (q B_eq r^2)) on a dipole line.

    Gradient and curvature drift without currents go with v^2 (1 - B/2B_m) times the line's curvature,
    3 (1 + sin^2 l) / (r cos(l) (1 + 3 sin^2 l)^(3/2)), over the gyrofrequency; the distance to the axis is
    r cos^3(l). The average is over ds / v_par (Hamlin et al. 1961, J. Geophys. Res. 66, 1; Schulz & Lanzerotti 1974,
    Particle Diffusion in the Radiation Belts).
    """
    with mpmath.workdps(40):
        y2 = mpmath.sin(mpmath.radians(mpmath.mpf(pitch_deg))) ** 2

        def ratio(latitude: mpmath.mpf) -> mpmath.mpf:
            c2 = mpmath.cos(latitude) ** 2
            return y2 * mpmath.sqrt(4 - 3 * c2) / c2**3

        if pitch_deg == 90.0:
            # the well is parabolic, sqrt(1 - B/B_m) = (3 / sqrt 2) sqrt(l_m^2 - l^2), and the rate that on the equator
            return float(mpmath.pi / 2 * mpmath.sqrt(2) / 3), 1.5
        low, high = mpmath.mpf(0), mpmath.pi / 2
        for _ in range(140):
            middle = (low + high) / 2
            low, high = (middle, high) if ratio(middle) < 1 else (low, middle)

        def integral(rate: bool) -> mpmath.mpf:
            def smooth(q: mpmath.mpf) -> mpmath.mpf:
                latitude = low - q * q
                c = mpmath.cos(latitude)
                b = ratio(latitude)
                length = c * mpmath.sqrt(4 - 3 * c * c)
                turning = 3 * (2 - c * c) * (1 - b / 2) * c**2 / (4 - 3 * c * c) ** 2 if rate else 1
                return 2 * q * length * turning / mpmath.sqrt(1 - b)

            pieces = mpmath.linspace(0, mpmath.sqrt(low), 5)
            value, error = mpmath.quad(smooth, pieces, method="gauss-legendre", error=True)
            assert error < 1e-12 * value
            return value

        path = integral(rate=False)
        return float(path), float(integral(rate=True) / path)


def speed_and_strength(species: str, energy_keV: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """v in m/s and p v in J."""
    rest = MASSES_KG[species] * codata.c**2
    w = energy_keV * 1e3 * codata.e
    return np.sqrt(w * (w + 2.0 * rest)) / (w + rest) * codata.c, w * (w + 2.0 * rest) / (w + rest)


@pytest.mark.parametrize("pitch_deg", PITCHES_DEG)
@pytest.mark.parametrize("species", MASSES_KG)
def test_drift_period_against_quadrature(species: str, pitch_deg: float) -> None:
    energy, shell = ENERGIES_KEV[:, None], SHELLS
    mean_rate = bounce_averages(pitch_deg)[1]
    field_tesla = B0_NT * 1e-9 / shell**3
    rate = mean_rate * speed_and_strength(species, energy)[1] / (codata.e * field_tesla * (shell * R_E_M) ** 2)
    got = tracer.periods(FIELD, species, energy, pitch_deg, shell, 0.0).drift_s
    np.testing.assert_allclose(got, 2.0 * np.pi / rate, rtol=AGREEMENT)


@pytest.mark.parametrize("pitch_deg", PITCHES_DEG)
@pytest.mark.parametrize("species", MASSES_KG)
def test_bounce_period_against_quadrature(species: str, pitch_deg: float) -> None:
    path = 4.0 * bounce_averages(pitch_deg)[0] * SHELLS * R_E_M
    want = path / speed_and_strength(species, ENERGIES_KEV[:, None])[0]
    got = tracer.periods(FIELD, species, ENERGIES_KEV[:, None], pitch_deg, SHELLS, 0.0).bounce_s
    np.testing.assert_allclose(got, want, rtol=AGREEMENT)


@pytest.mark.parametrize("species", MASSES_KG)
def test_gyroperiod_against_the_textbook(species: str) -> None:
    # 2 pi gamma m / (e B) at the equator, whatever the pitch angle
    gamma = 1.0 + ENERGIES_KEV[:, None] * 1e3 * codata.e / (MASSES_KG[species] * codata.c**2)
    want = 2.0 * np.pi * gamma * MASSES_KG[species] / (codata.e * B0_NT * 1e-9 / SHELLS**3)
    for pitch_deg in (30.0, 90.0):
        got = tracer.periods(FIELD, species, ENERGIES_KEV[:, None], pitch_deg, SHELLS, 0.0).gyro_s
        np.testing.assert_allclose(got, want, rtol=AGREEMENT)


def test_a_1_MeV_electron_at_6_6_earth_radii_drifts_round_in_ten_minutes() -> None:
    # handbooks: about 10 minutes at geosynchronous orbit; 9.63 min with B0 = 30000 nT
    minutes = float(tracer.periods(FIELD, "e-", 1000.0, 90.0, 6.6, 0.0).drift_s) / 60.0
    assert minutes == pytest.approx(10.0, rel=0.1)
    assert minutes == pytest.approx(9.63, abs=0.005)


@pytest.mark.parametrize("pitch_deg", [30.0, 60.0, 90.0])
def test_handbook_formula_of_the_bounce_period(pitch_deg: float) -> None:
    # 0.117 L / beta (1 - 0.4635 sin^(3/4)) s, good to 1 %: Walt (1994), Introduction to Geomagnetically Trapped
    # Radiation, from memory
    beta = float(speed_and_strength("e-", np.array(1000.0))[0]) / codata.c
    want = 0.117 * 6.6 / beta * (1.0 - 0.4635 * np.sin(np.radians(pitch_deg)) ** 0.75)
    assert float(tracer.periods(FIELD, "e-", 1000.0, pitch_deg, 6.6, 0.0).bounce_s) == pytest.approx(want, rel=1e-2)


def test_handbook_gyrofrequencies() -> None:
    # 28.0 Hz and 0.01525 Hz per nT for cold electrons and protons: common practice
    b = B0_NT / 4.0**3
    for species, hertz_per_nT in (("e-", 28.0), ("H+", 0.01525)):
        period = float(tracer.periods(FIELD, species, 1e-6, 90.0, 4.0, 0.0).gyro_s)
        assert 1.0 / period == pytest.approx(hertz_per_nT * b, rel=1e-3)


TURNING = [  # species, energy, pitch, r; energetic ones
    ("e-", 1000.0, 90.0, 6.6),
    ("e-", 5000.0, 20.0, 2.0),
    ("e-", 20.0, 45.0, 5.0),
    ("H+", 300.0, 60.0, 4.0),
    ("H+", 5000.0, 5.0, 3.0),
    ("O+", 100.0, 85.0, 7.0),
]


@pytest.mark.parametrize(("species", "energy_keV", "pitch_deg", "r_re"), TURNING)
def test_the_traced_particle_is_round_after_one_period(
    species: str, energy_keV: float, pitch_deg: float, r_re: float
) -> None:
    rate = bounce_averages(pitch_deg)[1] * float(speed_and_strength(species, np.array(energy_keV))[1])
    rate /= codata.e * B0_NT * 1e-9 / r_re**3 * (r_re * R_E_M) ** 2
    one = made.single("one", species, r_re=r_re, mlt_h=3.0, energy_keV=energy_keV, pitch_deg=pitch_deg, release_h=0.0)
    hours = 2.0 * np.pi / rate / 3600.0
    end = tracer.trace(tracer.build(made.tables([], [one], time={"start": made.START, "hours": hours}))).end
    print(f"{species} {energy_keV:g} keV {pitch_deg:g} deg: turns {float(end['turns'][0]):.15f}")
    assert float(end["turns"][0]) == pytest.approx(-float(np.sign(SPECIES[species].charge_e)), abs=1e-11)
    assert float(end["r_re"][0]) == pytest.approx(r_re, rel=1e-13)
    assert float(end["energy_keV"][0]) == pytest.approx(energy_keV, rel=1e-12)
