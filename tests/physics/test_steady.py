"""Steady fields: a path is a level curve of the Hamiltonian, known without integrating (Northrop 1963)."""

from __future__ import annotations

from functools import lru_cache
from typing import Any

import numpy as np
import pytest
from physics import made, referee
from scipy import constants as codata
from scipy.optimize import brentq, root

import fields
import tracer
from tracer.records import Result
from tracer.scenario import SPECIES, Scenario

TOLERANCE_RE = 1e-6  # the default
HOURS = 24.0
C_KV = 2.0 * np.pi / codata.day * made.B0_NT * 1e-9 * 6371.2e3**2 * 1e-3
DRIFT = 3600.0 * 1e12 / 6371.2e3**2  # R_E^2 nT / (kV h): (1 kV / R_E) / (1 nT) is this many R_E/h
NEAR_STAGNATION_RE = 0.01
STATE = ("energy_keV", "pitch_deg", "r_re", "mlt_h")

ELECTRIC: dict[str, list[dict[str, Any]]] = {
    "uniform": [{"model": "corotation"}, {"model": "uniform", "e0_mV_per_m": 0.4}],
    "shielded": [{"model": "corotation"}, {"model": "volland-stern", "kp": 4.0}],
    "turned": [
        {"model": "corotation"},
        {"model": "volland-stern", "gamma": 2.5, "amplitude_kV": 0.1, "phi0_deg": 20.0},
    ],
}

# Wide populations need a fine local tolerance for their fastest particles; narrow ones show that it is never loose.
POPULATIONS: dict[str, list[dict[str, Any]]] = {
    "1 eV to 10 MeV": [
        made.drawn(name, 100, seed, energy_keV=made.span(1e-3, 1e4, "log"), r_re=made.span(2.0, 8.0))
        for seed, name in enumerate(("e-", "H+", "O+"), start=10)
    ],
    "1 to 300 keV": [
        made.drawn(name, 150, 3, energy_keV=made.span(1.0, 300.0, "log"), r_re=made.span(6.0, 7.0))
        for name in ("e-", "H+")
    ],
    "1 to 30 keV": [
        made.drawn(name, 150, 3, energy_keV=made.span(1.0, 30.0, "log"), r_re=made.span(3.0, 5.0))
        for name in ("e-", "H+")
    ],
    "100 keV": [
        made.drawn(name, 150, 3, energy_keV=made.span(90.0, 110.0), r_re=made.span(4.0, 4.5)) for name in ("e-", "H+")
    ],
    "cold": [
        made.drawn(name, 100, 3, energy_keV=0.0, pitch_deg=90.0, r_re=made.span(2.0, 5.0)) for name in ("e-", "O+")
    ],
    # the shielded field's cold stagnation point lies at dusk, r = (C / 2 A)^(1/3) = 5.10 R_E
    "at stagnation": [
        made.drawn(
            "H+", 200, 6, energy_keV=0.0, pitch_deg=90.0, r_re=made.span(5.05, 5.15), mlt_h=made.span(17.95, 18.05)
        )
    ],
}
cases = pytest.mark.parametrize(("electric", "population"), [(e, p) for e in ELECTRIC for p in POPULATIONS])


@lru_cache
def traced(electric: str, population: str) -> tuple[Scenario, Result]:
    scenario = tracer.build(made.tables(ELECTRIC[electric], POPULATIONS[population], every_min=30.0))
    assert scenario.output.tolerance_re == TOLERANCE_RE
    return scenario, tracer.trace(scenario)


def along_paths(result: Result, species: str) -> tuple[np.ndarray, dict[str, np.ndarray]]:
    """Rows of a species, and its columns at start, saved times and end, shape (n, n_time + 2).

    Where a particle has no more track, its start stands again.
    """
    rows = np.flatnonzero(result.particle["species"] == result.species_names.index(species))
    columns = {}
    for name in STATE:
        start, end = result.particle[name][rows, None], result.end[name][rows, None]
        path = np.concatenate([start, result.track[name][rows], end], axis=1)
        columns[name] = np.where(np.isfinite(path), path, start)
    return rows, columns


