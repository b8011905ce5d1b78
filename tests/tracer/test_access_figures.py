"""Figures of access: every cell shows the answer of its place, the legend those that occur, every page the caution."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from matplotlib.collections import QuadMesh
from matplotlib.figure import Figure

from tracer.access_plan import Sector
from tracer.access_records import AccessResult, OrbitAccess
from tracer.figures import draw, fitting
from tracer.figures.access_marks import edges, evenly
from tracer.figures.style import CAUTION
from tracer.outcomes import Outcome

ATTRS = {
    "start": "2027-03-04T00:00:00+00:00",
    "title": "Invented access",
    "hours": 24.0,
    "backward": False,
    "outer_re": 10.0,
    "inner_re": 1.02,
    "driftrose_version": "0",
    "attrs_sha256": "0" * 64,
}


def made(n_r: int = 5, n_mlt: int = 8, energies: tuple[float, ...] = (0.0, 1.0, 30.0), orbits: int = 1) -> AccessResult:
    """A result with made-up answers, every one of them somewhere."""
    shape = (2, 2, len(energies), 1, n_r, n_mlt)
    region = (np.arange(np.prod(shape)) % 9).reshape(shape).astype("u1")
    time = np.linspace(0.0, 24.0, 13)
    flown = (np.arange(2 * 13 * len(energies)) % len(Outcome)).reshape(2, 13, len(energies), 1).astype("u1")
    place = (time, 3.0 + np.sin(time), (6.0 + time) % 24.0, np.full(13, 1.2))
    return AccessResult(
        ("H+", "e-"),
        np.array(energies),
        np.array([90.0]),
        np.array([6.0, 18.0]),
        np.linspace(9.0, 3.0, n_r),
        np.arange(n_mlt) * 24.0 / n_mlt,
        Sector(10.0, 18.0, 6.0),
        {"region": region},
        {},
        tuple(OrbitAccess(f"craft {i}", 120.0, *place, {"region": flown}) for i in range(orbits)),
        {},
        ATTRS,
    )


def meshes(figure: Figure) -> list[np.ndarray]:
    return [np.asarray(c.get_array()) for a in figure.axes for c in a.collections if isinstance(c, QuadMesh)]


def words(figure: Figure) -> str:
    return " ".join(text.get_text() for text in figure.findobj(lambda a: hasattr(a, "get_text")))


def test_one_figure_for_each_species_and_spacecraft() -> None:
    assert sorted(fitting(made())) == ["access", "access-2", "orbits", "orbits-2"]
    assert sorted(fitting(made(n_r=1))) == ["orbits", "orbits-2"]
    assert sorted(fitting(made(orbits=0))) == ["access", "access-2"]
    assert "orbits" not in fitting(made(energies=(0.0,)))


def test_cells_of_the_map_are_those_of_the_result() -> None:
    result = made()
    for number, name in enumerate(("access", "access-2")):
        drawn = meshes(fitting(result)[name])
        want = [result.access["region"][number, t, e, 0, ::-1] for t in range(2) for e in range(3)]
        assert len(drawn) == len(want)
        for cells, region in zip(drawn, want):
            assert np.array_equal(cells.reshape(region.shape), region)


def test_cells_of_the_orbit_are_those_of_the_result() -> None:
    result = made()
    (cells,) = meshes(fitting(result)["orbits"])
    want = result.orbits[0].access["region"][0, :, 1:, 0].T  # energy 0 has no place on a logarithmic axis
    assert np.array_equal(cells.reshape(want.shape), want)


def test_legend_names_what_occurs() -> None:
    figure = fitting(made())["access"]
    said = words(figure)
    for outcome in Outcome:
        assert (outcome.sentence in said) == (outcome < 9)


@pytest.mark.parametrize("name", ["access", "orbits"])
def test_page_says_what_it_is(name: str) -> None:
    said = words(fitting(made())[name])
    assert CAUTION in said
    assert "H+" in said
    assert "18 to 6 h MLT at 10 R_E" in said


def test_files(tmp_path: Path) -> None:
    written = draw(made(), tmp_path)
    assert [path.name for path in written] == [
        f"invented-access-{k}.png" for k in ("access", "access-2", "orbits", "orbits-2")
    ]
    assert all(path.stat().st_size > 10_000 for path in written)


def test_edges_lie_half_way() -> None:
    assert edges(np.array([1.0, 2.0, 4.0])) == pytest.approx([0.5, 1.5, 3.0, 5.0])
    assert edges(np.array([1.0, 100.0]), log=True) == pytest.approx([0.1, 10.0, 1000.0])
    low, high = edges(np.array([7.0]))
    assert low < 7.0 < high


@pytest.mark.parametrize(("count", "most", "want"), [(5, 9, [0, 1, 2, 3, 4]), (10, 3, [0, 4, 9]), (1, 4, [0])])
def test_evenly(count: int, most: int, want: list[int]) -> None:
    assert evenly(count, most) == want
