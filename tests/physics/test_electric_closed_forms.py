"""Electric fields against closed forms: stagnation points, separatrices, E x B speeds, amplitudes by Kp.

Cold plasma drifts along equipotentials; in ``Phi = -C/r - A r^gamma sin(phi)`` the last closed one passes the
stagnation point at dusk, r_s^(gamma + 1) = C / (gamma A). Volland (1973), J. Geophys. Res. 78, 171; Stern (1975),
ibid. 80, 595.
"""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from scipy import constants as codata
from scipy.optimize import brentq, minimize_scalar, root
from tolerances import bound

import fields
import tracer
from fields.constants import EARTH_RADIUS_M
from fields.electric.volland_stern import maynard_chen_amplitude

B0_NT = 30000.0
C_KV = 88.0
DIPOLE = fields.Dipole(b0_nT=B0_NT)
DUSK, DAWN, NOON, MIDNIGHT = 18.0, 6.0, 12.0, 0.0

# gamma, amplitude in kV at 1 R_E
SHIELDINGS = [(1.0, 4.0), (2.0, 0.4), (3.0, 0.05)]
shielded = pytest.mark.parametrize(("gamma", "amplitude"), SHIELDINGS, ids=["gamma 1", "gamma 2", "gamma 3"])


def convection(gamma: float, amplitude: float, phi0_deg: float = 0.0) -> fields.Field:
    model = fields.VollandStern(gamma=gamma, amplitude_kV=amplitude, phi0_deg=phi0_deg)
    return fields.compose(DIPOLE, [fields.Corotation(potential_kV=C_KV), model])


def stagnation(field: fields.Field, guess_re: float, guess_mlt_h: float) -> np.ndarray:
    """(r, mlt) where the potential is level, from values of the potential alone."""

    def slopes(place: np.ndarray) -> list[float]:
        def central(r_step: float, mlt_step: float) -> float:  # of sixth order
            steps = ((1, 3 / 4), (2, -3 / 20), (3, 1 / 60))
            (r, mlt), phi = place, field.potential_kV
            pairs = [(w, n * r_step, n * mlt_step) for n, w in steps]
            return float(sum(w * (phi(r + a, mlt + b) - phi(r - a, mlt - b)) for w, a, b in pairs))

        h = 1e-2
        return [central(h, 0.0) / h, central(0.0, h) / h]

    found = root(slopes, [guess_re, guess_mlt_h], tol=1e-13)
    assert np.max(np.abs(found.fun)) < 1e-8
    return np.asarray(found.x)


@shielded
def test_stagnation_point_at_dusk(gamma: float, amplitude: float) -> None:
    r_s = (C_KV / (gamma * amplitude)) ** (1.0 / (gamma + 1.0))
    r, mlt = stagnation(convection(gamma, amplitude), 1.1 * r_s, 17.5)
    assert r == pytest.approx(r_s, rel=bound("closed form"))
    assert mlt == pytest.approx(DUSK, abs=1e-8)


def test_a_turned_pattern_has_its_stagnation_point_later() -> None:
    r_s = (C_KV / (2.0 * 0.4)) ** (1.0 / 3.0)
    r, mlt = stagnation(convection(2.0, 0.4, phi0_deg=30.0), 1.05 * r_s, 19.5)
    assert r == pytest.approx(r_s, rel=bound("closed form"))
    assert mlt == pytest.approx(DUSK + 2.0, abs=1e-8)


# Distances of the last closed equipotential in units of r_s. Dawn: x of gamma/x - x^gamma = gamma + 1.
SEPARATRIX = [
    (1.0, 4.0, NOON, 1 / 2),
    (1.0, 4.0, MIDNIGHT, 1 / 2),
    (1.0, 4.0, DAWN, np.sqrt(2.0) - 1.0),
    (2.0, 0.4, NOON, 2 / 3),
    (2.0, 0.4, MIDNIGHT, 2 / 3),
    (2.0, 0.4, DAWN, 0.5960716379833215),
    (3.0, 0.05, NOON, 3 / 4),
    (3.0, 0.05, MIDNIGHT, 3 / 4),
    (3.0, 0.05, DAWN, float(brentq(lambda x: 3.0 / x - x**3 - 4.0, 0.5, 1.0, xtol=1e-15))),
]


@pytest.mark.parametrize(("gamma", "amplitude", "mlt", "share"), SEPARATRIX)
def test_last_closed_equipotential(gamma: float, amplitude: float, mlt: float, share: float) -> None:
    field = convection(gamma, amplitude)
    r_s = float(stagnation(field, (C_KV / (gamma * amplitude)) ** (1.0 / (gamma + 1.0)), DUSK)[0])
    level = float(field.potential_kV(r_s, DUSK))
    r = brentq(lambda q: float(field.potential_kV(q, mlt)) - level, 0.2 * r_s, 0.99 * r_s, xtol=1e-14)
    assert r == pytest.approx(share * r_s, rel=bound("closed form"))


def test_gamma_1_is_the_uniform_field() -> None:
    # -A r sin(phi) with A = E0 R_E
    amplitude = 0.3e-3 * EARTH_RADIUS_M / 1e3
    one = fields.compose(DIPOLE, [fields.VollandStern(gamma=1.0, amplitude_kV=amplitude)])
    other = fields.compose(DIPOLE, [fields.Uniform(e0_mV_per_m=0.3)])
    r, mlt = np.array([1.5, 4.0, 9.0])[:, None], np.array([1.0, 7.0, 17.0, 22.0])
    np.testing.assert_allclose(one.potential_kV(r, mlt), other.potential_kV(r, mlt), rtol=bound("rounding"))


