"""Energy and pitch angle to invariants and back, limits, scalings, symmetries, bad values."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import constants as codata
from tolerances import bound

import fields
import tracer
from tracer.adiabatic import species_named
from tracer.scenario import SPECIES, Species

B0_NT = 30000.0
DIPOLE = fields.Dipole(b0_nT=B0_NT)
STILL = fields.compose(DIPOLE)
ROUND_TRIP = 1e-12

energies = st.floats(-3.0, 4.0).map(lambda exponent: 10.0**exponent)  # 1 eV to 10 MeV
pitches = st.one_of(st.floats(0.5, 90.0), st.floats(89.9, 90.0), st.just(90.0))
distances = st.floats(1.1, 12.0)


@given(st.sampled_from(sorted(SPECIES)), energies, pitches, distances, st.floats(0.0, 24.0))
def test_there_and_back(species: str, energy: float, pitch: float, r: float, mlt: float) -> None:
    found = tracer.invariants(STILL, species, energy, pitch, r, mlt)
    back = tracer.from_invariants(STILL, species, found.mu_MeV_per_G, found.K_re_sqrtG, r, mlt)
    assert float(back.energy_keV) == pytest.approx(energy, rel=ROUND_TRIP)
    assert float(back.pitch_deg) == pytest.approx(pitch, rel=ROUND_TRIP)


@pytest.mark.parametrize(("species", "energy"), [("O+", 1e-3), ("e-", 1e4), ("H+", 1e-3), ("O+", 1e4), ("e-", 1e-3)])
def test_there_and_back_at_the_ends_of_the_range(species: str, energy: float) -> None:
    pitch = np.array([0.1, 1.0, 5.0, 45.0, 89.0, 89.999, 90.0])[:, None]
    r = np.array([1.02, 3.0, 6.6, 10.0])
    found = tracer.invariants(STILL, species, energy, pitch, r, 0.0)
    back = tracer.from_invariants(STILL, species, found.mu_MeV_per_G, found.K_re_sqrtG, r, 0.0)
    np.testing.assert_allclose(back.energy_keV, energy, rtol=ROUND_TRIP)
    np.testing.assert_allclose(back.pitch_deg, np.broadcast_to(pitch, (7, 4)), rtol=ROUND_TRIP)


@given(st.sampled_from(sorted(SPECIES)), energies, pitches, distances, distances)
def test_invariants_survive_a_move_to_another_shell(
    species: str, energy: float, pitch: float, r: float, other: float
) -> None:
    found = tracer.invariants(STILL, species, energy, pitch, r, 0.0)
    there = tracer.from_invariants(STILL, species, found.mu_MeV_per_G, found.K_re_sqrtG, other, 6.0)
    again = tracer.invariants(STILL, species, there.energy_keV, there.pitch_deg, other, 6.0)
    assert float(again.mu_MeV_per_G) == pytest.approx(float(found.mu_MeV_per_G), rel=1e-11)
    # K goes as cos^2 near 90 degrees, whose digits a pitch angle in degrees loses there
    assert float(again.K_re_sqrtG) == pytest.approx(float(found.K_re_sqrtG), rel=1e-10, abs=1e-12)


# --------------------------------------------------------------------------------------------------- closed forms


def test_mu_is_perpendicular_momentum_squared_over_2mB() -> None:
    # in SI, from the constants; 1 MeV/G = 1e6 e / 1e-4 J/T
    energy, pitch, r = 250.0, 35.0, 5.5
    w = energy * 1e3 * codata.e
    momentum2 = w * (w + 2.0 * codata.m_e * codata.c**2) / codata.c**2
    mu = momentum2 * np.sin(np.radians(pitch)) ** 2 / (2.0 * codata.m_e * B0_NT * 1e-9 / r**3)
    got = tracer.invariants(STILL, "e-", energy, pitch, r, 0.0).mu_MeV_per_G
    assert float(got) == pytest.approx(mu / (1e10 * codata.e), rel=1e-9)


def test_K_of_a_dipole() -> None:
    # K = R_E sqrt(B0 / r) Y / y (Schulz & Lanzerotti 1974); 1 G = 1e5 nT
    pitch, r = 25.0, 4.5
    want = np.sqrt(B0_NT * 1e-5 / r) * float(tracer.bounce_Y(pitch)) / np.sin(np.radians(pitch))
    assert float(tracer.invariants(STILL, "H+", 10.0, pitch, r, 0.0).K_re_sqrtG) == pytest.approx(want, rel=1e-13)


def test_equatorial_betatron_without_relativity() -> None:
    # W / B is kept: 1 eV of O+ carried from 6 to 3 R_E has 8 eV; relativity takes W / 2 m c^2, 3e-10
    found = tracer.invariants(STILL, "O+", 1e-3, 90.0, 6.0, 0.0)
    there = tracer.from_invariants(STILL, "O+", found.mu_MeV_per_G, found.K_re_sqrtG, 3.0, 0.0)
    assert float(there.energy_keV) == pytest.approx(8e-3, rel=1e-9)
    assert float(there.pitch_deg) == 90.0


def test_equatorial_betatron_at_the_speed_of_light() -> None:
    # p^2 / B is kept and W = p c: from 6 to 3 R_E the energy grows sqrt(8)-fold; the next term is m c^2 / W
    energy = 1e8
    found = tracer.invariants(STILL, "e-", energy, 90.0, 6.0, 0.0)
    there = tracer.from_invariants(STILL, "e-", found.mu_MeV_per_G, found.K_re_sqrtG, 3.0, 0.0)
    assert float(there.energy_keV) == pytest.approx(np.sqrt(8.0) * energy, rel=511.0 / energy)


def test_field_aligned_energy_grows_with_the_square_of_the_shorter_line() -> None:
    # J = 2 integral p ds is kept, and a field-aligned particle bounces along the whole line, as long as r: W ~ r^-2
    r = np.array([8.0, 4.0])
    found = tracer.invariants(STILL, "H+", 1.0, 0.02, r[0], 0.0)
    there = tracer.from_invariants(STILL, "H+", found.mu_MeV_per_G, found.K_re_sqrtG, r[1], 0.0)
    assert float(there.energy_keV) == pytest.approx((r[0] / r[1]) ** 2, rel=3e-2)


@given(pitches, distances, st.floats(0.1, 10.0))
def test_mu_and_K_scale_with_energy_and_field(pitch: float, r: float, factor: float) -> None:
    one = tracer.invariants(STILL, "H+", 1e-3, pitch, r, 0.0)
    more = tracer.invariants(STILL, "H+", 1e-3 * factor, pitch, r, 0.0)
    assert float(more.mu_MeV_per_G) == pytest.approx(factor * float(one.mu_MeV_per_G), rel=1e-8)
    assert float(more.K_re_sqrtG) == float(one.K_re_sqrtG)  # of the path alone
    strong = fields.compose(fields.Dipole(b0_nT=B0_NT * factor))
    other = tracer.invariants(strong, "H+", 1e-3, pitch, r, 0.0)
    assert float(other.mu_MeV_per_G) == pytest.approx(float(one.mu_MeV_per_G) / factor, rel=1e-13)
    assert float(other.K_re_sqrtG) == pytest.approx(float(one.K_re_sqrtG) * np.sqrt(factor), rel=1e-13)


# ------------------------------------------------------------------------------------------------------ symmetries


@given(energies, pitches, distances, st.floats(0.0, 24.0), st.floats(-3.0, 3.0))
def test_the_other_charge_in_the_other_field_drifts_the_other_way(
    energy: float, pitch: float, r: float, mlt: float, e0: float
) -> None:
    # H = W + q Phi stays the same, the velocity z x grad H / (q B) turns round: the same path, the other way
    antiproton = Species("antiproton", SPECIES["H+"].mass_kg, -1)
    here = fields.compose(DIPOLE, [fields.Uniform(e0_mV_per_m=e0)])
    opposite = fields.compose(DIPOLE, [fields.Uniform(e0_mV_per_m=-e0)])
    rate = tracer.drift_rate(here, "H+", energy, pitch, r, mlt)
    other = tracer.drift_rate(opposite, antiproton, energy, pitch, r, mlt)
    assert float(rate.dr_re_per_h) == -float(other.dr_re_per_h)
    assert float(rate.dmlt_per_h) == -float(other.dmlt_per_h)
    assert float(tracer.hamiltonian_keV(here, "H+", energy, pitch, r, mlt)) == float(
        tracer.hamiltonian_keV(opposite, antiproton, energy, pitch, r, mlt)
    )


@given(pitches, distances)
def test_slow_particles_drift_by_energy_over_charge_whatever_their_mass(pitch: float, r: float) -> None:
    energy = 1e-3  # W / m c^2 is 1e-9 for H+
    rate = float(tracer.drift_rate(STILL, "H+", energy, pitch, r, 0.0).dmlt_per_h)
    for species in ("He+", "He++", "O+"):
        charge = SPECIES[species].charge_e
        same = float(tracer.drift_rate(STILL, species, charge * energy, pitch, r, 0.0).dmlt_per_h)
        assert same == pytest.approx(rate, rel=1e-8)
    assert rate < 0.0 < float(tracer.drift_rate(STILL, "e-", energy, pitch, r, 0.0).dmlt_per_h)


@given(pitches, distances)
def test_drift_at_the_speed_of_light_is_half_as_fast_for_its_energy(pitch: float, r: float) -> None:
    # p v / 2 is W without relativity and W / 2 at the speed of light
    slow = float(tracer.drift_rate(STILL, "e-", 1e-3, pitch, r, 0.0).dmlt_per_h) / 1e-3
    fast = float(tracer.drift_rate(STILL, "e-", 1e9, pitch, r, 0.0).dmlt_per_h) / 1e9
    assert fast == pytest.approx(0.5 * slow, rel=3e-6)


@given(energies, pitches, distances, distances)
def test_drift_rate_is_proportional_to_distance(energy: float, pitch: float, r: float, other: float) -> None:
    # at equal energy and pitch angle, in a dipole: rate ~ 1 / (B r^2) ~ r
    rates = tracer.drift_rate(STILL, "e-", energy, pitch, np.array([r, other]), 0.0).dmlt_per_h
    assert float(rates[1] / rates[0]) == pytest.approx(other / r, rel=1e-12)


@given(st.sampled_from(sorted(SPECIES)), energies, pitches, distances)
def test_periods_and_rates_agree(species: str, energy: float, pitch: float, r: float) -> None:
    hours = float(tracer.periods(STILL, species, energy, pitch, r, 0.0).drift_s) / 3600.0
    rate = float(tracer.drift_rate(STILL, species, energy, pitch, r, 0.0).dmlt_per_h)
    assert hours * abs(rate) == pytest.approx(24.0, rel=1e-13)
    assert np.sign(rate) == -np.sign(SPECIES[species].charge_e)


@given(st.sampled_from(["e-", "H+", "O+"]), energies, st.floats(5.0, 90.0), st.floats(2.0, 9.0), st.floats(0.0, 24.0))
def test_drift_is_the_slope_of_the_hamiltonian(species: str, energy: float, pitch: float, r: float, mlt: float) -> None:
    field = fields.compose(DIPOLE, [fields.Corotation(), fields.VollandStern(kp=4.0)])
    found = tracer.invariants(field, species, energy, pitch, r, mlt)

    def total(r: Any, mlt: Any) -> Any:
        there = tracer.from_invariants(field, species, found.mu_MeV_per_G, found.K_re_sqrtG, r, mlt)
        return tracer.hamiltonian_keV(field, species, there.energy_keV, there.pitch_deg, r, mlt)

    steps = np.array([-4.0, -3.0, -2.0, -1.0, 1.0, 2.0, 3.0, 4.0])  # eighth order
    weights = np.array([1 / 280, -4 / 105, 1 / 5, -4 / 5, 4 / 5, -1 / 5, 4 / 105, -1 / 280])
    by_r = float(total(r + 0.01 * r * steps, mlt) @ weights) / (0.01 * r)
    by_phi = float(total(r, mlt + 0.05 * steps) @ weights) / 0.05 * 12.0 / np.pi
    # q B in keV h / R_E^2: 1 kV / (R_E^2 nT) is 1e12 / R_E[m]^2 per second
    strength = SPECIES[species].charge_e * B0_NT / r**3 * 6371.2e3**2 / 1e12 / 3600.0
    rate = tracer.drift_rate(field, species, energy, pitch, r, mlt)
    close = bound("difference of slopes") * (energy + 100.0) / abs(strength) / r  # 100 kV and more lie across the field
    assert float(rate.dr_re_per_h) == pytest.approx(-by_phi / (strength * r), abs=close)
    assert float(rate.dmlt_per_h) * np.pi / 12.0 * r == pytest.approx(by_r / strength, abs=close)


# ------------------------------------------------------------------------------------------- shapes and bad values


def test_scalars_give_scalars_and_arrays_broadcast() -> None:
    energy, pitch = np.array([1.0, 10.0, 100.0])[:, None, None], np.array([30.0, 90.0])[:, None]
    r = np.linspace(3.0, 6.0, 4)
    found = tracer.invariants(STILL, "H+", energy, pitch, r, 0.0)
    assert found.mu_MeV_per_G.shape == found.K_re_sqrtG.shape == (3, 2, 4)
    back = tracer.from_invariants(STILL, "H+", found.mu_MeV_per_G, found.K_re_sqrtG, r, 0.0)
    assert back.energy_keV.shape == back.pitch_deg.shape == (3, 2, 4)
    periods = tracer.periods(STILL, "H+", energy, pitch, r, [[[0.0]]])
    assert periods.gyro_s.shape == periods.bounce_s.shape == periods.drift_s.shape == (3, 2, 4)
    rate = tracer.drift_rate(STILL, "H+", energy, pitch, r, 0.0, 0.0)
    assert rate.dr_re_per_h.shape == rate.dmlt_per_h.shape == (3, 2, 4)
    assert tracer.hamiltonian_keV(STILL, "H+", energy, pitch, r, 0.0).shape == (3, 2, 4)
    one = tracer.invariants(STILL, "H+", 10.0, 30.0, float(r[2]), 0.0)
    assert np.shape(one.mu_MeV_per_G) == ()
    assert float(one.mu_MeV_per_G) == float(found.mu_MeV_per_G[1, 0, 2])
    assert float(one.K_re_sqrtG) == pytest.approx(float(found.K_re_sqrtG[1, 0, 2]), rel=1e-14)


def test_cold_particles() -> None:
    found = tracer.invariants(STILL, "H+", 0.0, 90.0, 5.0, 0.0)
    assert float(found.mu_MeV_per_G) == float(found.K_re_sqrtG) == 0.0
    back = tracer.from_invariants(STILL, "H+", 0.0, 0.0, 4.0, 0.0)
    assert (float(back.energy_keV), float(back.pitch_deg)) == (0.0, 90.0)
    periods = tracer.periods(STILL, "H+", 0.0, 90.0, 5.0, 0.0)
    assert np.isposinf(periods.drift_s)
    assert np.isposinf(periods.bounce_s)
    assert np.isfinite(periods.gyro_s)


GOOD: dict[str, Any] = {"energy_keV": 10.0, "pitch_deg": 45.0, "r_re": 5.0, "mlt_h": 3.0}
BAD = [
    ("energy_keV", -1.0),
    ("energy_keV", np.nan),
    ("energy_keV", np.inf),
    ("pitch_deg", 0.0),
    ("pitch_deg", -3.0),
    ("pitch_deg", 90.0001),
    ("pitch_deg", np.nan),
    ("r_re", 0.0),
    ("r_re", -2.0),
    ("r_re", np.inf),
    ("mlt_h", np.nan),
    ("mlt_h", -np.inf),
]


@pytest.mark.parametrize("function", ["invariants", "periods", "drift_rate", "hamiltonian_keV"])
@pytest.mark.parametrize(("name", "value"), BAD)
def test_impossible_values_are_refused_by_name(function: str, name: str, value: float) -> None:
    bad = {**GOOD, name: [GOOD[name], value]}
    getattr(tracer, function)(STILL, "H+", *GOOD.values())
    with pytest.raises(tracer.InputError, match=f"^driftrose: {name} = ") as caught:
        getattr(tracer, function)(STILL, "H+", *bad.values())
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    ("name", "values"),
    [
        ("mu_MeV_per_G", (-1.0, 0.1, 5.0, 0.0)),
        ("mu_MeV_per_G", (np.nan, 0.1, 5.0, 0.0)),
        ("K_re_sqrtG", (1.0, -0.1, 5.0, 0.0)),
        ("K_re_sqrtG", (1.0, np.inf, 5.0, 0.0)),
        ("r_re", (1.0, 0.1, 0.0, 0.0)),
        ("mlt_h", (1.0, 0.1, 5.0, np.nan)),
    ],
)
def test_impossible_invariants_are_refused_by_name(name: str, values: tuple[float, ...]) -> None:
    with pytest.raises(tracer.InputError, match=f"^driftrose: {name} = "):
        tracer.from_invariants(STILL, "H+", *values)


@pytest.mark.parametrize("function", ["drift_rate", "hamiltonian_keV"])
def test_an_impossible_time_is_refused(function: str) -> None:
    with pytest.raises(tracer.InputError, match="time_h"):
        getattr(tracer, function)(STILL, "H+", 10.0, 45.0, 5.0, 3.0, np.nan)


@pytest.mark.parametrize(("species", "hint"), [("H", "H\\+"), ("proton", "one of e-, H\\+"), ("0+", "O\\+|H\\+")])
def test_an_unknown_species_is_named_with_the_known_ones(species: str, hint: str) -> None:
    with pytest.raises(tracer.InputError, match=f"species = .*unknown species.*{hint}"):
        species_named(species)


def test_a_species_of_ones_own() -> None:
    doubled = Species("doubled", 2.0 * SPECIES["H+"].mass_kg, 1)
    one = tracer.invariants(STILL, "H+", 1e-3, 60.0, 5.0, 0.0)
    two = tracer.invariants(STILL, doubled, 1e-3, 60.0, 5.0, 0.0)
    assert float(two.mu_MeV_per_G) == pytest.approx(float(one.mu_MeV_per_G), rel=1e-8)
    gyro = [float(tracer.periods(STILL, s, 1e-3, 60.0, 5.0, 0.0).gyro_s) for s in ("H+", doubled)]
    assert gyro[1] == pytest.approx(2.0 * gyro[0], rel=1e-8)
