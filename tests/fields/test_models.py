"""The exam that every field model passes; tests/canonical.py lists who sits it."""

from __future__ import annotations

import dataclasses
import math
import re
import sys
from typing import Any

import canonical
import numpy as np
import pytest
from tolerances import bound

from fields import catalogue
from fields.arith import POINTWISE
from fields.contract import ElectricModel, MagneticModel, Model, Parameter
from fields.drivers import Driver
from fields.errors import InputError
from fields.lines import TracedLines
from fields.traced_line import FieldLine

ALL: list[Model] = [*canonical.MAGNETIC, *canonical.ELECTRIC]
SOURCE_FREE = {"dipole"}  # no current inside: curl B = 0
TIMES_H = (0.0, 4.0, 8.0)  # within the cover of canonical.RISING_KP
BACKGROUND = canonical.MAGNETIC[0]

every = pytest.mark.parametrize("model", ALL, ids=canonical.label)
electric = pytest.mark.parametrize("model", canonical.ELECTRIC, ids=canonical.label)
magnetic = pytest.mark.parametrize("model", canonical.MAGNETIC, ids=canonical.label)

# Central differences of eighth order (Fornberg 1988, Math. Comp. 51, 699)
STENCIL = ((1, 4 / 5), (2, -1 / 5), (3, 4 / 105), (4, -1 / 280))


def slope(function: Any, x: Any, step: Any) -> Any:
    """d function / dx by eighth-order central differences."""
    return sum(w * (np.asarray(function(x + n * step)) - function(x - n * step)) for n, w in STENCIL) / step


def values_of(model: Model) -> dict[str, Any]:
    return {p.name: getattr(model, p.name) for p in model.card.parameters if getattr(model, p.name) is not None}


# ------------------------------------------------------------------------------------------------- every model


@pytest.mark.parametrize(("kind", "sitting"), [("magnetic", canonical.MAGNETIC), ("electric", canonical.ELECTRIC)])
def test_every_model_of_the_catalogue_sits_the_exam(kind: Any, sitting: list[Model]) -> None:
    assert {type(model) for model in sitting} == set(catalogue.BUILT_IN[kind].values())


@every
def test_catalogue_finds_the_model_by_the_name_on_its_card(model: Model) -> None:
    assert catalogue.find(model.card.kind, model.card.name) is type(model)


@every
def test_card_lists_exactly_the_parameters_in_order(model: Model) -> None:
    assert dataclasses.is_dataclass(model)
    assert [f.name for f in dataclasses.fields(model)] == [p.name for p in model.card.parameters]


@every
def test_model_is_frozen(model: Model) -> None:
    with pytest.raises(dataclasses.FrozenInstanceError):
        setattr(model, model.card.parameters[0].name, 1.0)


@every
def test_card_states_kind_title_formula_and_a_dated_reference(model: Model) -> None:
    card = model.card
    assert card.kind == ("magnetic" if isinstance(model, MagneticModel) else "electric")
    assert re.fullmatch(r"[a-z]+(-[a-z]+)*", card.name)
    assert card.title.strip()
    assert "=" in card.formula
    assert re.search(r"[A-Z]\w+.*\b(1[89]|20)\d\d\b", card.reference)


@every
def test_parameter_names_carry_their_unit(model: Model) -> None:
    without_suffix = {"", "year"}
    for parameter in model.card.parameters:
        assert parameter.meaning.strip()
        if parameter.unit not in without_suffix:
            suffix = parameter.unit.replace("R_E", "re").replace("/", "_per_")
            assert parameter.name.endswith("_" + suffix)


@every
def test_defaults_of_the_card_are_those_of_the_dataclass(model: Model) -> None:
    defaults = {f.name: f.default for f in dataclasses.fields(model)}
    for parameter in model.card.parameters:
        if parameter.required:
            assert defaults[parameter.name] is dataclasses.MISSING
        else:
            assert defaults[parameter.name] == parameter.default


def beyond(parameter: Parameter) -> list[float]:
    """Numbers that the card forbids."""
    low, high = parameter.low, parameter.high
    bad = [math.nan, math.inf, -math.inf]
    if math.isfinite(low):
        bad += [low - 1.0, math.nextafter(low, -math.inf), *([low] if parameter.low_open else [])]
    if math.isfinite(high):
        bad += [high + 1.0, math.nextafter(high, math.inf)]
    return bad