def test_potentials_add_up() -> None:
    parts: list[Any] = [fields.Corotation(), fields.Uniform(e0_mV_per_m=0.2), fields.VollandStern(kp=3.0)]
    total = fields.compose(DIPOLE, parts).potential_kV([3.0, 7.0], [2.0, 20.0])
    alone = sum(fields.compose(DIPOLE, [part]).potential_kV([3.0, 7.0], [2.0, 20.0]) for part in parts)
    np.testing.assert_allclose(total, alone, rtol=bound("rounding"))


# --------------------------------------------------------------------------------------------------------- speeds


def test_cold_plasma_corotates_once_in_a_solar_day() -> None:
    field = fields.compose(DIPOLE, [fields.Corotation()])
    rate = tracer.drift_rate(field, "H+", 0.0, 90.0, [2.0, 4.0, 6.6], [0.0, 6.0, 17.0], 0.0)
    np.testing.assert_allclose(rate.dmlt_per_h, 1.0, rtol=bound("rounding"))
    np.testing.assert_allclose(rate.dr_re_per_h, 0.0, atol=1e-13)


def test_corotation_potential_in_si() -> None:
    # C = Omega B0 R_E^2: 91.5 kV at the usual 31000 nT or so (handbooks)
    want_volt = 2.0 * np.pi / codata.day * B0_NT * 1e-9 * EARTH_RADIUS_M**2
    got = float(fields.compose(DIPOLE, [fields.Corotation()]).potential_kV(1.0, 0.0))
    assert -got * 1e3 == pytest.approx(want_volt, rel=bound("rounding"))
    assert 85.0 < -got < 95.0


@pytest.mark.parametrize("species", ["e-", "H+", "O+"])
def test_uniform_field_drives_every_cold_particle_sunward_at_e_over_b(species: str) -> None:
    e0 = 0.5
    field = fields.compose(DIPOLE, [fields.Uniform(e0_mV_per_m=e0)])
    r, mlt = np.array([3.0, 5.0, 8.0]), np.array([0.0, 21.0, 11.0])
    phi = (mlt - 12.0) * np.pi / 12.0
    b_tesla = B0_NT * 1e-9 / r**3
    sunward_re_per_h = e0 * 1e-3 / b_tesla * codata.hour / EARTH_RADIUS_M
    rate = tracer.drift_rate(field, species, 0.0, 90.0, r, mlt, 0.0)
    np.testing.assert_allclose(rate.dr_re_per_h, sunward_re_per_h * np.cos(phi), rtol=1e-13)
    eastward = -sunward_re_per_h * np.sin(phi) / r * 12.0 / np.pi
    np.testing.assert_allclose(rate.dmlt_per_h, eastward, rtol=1e-12, atol=1e-14)


# ---------------------------------------------------------------------------------------------------- Maynard & Chen


@pytest.mark.parametrize("kp", [0, 1, 3, 4, 6, 9])
def test_amplitude_by_kp_in_exact_arithmetic(kp: int) -> None:
    # Maynard & Chen (1975), J. Geophys. Res. 80, 1009; constants from memory
    exact = Fraction(45, 1000) / (1 - Fraction(159, 1000) * kp + Fraction(93, 10000) * kp**2) ** 3
    assert maynard_chen_amplitude(float(kp)) == pytest.approx(float(exact), rel=1e-13)


def test_amplitude_peaks_at_kp_8_55_and_falls_after() -> None:
    found = minimize_scalar(lambda kp: -maynard_chen_amplitude(kp), bounds=(7.0, 9.0), method="bounded")
    assert found.x == pytest.approx(8.55, abs=0.005)
    assert maynard_chen_amplitude(9.0) < maynard_chen_amplitude(8.5)


@pytest.mark.parametrize(("kp", "count"), [(0.0, 0), (8.5, 0), (8.667, 1), (9.0, 1)])
def test_kp_above_8_5_is_taken_with_a_warning(kp: float, count: int) -> None:
    field = fields.compose(DIPOLE, [fields.VollandStern(kp=kp)])
    assert len(field.warnings()) == count
    assert all("peaks at Kp 8.55" in line for line in field.warnings())


def test_kp_at_dusk_gives_the_potential_of_its_amplitude() -> None:
    # Kp 4: 1 - 0.636 + 0.1488 = 0.5128, A = 0.045 / 0.5128^3 kV
    field = fields.compose(DIPOLE, [fields.VollandStern(kp=4.0)])
    assert float(field.potential_kV(6.6, DUSK)) == pytest.approx(-0.045 / 0.5128**3 * 6.6**2, rel=1e-13)


def test_kp_with_another_gamma_is_refused() -> None:
    with pytest.raises(fields.InputError, match=r"gamma = 1.5: Kp sets the amplitude for gamma 2 only"):
        fields.VollandStern(gamma=1.5, kp=4.0)


@pytest.mark.parametrize(
    ("given_", "message"),
    [({}, "missing; one of kp and amplitude_kV"), ({"kp": 4.0, "amplitude_kV": 1.0}, "given twice")],
    ids=["neither", "both"],
)
def test_amplitude_is_given_exactly_once(given_: dict[str, float], message: str) -> None:
    with pytest.raises(fields.InputError, match=message):
        fields.VollandStern(**given_)
