"""Conversions at the boundary: scipy.constants for the factors, mpmath for the pitch angle, laws for the rest."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import constants as codata
from tolerances import bound

from fields import constants, units

finite = st.floats(-1e6, 1e6)


def test_first_invariant_in_si() -> None:
    # 1 MeV/G and 1 keV/nT, both in J/T
    mev_per_gauss = 1e6 * codata.eV / 1e-4
    kev_per_nanotesla = 1e3 * codata.eV / 1e-9
    got = units.mu_from_MeV_per_G(1.0)
    assert got == pytest.approx(mev_per_gauss / kev_per_nanotesla, rel=bound("rounding"))


def test_second_invariant_in_si() -> None:
    # the square root of 1 G = 1e-4 T over 1 nT = 1e-9 T
    assert units.k_from_re_sqrtG(1.0) == pytest.approx(np.sqrt(1e-4 / 1e-9), rel=bound("rounding"))


@given(finite)
def test_invariants_go_there_and_back(value: float) -> None:
    there_and_back = (
        units.mu_to_MeV_per_G(units.mu_from_MeV_per_G(value)),
        units.k_to_re_sqrtG(units.k_from_re_sqrtG(value)),
    )
    assert there_and_back == pytest.approx((value, value), rel=bound("rounding"))


@pytest.mark.parametrize(
    ("mass_kg", "name"),
    [
        (constants.ELECTRON_MASS_KG, "electron mass energy equivalent in MeV"),
        (constants.PROTON_MASS_KG, "proton mass energy equivalent in MeV"),
        (constants.ALPHA_MASS_KG, "alpha particle mass energy equivalent in MeV"),
    ],
    ids=["electron", "proton", "alpha"],
)
def test_rest_energies_are_those_of_codata(mass_kg: float, name: str) -> None:
    value, _, uncertainty = codata.physical_constants[name]
    # masses in kg and in MeV are rounded apart, to the 11th or 12th digit
    assert abs(float(units.rest_energy_keV(mass_kg)) / 1e3 - value) < max(uncertainty, 2e-10 * value)


@pytest.mark.parametrize(
    ("mlt_h", "phi"),
    [(12.0, 0.0), (18.0, np.pi / 2), (0.0, -np.pi), (24.0, -np.pi), (6.0, -np.pi / 2), (15.0, np.pi / 4)],
    ids=["noon", "dusk", "midnight", "midnight again", "dawn", "afternoon"],
)
def test_local_time_names_the_directions(mlt_h: float, phi: float) -> None:
    assert units.phi_from_mlt(mlt_h) == pytest.approx(phi, rel=bound("rounding"))
    assert units.mlt_from_phi(phi) == pytest.approx(mlt_h % 24.0, rel=bound("rounding"))


@given(st.floats(0.0, 24.0, exclude_max=True))
def test_local_time_goes_there_and_back(mlt_h: float) -> None:
    gap = abs(float(units.mlt_from_phi(units.phi_from_mlt(mlt_h))) - mlt_h)
    assert min(gap, 24.0 - gap) < 1e-14 * 24.0


@given(st.floats(-1e3, 1e3))
def test_local_time_stays_on_the_clock(phi: float) -> None:
    mlt = float(units.mlt_from_phi(phi))
    assert 0.0 <= mlt < 24.0
    turns = (float(units.phi_from_mlt(mlt)) - phi) / (2 * np.pi)
    assert abs(turns - round(turns)) < 1e-12


def test_a_hair_before_midnight_is_not_hour_24() -> None:
    assert units.mlt_from_phi(np.nextafter(-np.pi, -4.0)) < 24.0
    assert units.mlt_from_phi(-np.pi - 1e-300) == 0.0


@pytest.mark.parametrize("pitch_deg", [90.0, 89.999999, 89.9, 75.0, 45.0, 20.0, 1.0, 0.01])
def test_cot2_keeps_its_digits(pitch_deg: float) -> None:
    # mpmath, from the double that was given
    with mpmath.workdps(40):
        exact = mpmath.cot(mpmath.radians(mpmath.mpf(pitch_deg))) ** 2 if pitch_deg < 90 else mpmath.mpf(0)
        assert abs(float(units.cot2_of_pitch(pitch_deg)) - exact) <= bound("rounding") * exact


@pytest.mark.parametrize("cot2", [0.0, 1e-30, 1e-8, 0.3, 1.0, 1.0000001, 30.0, 1e12])
def test_pitch_of_cot2_keeps_its_digits(cot2: float) -> None:
    # mpmath: both the pitch angle and what it lacks to 90 degrees, to the rounding of the pitch angle itself
    with mpmath.workdps(60):
        exact = mpmath.degrees(mpmath.acot(mpmath.sqrt(mpmath.mpf(cot2)))) if cot2 else mpmath.mpf(90)
        assert abs(float(units.pitch_of_cot2(cot2)) - exact) <= bound("rounding") * exact


@given(st.floats(1e-3, 90.0))
def test_pitch_angle_goes_there_and_back(pitch_deg: float) -> None:
    back = float(units.pitch_of_cot2(units.cot2_of_pitch(pitch_deg)))
    assert back == pytest.approx(pitch_deg, rel=bound("rounding"), abs=0)


def test_conversions_keep_shapes() -> None:
    grid = np.ones((2, 3))
    for convert in (
        units.mu_from_MeV_per_G,
        units.mu_to_MeV_per_G,
        units.k_from_re_sqrtG,
        units.k_to_re_sqrtG,
        units.rest_energy_keV,
        units.phi_from_mlt,
        units.mlt_from_phi,
        units.cot2_of_pitch,
        units.pitch_of_cot2,
    ):
        assert convert(grid).shape == (2, 3)