@every
def test_parameters_out_of_bounds_are_refused_by_name(model: Model) -> None:
    for parameter in model.card.parameters:
        for bad in beyond(parameter):
            with pytest.raises(InputError, match=rf"driftrose: {parameter.name} = .*: .*; (a|any finite) number"):
                type(model)(**{**values_of(model), parameter.name: bad})


@every
@pytest.mark.parametrize("bad", [True, "4", [1.0]], ids=["bool", "text", "list"])
def test_parameters_of_the_wrong_type_are_refused(model: Model, bad: Any) -> None:
    for parameter in model.card.parameters:
        with pytest.raises(InputError, match=rf"{parameter.name} = .*: wrong type; a number"):
            type(model)(**{**values_of(model), parameter.name: bad})


@every
def test_series_are_taken_where_the_card_says_so_and_held_to_the_bounds(model: Model) -> None:
    def series(value: float) -> Driver:
        return Driver("series:s", np.array([0.0]), np.array([value]), np.array([0.0]), 9.0)

    for parameter in model.card.parameters:
        fixed = values_of(model).get(parameter.name)
        inside = next(v for v in (fixed, 1.0) if isinstance(v, float))
        if not parameter.varies:
            with pytest.raises(InputError, match="cannot vary in time; a number"):
                parameter.check(series(inside))
            continue
        parameter.check(series(inside))
        for bad in beyond(parameter):
            with pytest.raises(InputError, match=rf"{parameter.name} = \"?series:s\"?"):
                parameter.check(series(bad))


@every
def test_described_is_plain_and_rebuilds_the_model(model: Model) -> None:
    described = model.described()
    assert all(isinstance(value, (str, int, float)) for value in described.values())
    series = {value.name: value for value in values_of(model).values() if isinstance(value, Driver)}
    values = {key: series.get(value, value) for key, value in described.items() if key != "model"}
    again = catalogue.find(model.card.kind, described["model"])(**values)
    assert again.described() == described
    assert values_of(again) == values_of(model)


# --------------------------------------------------------------------------------------------- electric models


def assert_compilable(function: Any) -> None:
    """Registered, and to be found by name in its module: what a generated kernel imports."""
    assert function in POINTWISE
    assert getattr(sys.modules[function.__module__], function.__qualname__) is function


def points(count: int = 40, seed: int = 3) -> tuple[np.ndarray, np.ndarray]:
    random = np.random.default_rng(seed)
    return random.uniform(1.1, 12.0, count), random.uniform(-np.pi, np.pi, count)


@electric
def test_point_function_is_registered_and_its_arguments_are_finite(model: ElectricModel) -> None:
    term = model.term(BACKGROUND)
    assert_compilable(term.function)
    for time_h in TIMES_H:
        assert all(math.isfinite(number) for number in term.at(time_h))


@electric
@pytest.mark.parametrize("time_h", TIMES_H)
def test_slopes_are_the_derivatives_of_the_potential(model: ElectricModel, time_h: float) -> None:
    # Reference: central differences of the potential alone (Fornberg 1988)
    term = model.term(BACKGROUND)
    r, phi = points()

    def potential(r_: Any, phi_: Any) -> Any:
        return term.function(r_, np.sin(phi_), np.cos(phi_), *term.at(time_h))[0]

    value, by_r, by_phi = term.function(r, np.sin(phi), np.cos(phi), *term.at(time_h))
    scale = np.abs(value) + np.abs(by_r * r) + np.abs(by_phi)
    assert np.all(scale > 0)
    assert np.max(np.abs(slope(lambda q: potential(q, phi), r, 0.01 * r) - by_r) * r / scale) < bound("potential slope")
    assert np.max(np.abs(slope(lambda q: potential(r, q), phi, 0.01) - by_phi) / scale) < bound("potential slope")


@electric
def test_potential_broadcasts_and_agrees_with_scalars(model: ElectricModel) -> None:
    term = model.term(BACKGROUND)
    r, phi = np.array([2.0, 5.5, 9.0])[:, None], np.array([-2.0, 0.0, 1.0, 3.0])[None, :]
    sin, cos = np.sin(phi), np.cos(phi)
    parts = [np.broadcast_to(part, (3, 4)) for part in term.function(r, sin, cos, *term.at(0.0))]
    for i in range(3):
        for j in range(4):
            single = term.function(float(r[i, 0]), float(sin[0, j]), float(cos[0, j]), *term.at(0.0))
            for part, number in zip(parts, single, strict=True):
                assert part[i, j] == pytest.approx(number, rel=bound("point function"), abs=0)


