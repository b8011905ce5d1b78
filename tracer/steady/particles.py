"""From what a caller gives to particles, a domain and the rows that the kernel takes."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from fields.errors import InputError
from fields.field import Field
from fields.units import Floats, k_from_re_sqrtG, mu_from_MeV_per_G, rest_energy_keV
from tracer.access_plan import Sector
from tracer.adiabatic import checked, invariants, species_named
from tracer.kernels.curves import Hamiltonian
from tracer.scenario import Species
from tracer.steady.records import Annulus, Particles


def of_energy(
    field: Field,
    species: str | Species,
    energy_keV: ArrayLike,
    pitch_deg: ArrayLike,
    r_re: ArrayLike,
    mlt_h: ArrayLike,
    time_h: ArrayLike,
) -> Particles:
    """Particles of given energy and equatorial pitch angle at places."""
    found = invariants(field, species, energy_keV, pitch_deg, r_re, mlt_h)
    return of_invariants(field, species, found.mu_MeV_per_G, found.K_re_sqrtG, time_h)


def of_invariants(
    field: Field, species: str | Species, mu_MeV_per_G: ArrayLike, K_re_sqrtG: ArrayLike, time_h: ArrayLike
) -> Particles:
    """Particles of given invariants."""
    mu = mu_from_MeV_per_G(checked("mu_MeV_per_G", mu_MeV_per_G, 0.0))
    k = k_from_re_sqrtG(checked("K_re_sqrtG", K_re_sqrtG, 0.0))
    time = checked("time_h", time_h, -np.inf)
    for driver in field.drivers:
        driver.at(time)
    mu, k, time = np.broadcast_arrays(mu, k, time)
    return Particles(field, species_named(species), mu.shape, mu.ravel(), k.ravel(), time.ravel())


def annulus(outer_re: float, inner_re: float, source_mlt_h: tuple[float, float]) -> Annulus:
    """A checked domain.

    Raises
    ------
    InputError
        For boundaries out of order, or a source sector without width.
    """
    inner = float(checked("inner_re", inner_re, 0.0, low_open=True))
    outer = float(checked("outer_re", outer_re, inner, low_open=True))
    begin, end = (float(checked("source_mlt_h", hours, 0.0, 24.0)) for hours in source_mlt_h)
    if begin == end:
        remedy = "two local times, eastward from one to the other; 0 and 24 for all of the boundary"
        raise InputError("a source sector without width", remedy, key="source_mlt_h", value=tuple(source_mlt_h))
    return Annulus(outer, inner, Sector(outer, begin, end))


def rows(particles: Particles, hamiltonian: Hamiltonian) -> Floats:
    """The particles as the kernel takes them: mu, k, q, 2/(m c^2), time, drivers."""
    charge = float(particles.species.charge_e)
    rest = float(rest_energy_keV(particles.species.mass_kg))
    alike = np.broadcast_to([charge, 2.0 / rest], (particles.mu.size, 2))
    own = np.stack([particles.mu, particles.k, alike[:, 0], alike[:, 1], particles.time], axis=1)
    return np.ascontiguousarray(np.hstack([own, hamiltonian.drivers_at(particles.time)]))
