"""The field models as plain values and as text, read from their cards."""

from __future__ import annotations

from typing import Any

from fields.catalogue import find, listing
from fields.contract import Card
from fields.errors import InputError, nearest


def described(name: str | None = None) -> dict[str, Any]:
    """All models, or the one called `name`.

    Raises
    ------
    InputError
        When there is none of that name; names the nearest.
    """
    known = {model.card.name: model.card for kind in ("magnetic", "electric") for model in listing(kind).values()}
    if name is None:
        return {"models": [_plain(card) for card in known.values()]}
    if name not in known:
        raise InputError("unknown model", nearest(name, known), key="NAME", value=name)
    return {"models": [_plain(find(known[name].kind, name).card)]}


def _plain(card: Card) -> dict[str, Any]:
    return {
        "name": card.name,
        "kind": card.kind,
        "title": card.title,
        "formula": card.formula,
        "parameters": [
            {
                "name": p.name,
                "unit": p.unit,
                "meaning": p.meaning,
                "allowed": p.range_text(),
                "default": p.default,
                "may_vary": p.varies,
            }
            for p in card.parameters
        ],
        "reference": card.reference,
    }


def text(found: dict[str, Any], whole: bool) -> str:
    """The models as text: one line each, or all that is known."""
    return "\n\n".join(map(_whole, found["models"])) if whole else "\n".join(map(_line, found["models"]))


def _line(model: dict[str, Any]) -> str:
    return f"{model['kind']:9} {model['name']:14} {model['title']}"


def _whole(model: dict[str, Any]) -> str:
    lines = [f"{model['name']}: {model['title']} ({model['kind']})", f"  {model['formula']}", ""]
    for p in model["parameters"]:
        varies = "; a number or a series" if p["may_vary"] else ""
        default = f"; default {p['default']:g}" if p["default"] is not None else ""
        lines.append(f"  {p['name']:14} {p['meaning']}: {p['allowed']}{default}{varies}")
    return "\n".join([*lines, "", f"  {model['reference']}"])