@electric
def test_potential_closes_on_itself_round_the_earth(model: ElectricModel) -> None:
    # A potential has one value at each place: the slopes along a circle add up to nothing.
    term = model.term(BACKGROUND)
    phi = np.arange(64) * (2 * np.pi / 64)
    by_phi = term.function(np.full(64, 5.0), np.sin(phi), np.cos(phi), *term.at(0.0))[2]
    assert abs(np.mean(by_phi)) <= bound("rounding") * (1.0 + np.max(np.abs(by_phi)))


@electric
def test_warnings_are_sentences(model: ElectricModel) -> None:
    assert all(isinstance(line, str) and line.startswith(model.card.name) for line in model.warnings())


# --------------------------------------------------------------------------------------------- magnetic models


def places(count: int = 60, seed: int = 5) -> np.ndarray:
    """SM points between 1.2 and 10 R_E, all latitudes; shape (3, count)."""
    random = np.random.default_rng(seed)
    direction = random.normal(size=(3, count))
    return random.uniform(1.2, 10.0, count) * direction / np.linalg.norm(direction, axis=0)


def gradient_tensor(model: MagneticModel, place: np.ndarray) -> np.ndarray:
    """dB_i/dx_j times r over |B|, shape (3, 3, count)."""
    r = np.linalg.norm(place, axis=0)
    strength = np.linalg.norm(model.field_nT(*place), axis=0)
    columns = []
    for j in range(3):
        step = np.zeros((3, 1))
        step[j] = 1.0
        columns.append(slope(lambda t, s=step: model.field_nT(*(place + t * s)), 0.0, 0.01 * r))
    return np.stack(columns, axis=1) * r / strength


@magnetic
def test_magnetic_field_has_no_divergence(model: MagneticModel) -> None:
    tensor = gradient_tensor(model, places())
    assert np.max(np.abs(tensor)) > 1.0  # the differences see the field
    assert np.max(np.abs(np.trace(tensor))) < bound("field derivative")


@pytest.mark.parametrize("model", [m for m in canonical.MAGNETIC if m.card.name in SOURCE_FREE], ids=canonical.label)
def test_source_free_field_has_no_curl(model: MagneticModel) -> None:
    tensor = gradient_tensor(model, places())
    assert np.max(np.abs(tensor - np.swapaxes(tensor, 0, 1))) < bound("field derivative")


@magnetic
def test_magnetic_field_is_symmetric_about_the_equator_and_points_north_on_it(model: MagneticModel) -> None:
    x, y, z = places()
    north, south = model.field_nT(x, y, z), model.field_nT(x, y, -z)
    for sign, a, b in zip((-1.0, -1.0, 1.0), north, south, strict=True):
        np.testing.assert_allclose(b, sign * a, rtol=bound("rounding"))
    bx, by, bz = model.field_nT(x, y, 0.0 * z)
    assert not np.any(bx)
    assert not np.any(by)
    assert np.all(bz > 0)


@magnetic
def test_field_grows_along_every_line_away_from_the_equator(model: MagneticModel) -> None:
    for r, phi in zip(*points(8, seed=7), strict=True):
        line = FieldLine(model, r, phi)
        line.grow(20.0)
        excess = line.excess(np.linspace(0.0, line.knots[-1], 200))
        assert np.all(np.diff(excess) > 0)


@magnetic
def test_reference_dipole_rules_near_the_earth(model: MagneticModel) -> None:
    # At 1 R_E what a model adds to its dipole is small; loose on purpose: a unit or sign slip is what it looks for.
    assert model.reference_b0_nT() == pytest.approx(float(model.field_nT(1.0, 0.0, 0.0)[2]), rel=0.1)


@magnetic
def test_magnetic_point_functions_are_registered_and_their_arguments_finite(model: MagneticModel) -> None:
    terms = model.terms()
    for function in (terms.equator, terms.mirror, terms.foot):
        assert_compilable(function)
    assert all(math.isfinite(number) for number in terms.arguments)