def gradient(field: fields.Field, species: str, path: dict[str, np.ndarray]) -> np.ndarray:
    """|grad H| in keV/R_E, from the drift speed: q B v."""
    rate = tracer.drift_rate(field, species, *(path[name] for name in STATE))
    speed = np.hypot(rate.dr_re_per_h, path["r_re"] * rate.dmlt_per_h * np.pi / 12.0)
    return np.asarray(speed * abs(SPECIES[species].charge_e) * made.B0_NT / path["r_re"] ** 3 / DRIFT)


def distance_to_stagnation(field: fields.Field, species: str, path: dict[str, np.ndarray], i: int, j: int) -> float:
    """R_E from point (i, j) to a place where the particle would stand still; infinite when the search finds none."""
    start = [path[name][i, 0] for name in STATE]
    found = tracer.invariants(field, species, *start)
    phi = float(made.azimuth(path["mlt_h"][i, j]))
    here = path["r_re"][i, j] * np.array([np.cos(phi), np.sin(phi)])

    def speed(place: np.ndarray) -> list[float]:
        r, mlt = float(np.hypot(*place)), 12.0 + float(np.arctan2(place[1], place[0])) * 12.0 / np.pi
        there = tracer.from_invariants(field, species, found.mu_MeV_per_G, found.K_re_sqrtG, r, mlt)
        rate = tracer.drift_rate(field, species, there.energy_keV, there.pitch_deg, r, mlt)
        return [float(rate.dr_re_per_h), r * float(rate.dmlt_per_h)]

    solved = root(speed, here)
    return float(np.hypot(*(solved.x - here))) if solved.success else np.inf


def test_the_search_finds_the_stagnation_point() -> None:
    field = fields.compose(
        fields.Dipole(b0_nT=made.B0_NT), [fields.Corotation(), fields.VollandStern(amplitude_kV=0.4)]
    )
    r_s = (C_KV / 0.8) ** (1.0 / 3.0)  # closed form for gamma 2, at dusk
    here = {"energy_keV": 0.0, "pitch_deg": 90.0, "r_re": r_s + 0.02, "mlt_h": 18.0}
    path = {name: np.array([[value]]) for name, value in here.items()}
    assert distance_to_stagnation(field, "H+", path, 0, 0) == pytest.approx(0.02, abs=1e-7)


@cases
def test_energy_is_kept_for_99_percent_from_1_keV_up(electric: str, population: str) -> None:
    scenario, result = traced(electric, population)
    worst = []
    for species in result.species_names:
        rows, path = along_paths(result, species)
        h = tracer.hamiltonian_keV(scenario.field, species, *(path[name] for name in STATE))
        change = np.abs(h - h[:, :1]) / (path["energy_keV"] + abs(SPECIES[species].charge_e) * C_KV / path["r_re"])
        worst.append(change.max(axis=1)[result.particle["energy_keV"][rows] >= 1.0])
    changes = np.concatenate(worst)
    if changes.size:
        local = result.attrs["local_tolerance_re"]
        print(f"{electric}, {population}: local {local:.1e}; 50, 99, 100 %:", np.quantile(changes, (0.5, 0.99, 1.0)))
        assert np.mean(changes <= 1e-9) >= 0.99


@cases
def test_paths_stay_on_their_level_curves(electric: str, population: str) -> None:
    # |H - H0| / |grad H| is the distance to the curve, to first order
    scenario, result = traced(electric, population)
    for species in result.species_names:
        _, path = along_paths(result, species)
        h = tracer.hamiltonian_keV(scenario.field, species, *(path[name] for name in STATE))
        away = np.abs(h - h[:, :1]) / gradient(scenario.field, species, path)
        print(f"{electric}, {population}, {species}: 50, 99, 100 %:", *np.quantile(away.max(axis=1), (0.5, 0.99, 1.0)))
        for i, j in np.argwhere(~(away <= 0.1 * TOLERANCE_RE)):
            distance = distance_to_stagnation(scenario.field, species, path, i, j)
            assert distance <= NEAR_STAGNATION_RE, f"{away[i, j]:.1e} R_E off the curve, {distance:.2g} R_E from rest"


