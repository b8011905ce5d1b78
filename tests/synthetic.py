"""Results made without the drift kernel: equatorial drift of 90-degree particles by a fixed-step Runge-Kutta in numpy.

Not accurate enough to judge an integrator; good enough for paths, ends and arrivals to count and to draw.
"""

from __future__ import annotations

import json
from typing import Any

import numpy as np

from fields.constants import KV_PER_NT_RE2_TO_PER_H, PROTON_MASS_KG, ROTATION_RAD_PER_H
from fields.drivers import Driver
from fields.units import mlt_from_phi, phi_from_mlt
from tracer.records import CAUTION, Result
from tracer.status import Cause

B0_NT = 30000.0
OUTER_RE, INNER_RE = 10.0, 1.02
SUBSTEP_MIN = 2.5

KP_VALUES = (1.0, 2.0, 4.0, 6.33, 7.0, 5.67, 4.33, 3.0)

FIELD = {
    "magnetic": {"model": "dipole", "b0_nT": B0_NT},
    "electric": [{"model": "corotation"}, {"model": "volland-stern", "gamma": 2.0, "kp": "series:kp"}],
}


def kp_steps(hours: float = 24.0, backward: bool = False) -> Driver:
    """Three-hourly steps of an invented storm that cover the run."""
    start = np.arange(8) * 3.0 - (hours if backward else 0.0)
    return Driver("series:kp", start, np.asarray(KP_VALUES), np.zeros(8), start[-1] + 3.0, "step")


def kp_linear(name: str = "series:kp") -> Driver:
    """The same values joined at the centres of their intervals."""
    corners = np.concatenate([[0.0], np.arange(8) * 3.0 + 1.5])
    values = np.concatenate([[KP_VALUES[0]], KP_VALUES])
    slope = np.append(np.diff(values) / np.diff(corners), 0.0)
    return Driver(name, corners, values, slope, 24.0, "linear")


def _speeds(
    r: np.ndarray, phi: np.ndarray, mu: np.ndarray, charge: np.ndarray, kp: float
) -> tuple[np.ndarray, np.ndarray]:
    """dr/dt and dphi/dt of H = mu B + q Phi, without relativity."""
    amplitude = 0.045 / (1.0 - 0.159 * kp + 0.0093 * kp**2) ** 3
    corotation = ROTATION_RAD_PER_H * B0_NT / KV_PER_NT_RE2_TO_PER_H
    dh_dr = -3.0 * mu * B0_NT / r**4 + charge * (corotation / r**2 - 2.0 * amplitude * r * np.sin(phi))
    dh_dphi = -charge * amplitude * r**2 * np.cos(phi)
    scale = KV_PER_NT_RE2_TO_PER_H / (charge * B0_NT / r**3) / r
    return -scale * dh_dphi, scale * dh_dr


