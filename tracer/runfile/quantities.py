"""What a population's quantities may be: bounds, spacings, ranges, lists."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from fields.errors import InputError
from tracer.runfile.places import Path, fault
from tracer.runfile.schema import QuantityValue, RangeTable
from tracer.scenario import Quantity, Spacing

COLDEST_KEV = 1e-9  # below it only 0 is meant
HOTTEST_KEV = 1e6  # 1 GeV: the gyroradius of any particle here exceeds the scale of the field
LEAST_PITCH_DEG = 1e-6  # its mirror field is still a number


@dataclass(frozen=True)
class Rule:
    """What one quantity may be.

    Attributes
    ----------
    low, high : float
        Bounds, both allowed.
    words : str
        The allowed values in words.
    spacings : tuple of str
    circular : bool
        Whether a range may run through midnight.
    """

    low: float
    high: float
    words: str
    spacings: tuple[Spacing, ...] = ("linear",)
    circular: bool = False


def rules(inner_re: float, outer_re: float, end_h: float) -> dict[str, Rule]:
    """The rules of a run by quantity: domain in R_E, and signed end time in h."""
    first, last = min(0.0, end_h), max(0.0, end_h)
    domain = f"from inner_re = {inner_re:g} to outer_re = {outer_re:g} R_E"
    return {
        "r_re": Rule(inner_re, outer_re, domain, ("linear", "area", "log")),
        "mlt_h": Rule(0.0, 24.0, "from 0 to 24 h", circular=True),
        "energy_keV": Rule(0.0, HOTTEST_KEV, f"from 0 to {HOTTEST_KEV:g} keV", ("linear", "log")),
        "pitch_deg": Rule(LEAST_PITCH_DEG, 90.0, "above 0 and up to 90 degrees", ("linear", "isotropic")),
        "release_h": Rule(first, last, f"within the run, from {first:g} to {last:g} h"),
    }


def quantity(path: Path, given: QuantityValue, rule: Rule, draw: Literal["sobol", "random", "grid"]) -> Quantity:
    """The quantity as the scenario holds it.

    Raises
    ------
    InputError
        When it breaks `rule` or does not fit the kind of draw.
    """
    if isinstance(given, RangeTable):
        return _range(path, given, rule, draw)
    if isinstance(given, list):
        if draw != "grid":
            raise fault(path, given, "a list in a draw", 'a number, a range, or draw = "grid"')
        if not given:
            raise fault(path, given, "empty", "at least one number")
        return Quantity("list", tuple(_inside((*path, i), value, rule) for i, value in enumerate(given)))
    return Quantity("number", (_inside(path, given, rule),))


def _range(path: Path, given: RangeTable, rule: Rule, draw: str) -> Quantity:
    low = _inside((*path, "from"), given.from_, rule)
    high = _inside((*path, "to"), given.to, rule)
    if rule.circular:
        if (high - low) % 24.0 == 0.0 and (low, high) != (0.0, 24.0):
            remedy = "two different local times; 0 to 24 is the full circle"
            raise fault(path, _as_given(given), "an empty range", remedy)
    elif low >= high:
        remedy = "from below to" if low > high else "a single number, or from below to"
        raise fault(path, _as_given(given), "an empty range", remedy)
    if given.spacing not in rule.spacings:
        raise fault((*path, "spacing"), given.spacing, f"does not fit {path[-1]}", "one of " + ", ".join(rule.spacings))
    if given.spacing == "log" and low <= 0.0:
        remedy = 'a small one, or spacing = "linear"'
        raise fault((*path, "from"), given.from_, "log spacing needs a number above 0", remedy)
    return Quantity("range", (low, high), given.spacing, _points(path, given, draw))


def _points(path: Path, given: RangeTable, draw: str) -> int:
    if draw == "grid":
        if given.n is None:
            raise fault(path, _as_given(given), "a range of a grid without n", "for example n = 10 in it")
        if given.n < 2:
            raise fault((*path, "n"), given.n, "out of range", "at least 2, or a single number in place of the range")
        return given.n
    if given.n is not None:
        raise fault((*path, "n"), given.n, "belongs to grids only", 'a range without n, or draw = "grid"')
    return 0


def _inside(path: Path, value: float, rule: Rule) -> float:
    if not rule.low <= value <= rule.high:
        raise fault(path, value, "out of range", rule.words)
    return float(value) + 0.0


def _as_given(given: RangeTable) -> dict[str, float | str]:
    return given.model_dump(by_alias=True, exclude_unset=True)


def cold_fault(path: Path, energy: Quantity, pitch: Quantity) -> InputError | None:
    """Energies between 0 and the coldest, or 0 at a pitch angle other than 90 degrees."""
    for i, value in enumerate(energy.values):
        member = {"number": path, "range": (*path, ("from", "to")[i % 2]), "list": (*path, i)}[energy.kind]
        if 0.0 < value < COLDEST_KEV:
            return fault(member, value, "out of range", f"0, or at least {COLDEST_KEV:g} keV")
        if value == 0.0 and pitch.low < 90.0:
            return fault(member, value, "zero energy has no pitch angle", "pitch_deg = 90, or an energy above 0")
    return None