def test_level_curves_found_without_the_tracer_pass_through_the_tracks() -> None:
    # the referee's own Hamiltonian, solved for r at the azimuth of the track
    _, result = traced("shielded", "1 eV to 10 MeV")
    start = result.particle
    charge, rest = start["charge_e"].astype(float), start["mass_kg"] * codata.c**2 / codata.e / 1e3
    lift = referee.lift_of_pitch(start["pitch_deg"])
    kappa1 = referee.kappa_of_lift(lift) / np.sqrt(start["r_re"])
    momentum2 = start["energy_keV"] * (1.0 + 0.5 * start["energy_keV"] / rest)  # over 2 m
    mu = momentum2 / np.exp(referee.integrals(lift)[2]) / made.B0_NT * start["r_re"] ** 3
    storm = referee.Storm(made.B0_NT, (4.0,), 10.0, 1.02)

    def total(r: float, phi: float, i: int, level: float) -> float:
        perpendicular = mu[i] * made.B0_NT / r**3 * np.exp(referee.mirror(kappa1[i] * np.sqrt(r), referee.table())[0])
        kinetic = 2.0 * perpendicular / (1.0 + np.sqrt(1.0 + 2.0 * perpendicular / rest[i]))
        potential = -storm.corotation_kV / r - storm.amplitude_kV(4.0) * r**2 * np.sin(phi)
        return float(kinetic + charge[i] * potential - level)

    away = []
    for i in range(0, result.count, 3):
        h0 = total(start["r_re"][i], float(made.azimuth(start["mlt_h"][i])), i, 0.0)
        for j in range(1, result.time_h.size, 7):
            r, phi = result.track["r_re"][i, j], float(made.azimuth(result.track["mlt_h"][i, j]))
            if not np.isfinite(r):
                break
            near, far = r - 1e-3, r + 1e-3
            if total(near, phi, i, h0) * total(far, phi, i, h0) < 0.0:  # no root where the curve runs along the radius
                away.append(brentq(total, near, far, args=(phi, i, h0), xtol=1e-15, rtol=1e-14) - r)
    print(f"{len(away)} points, largest distance {np.max(np.abs(away)):.1e}")
    assert len(away) > 400
    assert np.max(np.abs(away)) <= 1e-7


# ---------------------------------------------------------------------------------------------- closed forms of paths


def uniform_alone(e0_mV_per_m: float) -> list[dict[str, Any]]:
    """Without corotation, but with the kernel of the field that has it."""
    return [{"model": "corotation", "potential_kV": 0.0}, {"model": "uniform", "e0_mV_per_m": e0_mV_per_m}]


def ends_of(electric: list[dict[str, Any]], populations: list[dict[str, Any]], **given: Any) -> Result:
    return tracer.trace(tracer.build(made.tables(electric, populations, **given)))


@pytest.mark.parametrize(("potential_kV", "turns"), [(None, 1.0), (2.0 * C_KV, 2.0)])
def test_cold_plasma_turns_with_the_earth(potential_kV: float | None, turns: float) -> None:
    corotation = {"model": "corotation"} | ({} if potential_kV is None else {"potential_kV": potential_kV})
    electric = [corotation, {"model": "uniform", "e0_mV_per_m": 0.0}]
    result = ends_of(electric, [made.drawn("H+", 20, 5, energy_keV=0.0, pitch_deg=90.0)])
    np.testing.assert_allclose(result.end["turns"], turns, rtol=1e-12)
    np.testing.assert_allclose(result.end["r_re"], result.particle["r_re"], rtol=1e-13)


@pytest.mark.parametrize("species", ["e-", "O+"])
def test_cold_plasma_in_a_uniform_field_flows_sunward_at_e_over_b(species: str) -> None:
    # y stays, dx/dt = E0 / B = E0 r^3 / B0, so t = B0 / E0 [x / (y^2 r)] from start to end
    e0, hours = 0.4, 4.0
    evening = {"r_re": made.span(3.0, 6.0), "mlt_h": made.span(19.0, 22.0)}
    cold = made.drawn(species, 40, 5, energy_keV=0.0, pitch_deg=90.0, **evening)
    result = ends_of(uniform_alone(e0), [cold], time={"start": made.START, "hours": hours})
    still = result.end["cause"] == 0
    assert np.sum(still) > 20

    def place(columns: Any) -> tuple[np.ndarray, np.ndarray]:
        phi = made.azimuth(columns["mlt_h"][still])
        return columns["r_re"][still] * np.cos(phi), columns["r_re"][still] * np.sin(phi)

    (x0, y0), (x, y) = place(result.particle), place(result.end)
    np.testing.assert_allclose(y, y0, rtol=0.0, atol=0.1 * TOLERANCE_RE)
    speed = e0 * 1e-3 / (made.B0_NT * 1e-9) * codata.hour / 6371.2e3  # R_E/h at 1 R_E
    elapsed = (x / np.hypot(x, y) - x0 / np.hypot(x0, y0)) / y0**2 / speed
    np.testing.assert_allclose(elapsed, hours, rtol=1e-7)


