"""Keplerian elements and their secular change by the Earth's oblateness."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fields import constants
from fields.clock import Micros
from fields.units import Floats
from tracer.ephemeris.source import Piece

FRAME = "TEME"  # true equator and mean equinox of date, as for two-line sets
NEWTON_STEPS = 50  # seldom more than six are taken
MICROS_PER_S = 1e6


@dataclass(frozen=True)
class Elements:
    """Mean elements at an epoch.

    Secular rates of first order in J2 (Kozai 1959, Astron. J. 64, 367; Vallado 2013, Fundamentals of Astrodynamics and
    Applications, eqs. 9-38 to 9-41, from memory). Left out are the short-period terms, some 10 km near the Earth and
    less farther out, and all that the Moon, the Sun and drag do.

    Attributes
    ----------
    epoch : int
        Microseconds since 1970-01-01 UTC.
    a_re, e : float
        Semi-major axis in R_E, eccentricity below 1.
    i_deg, raan_deg, argp_deg, m_deg : float
        Inclination, right ascension of the ascending node, argument of perigee, mean anomaly; of `FRAME`.
    """

    epoch: int
    a_re: float
    e: float
    i_deg: float
    raan_deg: float
    argp_deg: float
    m_deg: float

    @property
    def a_km(self) -> float:
        """Semi-major axis, km."""
        return self.a_re * constants.EARTH_RADIUS_KM

    @property
    def perigee_re(self) -> float:
        """Distance of the perigee from the Earth's centre."""
        return self.a_re * (1.0 - self.e)

    @property
    def mean_motion(self) -> float:
        """Of the unperturbed orbit, rad/s."""
        return math.sqrt(constants.EARTH_GM_KM3_S2 / self.a_km**3)

    def rates(self) -> tuple[float, float, float]:
        """Secular rates of node, argument of perigee and mean anomaly, rad/s."""
        root = math.sqrt(1.0 - self.e**2)
        ratio = constants.EARTH_EQUATOR_KM / (self.a_km * root**2)
        unit = 0.75 * self.mean_motion * constants.EARTH_J2 * ratio**2
        cos = math.cos(math.radians(self.i_deg))
        node, perigee = -2.0 * unit * cos, unit * (5.0 * cos**2 - 1.0)
        return node, perigee, self.mean_motion + unit * root * (3.0 * cos**2 - 1.0)

    def covered(self, stamps: Micros) -> NDArray[np.bool_]:
        """All instants."""
        return np.ones(stamps.shape, dtype=bool)

    def pieces(self, stamps: Micros) -> Iterator[Piece]:
        """See Source."""
        seconds = (stamps - self.epoch) / MICROS_PER_S
        given = (self.raan_deg, self.argp_deg, self.m_deg)
        node, perigee, mean = (math.radians(a) + rate * seconds for a, rate in zip(given, self.rates()))
        eccentric = eccentric_anomaly(mean, self.e)
        x = self.a_km * (np.cos(eccentric) - self.e)
        y = self.a_km * math.sqrt(1.0 - self.e**2) * np.sin(eccentric)
        # from the plane of the orbit, x to the perigee, to the equator
        along = x * np.cos(perigee) - y * np.sin(perigee)
        across = x * np.sin(perigee) + y * np.cos(perigee)
        level = across * math.cos(math.radians(self.i_deg))
        places = np.stack(
            [
                along * np.cos(node) - level * np.sin(node),
                along * np.sin(node) + level * np.cos(node),
                across * math.sin(math.radians(self.i_deg)),
            ],
            axis=1,
        )
        yield Piece(np.arange(stamps.size), FRAME, places)


def eccentric_anomaly(mean: Floats, e: float) -> Floats:
    """The solution E of ``E - e sin E = M``: Newton's method from ``M + 0.85 e`` towards apogee, from where it
    converges for every e below 1 (Danby 1987, Celestial Mechanics 40, 303)."""
    m = np.remainder(mean + np.pi, 2.0 * np.pi) - np.pi
    found = m + 0.85 * e * np.sign(np.sin(m))
    for _ in range(NEWTON_STEPS):
        step = (found - e * np.sin(found) - m) / (1.0 - e * np.cos(found))
        found = found - step
        if np.all(np.abs(step) < 1e-14):
            break
    return np.asarray(found)
