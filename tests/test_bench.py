"""The benchmark's contenders solve the problem that they are timed on."""

from __future__ import annotations

import importlib
from pathlib import Path
from typing import Any

import numpy as np
import pytest

SCRIPTS = Path(__file__).parents[1] / "scripts"
COUNT = 6


@pytest.fixture
def modules(monkeypatch: pytest.MonkeyPatch) -> tuple[Any, Any]:
    monkeypatch.syspath_prepend(str(SCRIPTS))
    problems = importlib.import_module("bench_problems")
    monkeypatch.setattr(problems, "SAMPLE", 64)
    return problems, importlib.import_module("bench_contenders")


@pytest.mark.parametrize("pitch", ["equatorial", "bounce-averaged"])
def test_every_contender_reaches_the_same_ends(modules: tuple[Any, Any], pitch: str) -> None:
    problems, contenders = modules
    asked = problems.problem(pitch, COUNT)
    assert np.any(asked.truth[:COUNT, 5] == 1)  # one that leaves is among them
    for contender in contenders.CONTENDERS:
        ends = contender.run(asked, asked.state[:COUNT], 1e-12)
        assert asked.error(ends) < problems.TARGET_RE, contender.name


def test_tuning_finds_the_largest_tolerance_that_will_do(modules: tuple[Any, Any]) -> None:
    problems, contenders = modules
    asked = problems.problem("equatorial", 64)
    first = contenders.CONTENDERS[0]
    found = problems.tuned(first, asked)
    assert asked.error(first.run(asked, asked.state[:64], found)) <= problems.TARGET_RE
    assert asked.error(first.run(asked, asked.state[:64], 2.0 * found)) > problems.TARGET_RE


def test_a_contender_that_never_gets_there_is_told(modules: tuple[Any, Any]) -> None:
    problems, _ = modules
    asked = problems.problem("equatorial", 64)
    astray = problems.Contender("astray", lambda asked, state, tolerance: asked.truth[: len(state)] + 1.0, 64)
    with pytest.raises(RuntimeError, match="astray does not reach 1e-05 R_E"):
        problems.tuned(astray, asked)