@magnetic
def test_equator_term_is_the_field_in_the_equatorial_plane(model: MagneticModel) -> None:
    terms = model.terms()
    r, phi = points()
    strength = np.linalg.norm(model.field_nT(r * np.cos(phi), r * np.sin(phi), 0.0 * r), axis=0)
    got = terms.equator(r, np.sin(phi), np.cos(phi), *terms.arguments)
    np.testing.assert_allclose(got, strength, rtol=bound("rounding"))


PITCHES_DEG = (1.0, 4.0, 15.0, 33.0, 51.0, 70.0, 86.0, 89.5)


@pytest.mark.parametrize("pitch_deg", PITCHES_DEG)
@magnetic
def test_mirror_term_agrees_with_traced_lines(model: MagneticModel, pitch_deg: float) -> None:
    # Reference: the generic line averages, which know nothing of the model but its field.
    terms, traced = model.terms(), TracedLines(model)
    cot2 = 1.0 / np.tan(np.radians(pitch_deg)) ** 2
    for r, phi in zip(*points(3, seed=11), strict=True):
        k = float(traced.second_invariant(cot2, r, phi))
        strength, by_r, by_phi, got_cot2 = terms.mirror(k, r, np.sin(phi), np.cos(phi), *terms.arguments)
        b_eq = float(terms.equator(r, np.sin(phi), np.cos(phi), *terms.arguments))
        assert strength == pytest.approx(b_eq * (1.0 + cot2), rel=bound("drift terms"))
        assert got_cot2 == pytest.approx(cot2, rel=bound("drift terms"))
        slopes = traced.mirror_slopes(cot2, r, phi)
        assert by_r / strength == pytest.approx(float(slopes[0]), rel=bound("drift terms"))
        assert by_phi / strength == pytest.approx(float(slopes[1]), abs=bound("drift terms"))


@magnetic
def test_mirror_term_at_k_zero_is_the_equator(model: MagneticModel) -> None:
    terms = model.terms()
    r, phi = points()
    sin, cos = np.sin(phi), np.cos(phi)
    strength, by_r, by_phi, cot2 = terms.mirror(np.zeros_like(r), r, sin, cos, *terms.arguments)
    np.testing.assert_allclose(strength, terms.equator(r, sin, cos, *terms.arguments), rtol=bound("rounding"))
    np.testing.assert_allclose(cot2, 0.0, atol=1e-15)

    def b_eq(r_: Any, phi_: Any) -> Any:
        return terms.equator(r_, np.sin(phi_), np.cos(phi_), *terms.arguments)

    np.testing.assert_allclose(by_r, slope(lambda q: b_eq(q, phi), r, 0.01 * r), rtol=bound("drift terms"))
    change = slope(lambda q: b_eq(r, q), phi, 0.01)
    np.testing.assert_allclose(by_phi / strength, change / strength, atol=bound("drift terms"))


@magnetic
def test_mirror_term_slopes_are_the_derivatives_of_its_mirror_field(model: MagneticModel) -> None:
    # Holds at any pitch angle, past the loss cone too, where a fit in pieces could hide a seam.
    terms = model.terms()
    r, phi = points(200)
    k = np.sqrt(model.reference_b0_nT()) * np.random.default_rng(2).uniform(0.0, 12.0, r.size) / np.sqrt(r)

    def mirror(r_: Any, phi_: Any) -> Any:
        return np.asarray(terms.mirror(k, r_, np.sin(phi_), np.cos(phi_), *terms.arguments)[0])

    strength, by_r, by_phi, cot2 = terms.mirror(k, r, np.sin(phi), np.cos(phi), *terms.arguments)
    assert np.all(cot2 >= 0)
    got = np.array([by_r * r, by_phi]) / strength
    want = np.array([slope(lambda q: mirror(q, phi), r, 0.01 * r) * r, slope(lambda q: mirror(r, q), phi, 0.01)])
    np.testing.assert_allclose(got, want / strength, atol=bound("difference of slopes"))


@magnetic
def test_foot_term_agrees_with_traced_lines(model: MagneticModel) -> None:
    terms, traced = model.terms(), TracedLines(model)
    for foot_re in (1.0, 1.0157):
        r, phi = points(5, seed=13)
        got = terms.foot(r, np.sin(phi), np.cos(phi), foot_re, *terms.arguments)
        np.testing.assert_allclose(got, traced.foot_field(r, phi, foot_re), rtol=bound("traced line"))