def drifting(
    populations: dict[str, dict[str, Any]] | None = None,
    n: int = 240,
    hours: float = 24.0,
    every_min: float = 5.0,
    backward: bool = False,
    title: str = "Invented storm: protons injected before midnight",
    drivers: tuple[Driver, ...] | None = None,
) -> Result:
    """Trace `n` particles of each population, released at random from a fixed seed."""
    wanted = populations or {"protons": {"charge": 1}}
    rng = np.random.default_rng(11)
    total = n * len(wanted)
    code = np.repeat(np.arange(len(wanted)), n)
    specs = list(wanted.values())
    charge = np.repeat([spec.get("charge", 1) for spec in specs], n)
    release_r = np.concatenate([rng.uniform(*spec.get("r_re", (6.0, 7.0)), n) for spec in specs])
    release_phi = phi_from_mlt(np.concatenate([rng.uniform(*spec.get("mlt_h", (21.0, 27.0)), n) for spec in specs]))
    energy0 = np.concatenate([np.exp(rng.uniform(*np.log(spec.get("energy_keV", (1.0, 300.0))), n)) for spec in specs])
    pitch = np.degrees(np.arccos(rng.uniform(0.0, np.cos(np.radians(20.0)), total)))
    mu = energy0 / (B0_NT / release_r**3)

    times = np.arange(round(hours * 60 / every_min) + 1) * every_min / 60.0 * (-1.0 if backward else 1.0)
    r_track = np.full((total, times.size), np.nan)
    phi_track = np.full((total, times.size), np.nan)
    r, phi = release_r.copy(), release_phi.copy()
    cause = np.full(total, int(Cause.DRIFTING))
    end_t = np.full(total, times[-1])
    alive = np.ones(total, dtype=bool)
    kp = kp_steps(hours, backward)
    for j, t in enumerate(times):
        r_track[alive, j], phi_track[alive, j] = r[alive], phi[alive]
        if j + 1 == times.size:
            break
        substeps = int(np.ceil(every_min / SUBSTEP_MIN))
        h = (times[j + 1] - t) / substeps
        for s in range(substeps):
            value = float(kp.at(np.clip(t + (s + 0.5) * h, kp.start_h[0], kp.end_h)))
            k1 = _speeds(r, phi, mu, charge, value)
            k2 = _speeds(r + 0.5 * h * k1[0], phi + 0.5 * h * k1[1], mu, charge, value)
            k3 = _speeds(r + 0.5 * h * k2[0], phi + 0.5 * h * k2[1], mu, charge, value)
            k4 = _speeds(r + h * k3[0], phi + h * k3[1], mu, charge, value)
            dr = h / 6 * (k1[0] + 2 * k2[0] + 2 * k3[0] + k4[0])
            dphi = h / 6 * (k1[1] + 2 * k2[1] + 2 * k3[1] + k4[1])
            leaving = alive & (r + dr > OUTER_RE)
            part = np.where(leaving, (OUTER_RE - r) / np.where(dr == 0, 1, dr), 1.0)
            r, phi = np.where(alive, r + part * dr, r), np.where(alive, phi + part * dphi, phi)
            end_t[leaving] = t + (s + part[leaving]) * h
            cause[leaving] = int(Cause.OUTER)
            alive &= ~leaving
    energy = mu[:, None] * B0_NT / r_track**3
    return assemble(
        times, code, tuple(wanted), charge, pitch,
        {"r_re": release_r, "mlt_h": mlt_from_phi(release_phi), "energy_keV": energy0, "release_h": np.zeros(total)},
        {"r_re": r_track, "mlt_h": mlt_from_phi(phi_track), "energy_keV": energy},
        {"r_re": r, "mlt_h": mlt_from_phi(phi), "energy_keV": mu * B0_NT / r**3, "time_h": end_t, "cause": cause,
         "turns": (phi - release_phi) / (2 * np.pi)},
        attributes(title, hours, backward),
        (kp,) if drivers is None else drivers,
    )  # fmt: skip


def attributes(title: str, hours: float, backward: bool) -> dict[str, Any]:
    """Root attributes as a file has them."""
    return {
        "title": title,
        "start": "2027-03-04T00:00:00Z",
        "hours": hours,
        "backward": backward,
        "outer_re": OUTER_RE,
        "inner_re": INNER_RE,
        "field": json.dumps(FIELD),
        "driftrose_version": "0.1.0",
        "attrs_sha256": "0123456789abcdef" * 4,
        "caution": CAUTION,
    }


def assemble(
    times: np.ndarray,
    code: np.ndarray,
    names: tuple[str, ...],
    charge: np.ndarray,
    pitch: np.ndarray,
    start: dict[str, np.ndarray],
    track: dict[str, np.ndarray],
    end: dict[str, np.ndarray],
    attrs: dict[str, Any],
    drivers: tuple[Driver, ...],
) -> Result:
    """A Result with every column; pitch angles do not change."""
    n = code.size
    constant = {
        "population": code.astype("i4"), "species": (charge < 0).astype("i4"), "charge_e": charge.astype("i4"),
        "mass_kg": np.full(n, PROTON_MASS_KG), "mu_MeV_per_G": np.ones(n), "K_re_sqrtG": np.zeros(n),
        "weight": np.ones(n), "seed": np.full(n, 7), "pitch_deg": pitch,
    }  # fmt: skip
    pitches = np.where(np.isfinite(track["r_re"]), pitch[:, None], np.nan) if times.size else np.empty((n, 0))
    return Result(
        time_h=times,
        particle={**constant, **start},
        track={**track, "pitch_deg": pitches} if times.size else {},
        end={**end, "cause": end["cause"].astype("u1"), "pitch_deg": pitch, "loss_cone_h": np.full(n, np.nan)},
        attrs=attrs,
        population_names=names,
        species_names=("H+", "e-"),
        drivers=drivers,
    )
