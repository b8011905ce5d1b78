"""``[access]`` to the request: its axes filled, its source held against the outer boundary."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

import numpy as np

from fields.units import Floats
from tracer.access_plan import AccessRequest, Sector
from tracer.runfile.places import Path, fault
from tracer.runfile.populations import species_of
from tracer.runfile.quantities import Rule, cold_fault, quantity
from tracer.runfile.schema import ACCESS_AXES, AccessTable, SourceTable, SpeciesTable
from tracer.scenario import Domain, Quantity, Species
from tracer.spacing import grid_points

PATH: Path = ("access",)
SAME_PLACE_RE = 1e-9
LONGEST_AXIS = 10**6
MOST_TARGETS = 10**9  # as many as a run has particles at most


def access_request(table: AccessTable, rules: Mapping[str, Rule], domain: Domain, orbits: int) -> AccessRequest:
    """The request of an ``[access]`` table.

    Parameters
    ----------
    table : AccessTable
    rules : mapping
        Of the run's quantities, from `tracer.runfile.quantities.rules`.
    domain : Domain
    orbits : int
        How many orbits the run has: without any, places must be given.

    Raises
    ------
    InputError
    """
    given = {key: _axis(table, key, rules) for key in ACCESS_AXES}
    _check_complete(table, orbits)
    energy, pitch = given["energy_keV"], given["pitch_deg"]
    assert energy is not None
    assert pitch is not None
    cold = cold_fault((*PATH, "energy_keV"), energy, pitch)
    if cold is not None:
        raise cold
    species = _species(table.species)
    _refuse_absurd({key: axis.size for key, axis in given.items() if axis is not None}, len(species))
    axes = {key: _filled(key, axis) for key, axis in given.items()}
    return AccessRequest(species, back_hours=table.back_hours, source=_sector(table.source, domain), **axes)


def _refuse_absurd(sizes: Mapping[str, int], species: int) -> None:
    count = math.prod(sizes.values()) * species
    longest = max(sizes, key=lambda key: sizes[key])
    if sizes[longest] > LONGEST_AXIS or count > MOST_TARGETS:
        problem = f"{sizes[longest]:,} values, {count:.3g} targets in all"
        remedy = f"at most {LONGEST_AXIS:,} values and {MOST_TARGETS:,} targets"
        raise fault((*PATH, longest), None, problem, remedy)


def _axis(table: AccessTable, key: str, rules: Mapping[str, Rule]) -> Quantity | None:
    given = getattr(table, key)
    if given is None:
        return None
    return quantity((*PATH, key), given, rules["release_h" if key == "time_h" else key], "grid")


def _check_complete(table: AccessTable, orbits: int) -> None:
    """A map takes places and times; a request without one takes orbits."""
    together = ("r_re", "mlt_h", "time_h")
    missing = [key for key in together if getattr(table, key) is None]
    if len(missing) < len(together) or not orbits:
        for key in missing:
            remedy = "r_re, mlt_h and time_h together" + ("" if orbits else ", or an [[orbit]]")
            raise fault((*PATH, key), None, "missing", remedy)


def _filled(key: str, given: Quantity | None) -> Floats:
    """The values of an axis in the order of the file; each may stand there once."""
    if given is None:
        return np.empty(0)
    values = grid_points(key, given, np.arange(given.size))
    if key == "mlt_h":
        values = np.mod(values, 24.0)
    _, first, inverse = np.unique(values, return_index=True, return_inverse=True)
    again = np.flatnonzero(first[inverse] < np.arange(values.size))
    if again.size:
        at = int(again[0])
        value = given.values[at] if given.kind == "list" else float(values[at])
        raise fault((*PATH, key, at), value, "given twice", "each value once")
    values.setflags(write=False)
    return values


def _species(given: str | SpeciesTable | Sequence[str | SpeciesTable]) -> tuple[Species, ...]:
    path = (*PATH, "species")
    if isinstance(given, (str, SpeciesTable)):
        return (species_of(path, given),)
    found: list[Species] = []
    for i, member in enumerate(given):
        species = species_of((*path, i), member)
        if species in found:
            raise fault((*path, i), species.name, "given twice", "each species once")
        found.append(species)
    if not found:
        raise fault(path, [], "empty", 'at least one, such as "H+"')
    return tuple(found)


def _sector(given: SourceTable | None, domain: Domain) -> Sector:
    if given is None:
        return Sector(domain.outer_re)
    path = (*PATH, "source")
    if given.r_re is not None and abs(given.r_re - domain.outer_re) > SAME_PLACE_RE:
        problem = "no point of the outer boundary lies there"
        raise fault((*path, "r_re"), given.r_re, problem, f"outer_re = {domain.outer_re:g}")
    if given.mlt_h is None:
        return Sector(domain.outer_re)
    low, high = given.mlt_h.from_, given.mlt_h.to
    if (high - low) % 24.0 == 0.0 and (low, high) != (0.0, 24.0):
        remedy = "two different local times; 0 to 24 is the full circle"
        raise fault((*path, "mlt_h"), given.mlt_h.model_dump(by_alias=True), "holds no point of the boundary", remedy)
    return Sector(domain.outer_re, low, high)
