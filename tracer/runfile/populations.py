"""``[[population]]`` tables to populations, and what they must be in view of the domain, the field and each other."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from fields import constants
from fields.errors import nearest
from fields.field import Field
from fields.units import Floats, phi_from_mlt
from tracer.runfile.places import Path, fault
from tracer.runfile.quantities import Rule, cold_fault, quantity
from tracer.runfile.schema import QUANTITIES, PopulationTable, SpeciesTable
from tracer.scenario import SPECIES, Domain, Population, Quantity, Species

SAMPLES = 65  # places of a range at which the loss cone is looked at


def populations(tables: Sequence[PopulationTable], rules: dict[str, Rule]) -> tuple[Population, ...]:
    """The populations of a run, in the order of the file.

    A population without a name takes its species', numbered from the second on; without a seed, its place in the
    file, counted from 1.

    Raises
    ------
    InputError
    """
    taken = {table.name for table in tables if table.name is not None}
    found: list[Population] = []
    for i, table in enumerate(tables):
        path: Path = ("population", i)
        if table.name is not None and any(table.name == earlier.name for earlier in found):
            raise fault((*path, "name"), table.name, "given to two populations", "a name of its own")
        species = species_of((*path, "species"), table.species)
        name = table.name if table.name is not None else _free_name(species.name, taken)
        taken.add(name)
        found.append(_population(path, table, name, species, rules))
    return tuple(found)


def _population(path: Path, table: PopulationTable, name: str, species: Species, rules: dict[str, Rule]) -> Population:
    given = {key: quantity((*path, key), getattr(table, key), rules[key], table.draw) for key in QUANTITIES}
    cold = cold_fault((*path, "energy_keV"), given["energy_keV"], given["pitch_deg"])
    if cold is not None:
        raise cold
    if table.draw == "grid":
        if table.count is not None:
            raise fault((*path, "count"), table.count, "a grid has a count of its own", "no count, or a draw")
        count = math.prod(q.size for q in given.values())
    elif table.count is None:
        raise fault((*path, "count"), None, "missing", 'for example count = 1000, or draw = "grid"')
    else:
        count = table.count
    seed = path[-1] + 1 if table.seed is None and isinstance(path[-1], int) else table.seed
    assert seed is not None
    return Population(name, species, count, table.draw, seed, **given)


def species_of(path: Path, given: str | SpeciesTable) -> Species:
    """A species by its name, or of a table's mass and charge.

    Raises
    ------
    InputError
    """
    if isinstance(given, SpeciesTable):
        if given.charge == 0:
            raise fault((*path, "charge"), 0, "a neutral particle does not drift", "a whole number other than 0")
        sign = "+" if given.charge > 0 else "-"
        name = f"{given.mass_u:.15g}u{abs(given.charge)}{sign}"
        return Species(name, given.mass_u * constants.ATOMIC_MASS_KG, given.charge)
    if given not in SPECIES:
        remedy = f"{nearest(given, SPECIES)}, or {{ mass_u = 16.0, charge = 1 }}"
        raise fault(path, given, "unknown species", remedy)
    return SPECIES[given]


def _free_name(wanted: str, taken: set[str]) -> str:
    name, number = wanted, 1
    while name in taken:
        number += 1
        name = f"{wanted} {number}"
    return name


def refuse_lost(found: Sequence[Population], field: Field, domain: Domain) -> None:
    """Raise when a listed pitch angle, or a whole range, starts inside the loss cone everywhere.

    For runs that end particles there. The edge of the cone is sin^2 = B_eq / B_foot, taken from the field lines; of a
    range or a longer list in r or local time it is looked at in `SAMPLES` places, ends included.

    Raises
    ------
    InputError
    """
    for i, population in enumerate(found):
        edge_sin2 = _narrowest_cone(population, field, domain)
        edge_deg = math.degrees(math.asin(math.sqrt(edge_sin2)))
        pitch, path = population.pitch_deg, ("population", i, "pitch_deg")
        highest = [pitch.high] if pitch.kind == "range" else pitch.values
        for j, value in enumerate(highest):
            if math.sin(math.radians(value)) ** 2 >= edge_sin2:
                continue
            what = "the whole range is inside the loss cone" if pitch.kind == "range" else "inside the loss cone"
            place = (*path, j) if pitch.kind == "list" else (*path, "to") if pitch.kind == "range" else path
            remedy = f'at least {math.ceil(edge_deg * 1000.0) / 1000.0:g} degrees, or loss_cone = "flag"'
            raise fault(place, value, f'{what}, where loss_cone = "stop" ends it at once', remedy)


def _narrowest_cone(population: Population, field: Field, domain: Domain) -> float:
    r, mlt = np.meshgrid(_samples(population.r_re), _samples(population.mlt_h), indexing="ij")
    phi = phi_from_mlt(mlt)
    ratio = field.equatorial_field(r, phi) / field.lines.foot_field(r, phi, domain.foot_re)
    return min(float(np.min(ratio)), 1.0)


def _samples(quantity: Quantity) -> Floats:
    if quantity.kind != "range":
        members = np.unique(quantity.values)
        return np.asarray(members[np.unique(np.linspace(0, members.size - 1, SAMPLES).astype(int))])
    low, high = quantity.values
    return np.linspace(low, high if high > low else high + 24.0, SAMPLES)
