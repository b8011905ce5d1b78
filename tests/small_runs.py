"""Small scenarios and results made by hand, for what is tested without tracing anything. All numbers are invented."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, ClassVar

import numpy as np

from fields.contract import Card, MagneticModel, Parameter
from fields.drivers import Driver
from fields.electric.corotation import Corotation
from fields.electric.volland_stern import VollandStern
from fields.field import compose
from tracer import store
from tracer.population import initial_state
from tracer.records import END, TRACK, Chunk
from tracer.scenario import SPECIES, Domain, Origin, Output, Population, Quantity, Scenario
from tracer.status import Cause


@dataclass(frozen=True, eq=False)
class NamedField(MagneticModel):
    """A magnetic model of which only the name and the surface field are asked."""

    b0_nT: float = 30000.0

    card: ClassVar[Card] = Card("named", "magnetic", "", "", (Parameter("b0_nT", "nT", "surface field"),), "")

    def reference_b0_nT(self) -> float:
        return self.b0_nT


KP = Driver("series:kp", np.array([0.0, 3.0, 6.0]), np.array([2.0, 6.0, 4.0]), np.array([0.0, 0.0, 0.25]), 12.0)


def number(value: float) -> Quantity:
    return Quantity("number", (value,))


def span(begin: float, end: float, spacing: Any = "linear", n: int = 0) -> Quantity:
    return Quantity("range", (begin, end), spacing, n)


def population(name: str = "protons", species: str = "H+", **given: Any) -> Population:
    usual: dict[str, Any] = {
        "count": 16,
        "draw": "sobol",
        "seed": 7,
        "r_re": span(6.0, 7.0),
        "mlt_h": span(21.0, 3.0),
        "energy_keV": span(1.0, 300.0, "log"),
        "pitch_deg": span(20.0, 90.0, "isotropic"),
        "release_h": number(0.0),
    }
    return Population(name=name, species=SPECIES[species], **{**usual, **given})


def scenario(*populations: Population, **given: Any) -> Scenario:
    usual: dict[str, Any] = {
        "title": "Invented storm",
        "start": datetime(2027, 3, 4, tzinfo=UTC),
        "hours": 12.0,
        "backward": False,
        "domain": Domain(),
        "field": compose(NamedField(), [Corotation(), VollandStern(gamma=2.0, kp=KP)]),
        "loss_cone": "flag",
        "output": Output(every_min=45.0),
        "origin": Origin("storm.toml", '[time]\nhours = 12.0  # "µ" and more\n', {"kp.csv": "ab" * 32}),
    }
    return Scenario(populations=populations or (population(),), **{**usual, **given})


def chunk(run: Scenario, first: int, stop: int, seed: int = 1) -> Chunk:
    """Columns of the right shapes: the true initial state, and numbers that depend on the particle alone."""
    size, n_time = stop - first, run.save_times_h.size
    draws = [np.random.default_rng([seed, particle]) for particle in range(first, stop)]
    particle = initial_state(run, first, stop)
    for name in ("mu_MeV_per_G", "K_re_sqrtG"):
        particle[name] = np.array([d.random() for d in draws])
    track = {c.name: np.array([d.random(n_time) for d in draws]).reshape(size, n_time) for c in TRACK}
    track = {name: np.where(values < 0.1, np.nan, values) for name, values in track.items()}
    end = {c.name: np.array([d.random() for d in draws]) for c in END}
    end["cause"] = np.array([d.integers(len(Cause)) for d in draws], dtype=np.uint8)
    end["loss_cone_h"][np.arange(first, stop) % 2 == 0] = np.nan
    return Chunk(first, particle, track if n_time else {}, end)


SHORT = scenario(population(count=5), population("electrons", "e-", count=4, draw="random"))


def write(path: Path, run: Scenario = SHORT, step: int = 4, overwrite: bool = False) -> Path:
    """The trajectory file of `run`, its chunks written last first."""
    with store.TrajectoryWriter(path, run, {"pilot": 0.5}, overwrite) as writer:
        for first in reversed(range(0, run.count, step)):
            writer.write(chunk(run, first, min(first + step, run.count)))
        writer.finish()
    return path
