"""What is found about steady fields: frozen records in user units, one table for all particles asked about."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from fields.field import Field
from fields.units import RAD_PER_MLT_HOUR, Floats, k_to_re_sqrtG, mlt_from_phi, mu_to_MeV_per_G
from tracer.access_plan import Sector
from tracer.scenario import Species

Ints = NDArray[np.int64]
Codes = NDArray[np.uint8]


@dataclass(frozen=True, eq=False)
class Particles:
    """Particles of one species, each at its own instant; internal units.

    Attributes
    ----------
    field : Field
    species : Species
    shape : tuple of int
        Of the arguments they were made from, broadcast.
    mu, k, time : ndarray, shape (n,)
        keV/nT, R_E nT^(1/2), hours since start.
    """

    field: Field
    species: Species
    shape: tuple[int, ...]
    mu: Floats
    k: Floats
    time: Floats


@dataclass(frozen=True, eq=False)
class Annulus:
    """The domain of a steady problem: its boundaries in R_E, and the source sector of the outer one."""

    outer_re: float
    inner_re: float
    source: Sector

    @property
    def limits(self) -> tuple[tuple[float, float], tuple[float, float]]:
        """ln r of the inner and outer boundary; azimuths of the source sector, the second east of the first."""
        begin = (self.source.from_h - 12.0) * RAD_PER_MLT_HOUR
        edges = math.log(self.inner_re), math.log(self.outer_re)
        return edges, (begin, begin + self.source.width_h * RAD_PER_MLT_HOUR)


@dataclass(frozen=True, eq=False)
class StagnationPoints:
    """Where particles stand still; a table with one row for each point.

    Attributes
    ----------
    particle : ndarray, shape (m,)
        Which particle, as an index into the raveled arguments; rising.
    r_re, mlt_h : ndarray, shape (m,)
    kind : ndarray, shape (m,)
        See `PointKind`. Two points closer than 3e-4 of their distance are one degenerate point.
    hamiltonian_keV : ndarray, shape (m,)
        Kinetic energy plus charge times potential.
    hessian_keV_per_re2 : ndarray, shape (m, 2, 2)
        Second derivatives of H outward and eastward.
    tangent_deg : ndarray, shape (m, 2)
        Directions of the two separatrices through a saddle, from outward to eastward, in [0, 180); NaN elsewhere.
    """

    particle: Ints
    r_re: Floats
    mlt_h: Floats
    kind: Codes
    hamiltonian_keV: Floats
    hessian_keV_per_re2: Floats
    tangent_deg: Floats


@dataclass(frozen=True, eq=False)
class Curves:
    """Level curves that bound regions; a table with one row for each, its points in the order of the drift.

    Attributes
    ----------
    particle : ndarray, shape (m,)
        As of `StagnationPoints`; rising.
    kind : ndarray, shape (m,)
        See `CurveKind`.
    hamiltonian_keV : ndarray, shape (m,)
    begins, ends : ndarray, shape (m,)
        See `CurveEnd`.
    begin_point, end_point : ndarray, shape (m,)
        Rows of the stagnation points there, -1 where there is none.
    higher, lower : ndarray, shape (m,)
        The regions on its sides of larger and of smaller H; see `Region`.
    first, count : ndarray, shape (m,)
        Its points are ``place[first : first + count]``.
    place : ndarray, shape (n_point, 2)
        ln(r / R_E), and azimuth from noon eastward in radians, without jumps along a curve.
    """

    particle: Ints
    kind: Codes
    hamiltonian_keV: Floats
    begins: Codes
    ends: Codes
    begin_point: Ints
    end_point: Ints
    higher: Codes
    lower: Codes
    first: Ints
    count: Ints
    place: Floats

    @cached_property
    def r_re(self) -> Floats:
        """Distances of the points of all curves."""
        return np.asarray(np.exp(self.place[:, 0]))

    @cached_property
    def mlt_h(self) -> Floats:
        """Local times of the points of all curves."""
        return mlt_from_phi(self.place[:, 1])

    def path(self, row: int) -> tuple[Floats, Floats]:
        """r in R_E and local time in hours of the points of one curve."""
        points = slice(self.first[row], self.first[row] + self.count[row])
        return self.r_re[points], self.mlt_h[points]


@dataclass(frozen=True, eq=False)
class Boundaries:
    """Stagnation points and boundary curves of particles in steady fields.

    Attributes
    ----------
    particles : Particles
    annulus : Annulus
    complete : ndarray of bool, shape (n,)
        Whether the index theorem holds and every curve was followed to its end. Where not, a curve may be lacking, and
        `classify` follows the level curve of every single place.
    same_all_round : ndarray of bool, shape (n,)
        Whether H does not depend on local time: every path is a circle, and neither points nor curves are looked for.
    points : StagnationPoints
    curves : Curves
    circles : ndarray, shape (m, 6)
        Where H is stationary along a boundary, as the kernel has them.
    """

    particles: Particles
    annulus: Annulus
    complete: NDArray[np.bool_]
    same_all_round: NDArray[np.bool_]
    points: StagnationPoints
    curves: Curves
    circles: Floats

    @property
    def mu_MeV_per_G(self) -> Floats:
        """First invariants, with the shape of the arguments."""
        return mu_to_MeV_per_G(self.particles.mu).reshape(self.particles.shape)

    @property
    def K_re_sqrtG(self) -> Floats:
        """Second invariants, with the shape of the arguments."""
        return k_to_re_sqrtG(self.particles.k).reshape(self.particles.shape)


@dataclass(frozen=True, eq=False)
class Regions:
    """Where paths come from.

    Attributes
    ----------
    region : ndarray
        See `Region`.
    entry_mlt_h : ndarray
        Local time at which the path came through a boundary; NaN for closed paths.
    """

    region: Codes
    entry_mlt_h: Floats
