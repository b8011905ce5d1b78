"""A field model from another package is used in a run file by name."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest

import tracer
from fields import catalogue

MODEL = '''
from dataclasses import dataclass
from typing import ClassVar

from fields import Card, ElectricModel, Parameter, Term, Uniform
from fields.electric.uniform import uniform


@dataclass(frozen=True, eq=False)
class Halved(ElectricModel):
    strength_mV_per_m: float

    card: ClassVar[Card] = Card(
        "halved", "electric", "half a uniform field", "Phi = -s/2 r sin(phi)",
        (Parameter("strength_mV_per_m", "mV/m", "twice the field", low=0.0, required=True),), "none",
    )

    def term(self, magnetic):
        return Term(uniform, (self.strength_mV_per_m / 2,))


class Clash(Uniform):
    """A second model called uniform."""


not_a_model = 3
'''


def install(folder: Path, monkeypatch: pytest.MonkeyPatch, entries: str) -> None:
    """A package with entry points, as an installer leaves it."""
    (folder / "halving_model.py").write_text(MODEL)
    info = folder / "halving-1.0.dist-info"
    info.mkdir()
    (info / "METADATA").write_text("Metadata-Version: 2.1\nName: halving\nVersion: 1.0\n")
    (info / "entry_points.txt").write_text(f"[{catalogue.GROUP}]\n{entries}\n")
    monkeypatch.syspath_prepend(str(folder))


def run(model: str = "halved", **parameters: Any) -> tracer.Scenario:
    population = {"species": "H+", "count": 1, "r_re": 5.0, "mlt_h": 0.0, "energy_keV": 1.0, "pitch_deg": 90.0}
    return tracer.build(
        {
            "time": {"start": datetime(2027, 1, 1, tzinfo=UTC), "hours": 1.0},
            "magnetic": {"model": "dipole", "b0_nT": 30000.0},
            "electric": [{"model": model, **parameters}],
            "population": [population],
        }
    )


def test_registered_model_is_used(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    install(tmp_path, monkeypatch, "halved = halving_model:Halved")
    halved = run(strength_mV_per_m=1.0).field
    plain = run("uniform", e0_mV_per_m=0.5).field
    assert halved.potential_kV(5.0, 18.0) == plain.potential_kV(5.0, 18.0) != 0.0
    assert list(catalogue.listing("electric")) == [*catalogue.ELECTRIC, "halved"]
    assert list(catalogue.listing("magnetic")) == list(catalogue.MAGNETIC)


def test_its_parameters_are_checked(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    install(tmp_path, monkeypatch, "halved = halving_model:Halved")
    with pytest.raises(tracer.InputError, match=r"electric\[1\]\.strength_mV_per_m = -1\.0: out of range"):
        run(strength_mV_per_m=-1.0)
    with pytest.raises(tracer.InputError, match=r"electric\[1\]\.strength_mV_per_m: missing"):
        run()
    with pytest.raises(tracer.InputError, match="unknown electric model; did you mean halved"):
        run("halfed")


@pytest.mark.parametrize(
    ("entry", "words"),
    [
        ("broken = no_such_module:Model", "does not load"),
        ("number = halving_model:not_a_model", "is not a field model"),
        ("clash = halving_model:Clash", "registers a second electric model called uniform"),
    ],
)
def test_faulty_registrations(entry: str, words: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    install(tmp_path, monkeypatch, entry)
    with pytest.raises(tracer.InputError, match=f"entry point driftrose.fields: .*{words}"):
        run()


def test_built_in_models_need_no_registry(monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(**_: Any) -> None:
        raise AssertionError("looked for registered models")

    monkeypatch.setattr(catalogue, "entry_points", refuse)
    assert run("uniform", e0_mV_per_m=0.5).count == 1


def test_names_are_those_of_the_cards() -> None:
    for kind, models in catalogue.BUILT_IN.items():
        for name, model in models.items():
            assert (model.card.name, model.card.kind) == (name, kind)
            assert catalogue.find(kind, name) is model