# ---------------------------------------------------------------------------------------------------------- symmetry

FEW = [made.drawn("H+", 60, 8), made.drawn("e-", 60, 9)]


def back_and_mirrored(result: Result) -> list[dict[str, Any]]:
    """The same particles with noon and midnight exchanged."""
    names = ("r_re", "energy_keV", "pitch_deg")
    return [
        made.single(
            f"n{i}",
            result.species_names[result.particle["species"][i]],
            mlt_h=float(np.mod(36.0 - result.particle["mlt_h"][i], 24.0)),
            release_h=0.0,
            **{name: float(result.particle[name][i]) for name in names},
        )
        for i in range(result.count)
    ]


def test_time_reversal_exchanges_noon_and_midnight() -> None:
    # H is the same at x and -x, and the velocity z x grad H / q B turns its sign there: the path backward from the
    # mirrored start is the mirrored path
    electric = ELECTRIC["shielded"]
    forward = ends_of(electric, FEW)
    back = ends_of(electric, back_and_mirrored(forward), time={"start": made.START, "hours": HOURS, "backward": True})
    np.testing.assert_array_equal(back.end["cause"], forward.end["cause"])
    r, turned = forward.end["r_re"], 2.0 * np.pi * (back.end["turns"] + forward.end["turns"])
    apart = np.hypot(back.end["r_re"] - r, r * turned)
    assert np.mean(apart <= TOLERANCE_RE) >= 0.99
    np.testing.assert_allclose(np.sort(-back.end["time_h"] - forward.end["time_h"]), 0.0, atol=1e-5)


def test_charge_reversal_runs_the_path_backward() -> None:
    # q -> -q with Phi -> -Phi keeps H and turns the velocity round
    positron = {"mass_u": codata.m_e / codata.atomic_mass, "charge": 1}
    common = {"r_re": made.span(3.0, 7.0), "energy_keV": made.span(1.0, 300.0, "log")}
    forward = ends_of(uniform_alone(0.3), [made.drawn("e-", 60, 9, **common)])
    back = ends_of(
        uniform_alone(-0.3),
        [made.drawn("e-", 60, 9, **common) | {"species": positron}],
        time={"start": made.START, "hours": HOURS, "backward": True},
    )
    np.testing.assert_array_equal(back.end["cause"], forward.end["cause"])
    np.testing.assert_allclose(back.end["r_re"], forward.end["r_re"], rtol=0.0, atol=TOLERANCE_RE)
    np.testing.assert_allclose(back.end["turns"], forward.end["turns"], rtol=0.0, atol=TOLERANCE_RE)


def test_slow_equatorial_particles_drift_by_energy_over_charge_alone() -> None:
    names = ("H+", "He+", "He++", "O+")
    ends = []
    for name in names:
        energy = SPECIES[name].charge_e * 10.0
        group = made.drawn(name, 40, 4, energy_keV=energy, pitch_deg=90.0)
        ends.append(ends_of(ELECTRIC["shielded"], [group]).end)
    # relativity is W / m c^2 = 1e-5 for H+
    for end in ends[1:]:
        np.testing.assert_array_equal(end["cause"], ends[0]["cause"])
        far = np.hypot(end["r_re"] - ends[0]["r_re"], end["r_re"] * 2.0 * np.pi * (end["turns"] - ends[0]["turns"]))
        assert np.quantile(far, 0.9, method="higher") < 1e-3
        assert np.all(far > 0.0)
