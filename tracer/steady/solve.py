"""Boundaries of particles, and the regions of places, through the compiled search. User units in and out."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from itertools import pairwise
from typing import Any, TypeVar

import numpy as np
from numpy.typing import ArrayLike

from fields.field import Field
from fields.units import Floats, mlt_from_phi, phi_from_mlt
from tracer.adiabatic import checked
from tracer.kernels.curves import contours, hamiltonian_of
from tracer.machine import processors
from tracer.scenario import Species
from tracer.steady import particles as given
from tracer.steady.records import Annulus, Boundaries, Codes, Particles, Regions
from tracer.steady.tables import FLAT, WHOLE, boundaries_of, kernel_rows

PIECES = 4  # of the work, for each thread
Answer = TypeVar("Answer")


def boundaries(
    field: Field,
    species: str | Species,
    energy_keV: ArrayLike,
    pitch_deg: ArrayLike,
    r_re: ArrayLike,
    mlt_h: ArrayLike,
    time_h: ArrayLike = 0.0,
    *,
    outer_re: float = 10.0,
    inner_re: float = 1.02,
    source_mlt_h: tuple[float, float] = (0.0, 24.0),
    threads: int | None = None,
) -> Boundaries:
    """Stagnation points, separatrices and the other curves that bound regions, in the field as it is at one instant.

    The level curves of ``H = W(mu, B_m(K)) + q Phi`` (Northrop 1963; Roederer 1970) are followed, not the motion; see
    `tracer.steady` for how. Curves are good to 1e-8 R_E outside 0.01 R_E of a saddle. Structure finer than
    4 degrees or 7 % of r may be missed when it comes in pairs that no index tells of.

    Parameters
    ----------
    field : fields.Field
        Held as it is at `time_h`.
    species : str or Species
    energy_keV, pitch_deg, r_re, mlt_h : array_like
        Kinetic energy and equatorial pitch angle of particles at places; they broadcast. Zero energy is cold plasma.
    time_h : array_like
        Hours since start; at a step of a driver, after it.
    outer_re, inner_re : float
        The domain, R_E.
    source_mlt_h : tuple of float
        Source sector of the outer boundary, eastward from one local time to the other; 0 and 24 for all of it.
    threads : int, optional
        All processors by default. The result does not depend on it.

    Returns
    -------
    Boundaries
        For n particles, the size of the broadcast arguments.

    Raises
    ------
    InputError
        For an unknown species, an impossible value, a time outside a driver's cover, or a source sector without width.
    """
    asked = given.of_energy(field, species, energy_keV, pitch_deg, r_re, mlt_h, time_h)
    return _boundaries(asked, given.annulus(outer_re, inner_re, source_mlt_h), threads)


def boundaries_from_invariants(
    field: Field,
    species: str | Species,
    mu_MeV_per_G: ArrayLike,
    K_re_sqrtG: ArrayLike,
    time_h: ArrayLike = 0.0,
    *,
    outer_re: float = 10.0,
    inner_re: float = 1.02,
    source_mlt_h: tuple[float, float] = (0.0, 24.0),
    threads: int | None = None,
) -> Boundaries:
    """`boundaries` of particles given by their invariants, in MeV/G and R_E G^(1/2)."""
    asked = given.of_invariants(field, species, mu_MeV_per_G, K_re_sqrtG, time_h)
    return _boundaries(asked, given.annulus(outer_re, inner_re, source_mlt_h), threads)


def _boundaries(asked: Particles, domain: Annulus, threads: int | None) -> Boundaries:
    hamiltonian = hamiltonian_of(asked.field)
    rows = given.rows(asked, hamiltonian)
    find: Any = contours().find_boundaries

    def piece(part: slice) -> tuple[Floats, ...]:
        found: tuple[Floats, ...] = find(hamiltonian.addresses, hamiltonian.constants, rows[part], domain.limits)
        return found

    parts = _parts(len(rows), threads)
    return boundaries_of(asked, domain, parts, _each(piece, parts, threads))


def classify(bounds: Boundaries, r_re: ArrayLike, mlt_h: ArrayLike, *, threads: int | None = None) -> Codes:
    """The region in which places lie, for each particle of `bounds`.

    Parameters
    ----------
    bounds : Boundaries
        From `boundaries`.
    r_re, mlt_h : array_like
        Places; they broadcast.
    threads : int, optional
        All processors by default.

    Returns
    -------
    ndarray of uint8
        Of the particles' shape followed by that of the places; see `Region`.

    Raises
    ------
    InputError
        For a place outside the domain.
    """
    domain, asked = bounds.annulus, bounds.particles
    places, shape = _places(domain, r_re, mlt_h)
    hamiltonian = hamiltonian_of(asked.field)
    rows = given.rows(asked, hamiltonian)
    states = np.where(bounds.complete, WHOLE, 0) | np.where(bounds.same_all_round, FLAT, 0)
    order = np.arange(len(rows) + 1)
    circle_rows = np.searchsorted(bounds.circles[:, 0], order)
    curve_rows = np.searchsorted(bounds.curves.particle, order)
    curves = kernel_rows(bounds.curves)
    region = np.empty((len(rows), len(places)), np.uint8)
    sort: Any = contours().sort_regions

    def piece(part: slice) -> None:
        reach = slice(part.start, part.stop + 1)
        sort(
            hamiltonian.addresses, hamiltonian.constants, rows[part], places, domain.limits, states[part],
            bounds.circles, circle_rows[reach], curves, curve_rows[reach], bounds.curves.place, region[part],
        )  # fmt: skip

    _each(piece, _parts(len(rows), threads), threads)
    return region.reshape(asked.shape + shape)


def regions(
    field: Field,
    species: str | Species,
    energy_keV: ArrayLike,
    pitch_deg: ArrayLike,
    r_re: ArrayLike,
    mlt_h: ArrayLike,
    time_h: ArrayLike = 0.0,
    *,
    outer_re: float = 10.0,
    inner_re: float = 1.02,
    source_mlt_h: tuple[float, float] = (0.0, 24.0),
    threads: int | None = None,
) -> Regions:
    """The region of each particle at its own place: what a map at given energies asks, where (mu, K) differ from place
    to place.

    Parameters
    ----------
    field, species, energy_keV, pitch_deg, r_re, mlt_h, time_h, outer_re, inner_re, source_mlt_h, threads
        As of `boundaries`; the places must lie in the domain.

    Returns
    -------
    Regions
        Of the broadcast shape.

    Raises
    ------
    InputError
        As `boundaries`, and for a place outside the domain.
    """
    domain = given.annulus(outer_re, inner_re, source_mlt_h)
    r, mlt, *rest = np.broadcast_arrays(r_re, mlt_h, energy_keV, pitch_deg, time_h)
    places, shape = _places(domain, r, mlt)
    asked = given.of_energy(field, species, rest[0], rest[1], r, mlt, rest[2])
    hamiltonian = hamiltonian_of(field)
    rows = given.rows(asked, hamiltonian)
    region, entry = np.empty(len(rows), np.uint8), np.empty(len(rows))
    find: Any = contours().find_regions

    def piece(part: slice) -> None:
        find(
            hamiltonian.addresses, hamiltonian.constants, rows[part], places[part], domain.limits, region[part],
            entry[part],
        )  # fmt: skip

    _each(piece, _parts(len(rows), threads), threads)
    return Regions(region.reshape(shape), np.where(np.isnan(entry), np.nan, mlt_from_phi(entry)).reshape(shape))


def _places(domain: Annulus, r_re: ArrayLike, mlt_h: ArrayLike) -> tuple[Floats, tuple[int, ...]]:
    """Checked places as rows of (ln r, phi), and their shape."""
    r = checked("r_re", r_re, domain.inner_re, domain.outer_re)
    r, phi = np.broadcast_arrays(r, phi_from_mlt(checked("mlt_h", mlt_h, -np.inf)))
    # the logarithm of a boundary must be the boundary's own
    x = np.clip(np.log(r), *domain.limits[0])
    return np.stack([x.ravel(), phi.ravel()], axis=1), r.shape


def _parts(count: int, threads: int | None) -> list[slice]:
    """Consecutive pieces of the particles."""
    cuts = np.linspace(0, count, min(count, PIECES * (threads or processors())) + 1).astype(int)
    return [slice(int(a), int(b)) for a, b in pairwise(cuts)]


def _each(work: Callable[[slice], Answer], parts: Sequence[slice], threads: int | None) -> list[Answer]:
    """`work` over all parts, in order; the compiled code lets other threads run."""
    if len(parts) <= 1:
        return [work(part) for part in parts]
    with ThreadPoolExecutor(threads or processors()) as pool:
        return list(pool.map(work, parts))
