"""The targets of ``[access]`` and how each begins its way back: a pure function of its index.

Targets stand in one row: those of the map in the order (species, time, energy, pitch, r, mlt), then those of each
orbit in the order (species, time, energy, pitch), last fastest. So the same bits come out however the row is cut into
chunks, and memory is bounded by what is asked for.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from fields.errors import InputError
from fields.field import Field
from fields.units import Floats, cot2_of_pitch, phi_from_mlt, rest_energy_keV
from tracer.access_plan import AccessRequest
from tracer.adiabatic import momentum_term
from tracer.orbit import Orbit, orbits
from tracer.outcomes import Outcome
from tracer.scenario import Scenario

Index = NDArray[np.int64]
ASKED = 255  # in `Block.answered`: this one has to be traced


@dataclass(frozen=True, eq=False)
class Block:
    """Targets whose energies, pitch angles and places form a product.

    Attributes
    ----------
    shape : tuple of int
        Species, times, energies, pitch angles, and places at one time.
    time_h : ndarray, shape (n_time,)
        Run times of the targets.
    r, phi : ndarray, shape (n_place,)
        Internal units; of an orbit, one for each time.
    mirror, k : ndarray, shape (n_pitch, n_place)
        Mirror field in nT and second invariant of a pitch angle at a place.
    answered : ndarray of uint8, shape (n_pitch, n_place)
        The outcome where it is known beforehand, else `ASKED`.
    moving : bool
        Whether there is one place at each time, instead of all places at all times.
    """

    shape: tuple[int, int, int, int, int]
    time_h: Floats
    r: Floats
    phi: Floats
    mirror: Floats
    k: Floats
    answered: NDArray[np.uint8]
    moving: bool

    @property
    def count(self) -> int:
        """Number of targets."""
        return math.prod(self.shape)


@dataclass(frozen=True, eq=False)
class Begun:
    """Some targets before they are traced.

    Attributes
    ----------
    time_h : ndarray, shape (n,)
    answered : ndarray of uint8, shape (n,)
        As in `Block`.
    state : ndarray, shape (n, 8)
        As the kernel takes it, see `tracer.integrate.Prepared`; of targets that are answered, nothing.
    """

    time_h: Floats
    answered: NDArray[np.uint8]
    state: Floats


@dataclass(frozen=True, eq=False)
class Targets:
    """All that is asked for.

    Attributes
    ----------
    run, scenario : Scenario
        The run, and the same turned backward: what the kernel goes by.
    request : AccessRequest
    record_h : float
        Run time at which the record begins: the start of the run, or of the cover of its drivers if that is later.
    orbits : tuple of Orbit
    blocks : tuple of Block
        The map, if there is one, and the orbits.
    equatorial : bool
        Whether all of them mirror at the equator.
    """

    run: Scenario
    scenario: Scenario
    request: AccessRequest
    record_h: float
    orbits: tuple[Orbit, ...]
    blocks: tuple[Block, ...]
    equatorial: bool

    @property
    def count(self) -> int:
        """Number of targets."""
        return sum(block.count for block in self.blocks)

    @property
    def map(self) -> Block | None:
        """The block of the map."""
        return self.blocks[0] if self.request.has_map else None

    @property
    def offsets(self) -> tuple[int, ...]:
        """Index of the first target of each block."""
        return tuple(np.cumsum([0, *(block.count for block in self.blocks)]).tolist()[:-1])

    def at(self, index: Index) -> Begun:
        """Targets by their index, in any order."""
        begun = Begun(np.empty(index.size), np.empty(index.size, np.uint8), np.empty((index.size, 8)))
        for block, offset in zip(self.blocks, self.offsets):
            here = (index >= offset) & (index < offset + block.count)
            if here.any():
                part = self._begun(block, index[here] - offset)
                begun.time_h[here], begun.answered[here], begun.state[here] = part.time_h, part.answered, part.state
        return begun

    def _begun(self, block: Block, index: Index) -> Begun:
        asked = self.request
        species, time, energy, pitch, place = np.unravel_index(index, block.shape)
        if block.moving:
            place = time
        rest = rest_energy_keV([s.mass_kg for s in asked.species])
        charge = np.array([float(s.charge_e) for s in asked.species])
        term = momentum_term(asked.energy_keV, rest[:, None])
        time_h = block.time_h[time]
        state = np.stack(
            [
                block.r[place],
                block.phi[place],
                time_h,
                term[species, energy] / block.mirror[pitch, place],
                block.k[pitch, place],
                1.0 / charge[species],
                2.0 / rest[species],
                np.maximum(time_h - asked.back_hours, self.record_h),
            ],
            axis=1,
        )
        return Begun(time_h, block.answered[pitch, place], state)


def targets_of(scenario: Scenario) -> Targets:
    """All targets of a run.

    Raises
    ------
    InputError
        When the run asks for no access, or an orbit cannot be computed.
    """
    request = scenario.access
    if request is None:
        raise InputError("missing", "a table [access]", key="access", file=scenario.origin.file)
    found = orbits(scenario)
    blocks = [_map(scenario, request)] if request.has_map else []
    blocks += [_along(scenario, request, orbit) for orbit in found]
    begins = (min(0.0, scenario.end_h), *(float(driver.start_h[0]) for driver in scenario.field.drivers))
    # inside the loss cone particles go on unless they are to stop: there is no column for it
    cone = scenario.loss_cone if scenario.loss_cone == "stop" else "off"
    turned = replace(scenario, backward=True, loss_cone=cone)
    equatorial = bool(np.all(request.pitch_deg == 90.0))
    return Targets(scenario, turned, request, max(begins), found, tuple(blocks), equatorial)


def _map(scenario: Scenario, request: AccessRequest) -> Block:
    r, phi = (part.ravel() for part in np.meshgrid(request.r_re, phi_from_mlt(request.mlt_h), indexing="ij"))
    mirror, k = _bound(scenario.field, request.pitch_deg, r, phi)
    answered = np.full(k.shape, ASKED, np.uint8)
    sizes = (len(request.species), request.time_h.size, request.energy_keV.size, request.pitch_deg.size, r.size)
    return Block(sizes, request.time_h, r, phi, mirror, k, answered, moving=False)


def _along(scenario: Scenario, request: AccessRequest, orbit: Orbit) -> Block:
    """Where a place lies outside the domain the numbers stand for some place within, and are never used."""
    answered = np.full((request.pitch_deg.size, orbit.time_h.size), ASKED, np.uint8)
    answered[orbit.out_of_reach(request.pitch_deg)] = Outcome.OUT_OF_REACH
    answered[:, ~orbit.inside] = Outcome.OUTSIDE_DOMAIN
    r = np.where(orbit.inside, orbit.r_re, scenario.domain.outer_re)
    phi = phi_from_mlt(orbit.mlt_h)
    mirror, k = _bound(scenario.field, request.pitch_deg, r, phi)
    sizes = (len(request.species), orbit.time_h.size, request.energy_keV.size, request.pitch_deg.size, 1)
    return Block(sizes, orbit.time_h, r, phi, mirror, k, answered, moving=True)


def _bound(field: Field, pitch_deg: Floats, r: Floats, phi: Floats) -> tuple[Floats, Floats]:
    """Mirror field and second invariant of each pitch angle at each place."""
    cot2 = cot2_of_pitch(pitch_deg)[:, None]
    mirror = field.equatorial_field(r, phi) * (1.0 + cot2)
    return mirror, np.broadcast_to(field.lines.second_invariant(cot2, r, phi), mirror.shape)


def traced(begun: Begun) -> NDArray[np.bool_]:
    """Which of some targets have to be traced."""
    return np.asarray(begun.answered == ASKED)


def traced_count(block: Block) -> int:
    """How many targets of a block have to be traced."""
    times = 1 if block.moving else block.shape[1]
    return int(np.count_nonzero(block.answered == ASKED)) * times * block.shape[0] * block.shape[2]
