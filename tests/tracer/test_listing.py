"""The field models as values and as text."""

from __future__ import annotations

import json

import canonical
import pytest

from fields import catalogue
from fields.errors import InputError
from tracer.listing import described, text

NAMES = [*catalogue.MAGNETIC, *catalogue.ELECTRIC]


def test_all_models_are_listed_magnetic_first() -> None:
    found = described()["models"]
    assert [model["name"] for model in found] == NAMES
    lines = text(described(), whole=False).splitlines()
    assert len(lines) == len(NAMES)
    for line, model in zip(lines, found, strict=True):
        assert line.split()[:2] == [model["kind"], model["name"]]
        assert line.endswith(model["title"])


@pytest.mark.parametrize("name", NAMES)
def test_one_model_with_all_its_parameters(name: str) -> None:
    (model,) = described(name)["models"]
    kind = "magnetic" if name in catalogue.MAGNETIC else "electric"
    card = catalogue.find(kind, name).card
    assert [p["name"] for p in model["parameters"]] == [p.name for p in card.parameters]
    shown = text(described(name), whole=True)
    for expected in (card.title, card.formula, card.reference, card.kind):
        assert expected in shown
    for parameter in card.parameters:
        line = next(line for line in shown.splitlines() if line.strip().startswith(parameter.name + " "))
        assert parameter.meaning in line
        assert parameter.range_text() in line
        assert ("; a number or a series" in line) == parameter.varies
        if parameter.default is not None:
            assert f"default {parameter.default:g}" in line


@pytest.mark.parametrize("model", [*canonical.MAGNETIC, *canonical.ELECTRIC], ids=canonical.label)
def test_values_are_plain(model: object) -> None:
    assert json.loads(json.dumps(described(), allow_nan=False)) == described()
    assert type(model).card.name in NAMES  # type: ignore[attr-defined]


def test_an_unknown_name_gets_the_nearest() -> None:
    with pytest.raises(InputError) as caught:
        described("volland-sterm")
    assert str(caught.value) == 'driftrose: NAME = "volland-sterm": unknown model; did you mean volland-stern'
