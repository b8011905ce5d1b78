"""Constants against scipy.constants (CODATA 2022) and against each other."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import constants as codata
from tolerances import bound

from fields import constants


@pytest.mark.parametrize(
    ("ours", "theirs"),
    [
        ("SPEED_OF_LIGHT_M_S", "speed of light in vacuum"),
        ("ELEMENTARY_CHARGE_C", "elementary charge"),
        ("ATOMIC_MASS_KG", "atomic mass constant"),
        ("ELECTRON_MASS_KG", "electron mass"),
        ("PROTON_MASS_KG", "proton mass"),
        ("ALPHA_MASS_KG", "alpha particle mass"),
        ("VACUUM_PERMEABILITY", "vacuum mag. permeability"),
    ],
)
def test_constant_is_the_codata_value(ours: str, theirs: str) -> None:
    assert getattr(constants, ours) == codata.value(theirs)


def test_earth_radius_is_the_reference_radius_of_the_igrf() -> None:
    # Alken et al. (2021), Earth Planets Space 73, 49: a = 6371.2 km
    assert constants.EARTH_RADIUS_KM == 6371.2
    assert constants.EARTH_RADIUS_M == 6371200.0


def test_the_frame_turns_once_in_a_solar_day() -> None:
    turned = constants.ROTATION_RAD_PER_H * 24.0
    assert turned == pytest.approx(2 * np.pi, rel=bound("rounding"))


def test_one_millivolt_per_metre_in_100_nanotesla_drives_ten_kilometres_per_second() -> None:
    # E/B in SI units
    speed_m_s = 1e-3 / 100e-9
    gradient_kV_per_re = 1.0 * constants.MV_PER_M_RE_TO_KV
    speed_re_per_h = constants.KV_PER_NT_RE2_TO_PER_H * gradient_kV_per_re / 100.0
    assert speed_re_per_h * constants.EARTH_RADIUS_M / codata.hour == pytest.approx(speed_m_s, rel=bound("rounding"))
