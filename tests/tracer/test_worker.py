"""A worker holds runs and says what it is; whoever differs is told in words."""

from __future__ import annotations

import pickle
from dataclasses import dataclass, replace
from pathlib import Path

import pytest
from crews import RUN, TOLERANCE, bits, by_this_process
from small_runs import NamedField

import tracer
from fields.electric.uniform import Uniform
from fields.field import compose
from tracer import worker
from tracer.integrate import Interrupted
from tracer.scenario import Scenario


@pytest.fixture(autouse=True)
def _no_runs(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(worker, "_runs", {})


def test_a_run_survives_the_journey() -> None:
    worker.enlist("a", worker.packed(RUN))
    for first, stop in ((0, 9), (198, 200)):
        assert bits(worker.work("a", first, stop, TOLERANCE)) == by_this_process()[first]


def test_what_the_scenario_worked_out_for_itself_stays_at_home() -> None:
    fresh = replace(RUN, field=compose(RUN.field.magnetic, RUN.field.electric))
    assert fresh.field.drivers
    assert fresh.save_times_h.size
    packed = worker.packed(fresh)
    travelled = pickle.loads(packed)
    assert "drivers" not in vars(travelled.field)
    assert "save_times_h" not in vars(travelled)
    assert len(packed) < 10_000


@pytest.mark.parametrize("scope", ["__main__", "local"])
def test_a_model_that_no_other_process_can_import_is_refused(scope: str) -> None:
    @dataclass(frozen=True, eq=False)
    class Own(Uniform):
        pass

    if scope == "__main__":
        Own.__module__, Own.__qualname__ = "__main__", "Own"
    run = replace(RUN, field=compose(NamedField(), [Own(e0_mV_per_m=0.1)]))
    with pytest.raises(
        tracer.InputError, match='model = "uniform": stands where other processes cannot import it; put'
    ):
        worker.packed(run)


def test_a_run_that_was_not_taken() -> None:
    with pytest.raises(worker.NotHeld):
        worker.work("a", 0, 1, TOLERANCE)


def test_a_run_that_was_called_off() -> None:
    worker.enlist("a", worker.packed(RUN))
    _, _, halt = worker.ready("a")
    halt.set()
    with pytest.raises(Interrupted):
        worker.work("a", 0, 1, TOLERANCE)
    worker.dismiss("a")
    with pytest.raises(worker.NotHeld):
        worker.work("a", 0, 1, TOLERANCE)
    worker.dismiss("a")


def test_runs_that_nobody_dismissed_are_forgotten() -> None:
    packed = worker.packed(RUN)
    for number in range(2 * worker.KEPT):
        worker.enlist(str(number), packed)
    assert list(worker._runs) == [str(n) for n in range(worker.KEPT, 2 * worker.KEPT)]


# ------------------------------------------------------------------------------------------------------ what it is


def identity(run: Scenario = RUN) -> dict[str, str]:
    return worker.identity(run)


def test_a_worker_is_like_itself() -> None:
    assert worker.enlist("a", worker.packed(RUN)) == identity()
    assert worker.differences(identity(), identity()) == []
    assert {"driftrose_version", "numpy_version", "numba_version", "python_version", "cpu_features"} <= set(identity())


def test_what_differs_is_named() -> None:
    ours = identity() | {"numba_version": "0.68.1", "cpu_features": "avx avx2 fma sse"}
    theirs = ours | {"numba_version": "0.61.0", "cpu_features": "avx sse sve"}
    assert sorted(worker.differences(theirs, ours)) == [
        "cpu_features has sve",
        "cpu_features lacks avx2 fma",
        "numba_version 0.61.0, not 0.68.1",
    ]
    del theirs["numba_version"]
    assert "numba_version unknown, not 0.68.1" in worker.differences(theirs, ours)
    many = ours | {"cpu_features": "avx avx2 fma sse a b c d e"}
    assert worker.differences(many, ours) == ["cpu_features has a b c and 2 more"]


def test_another_processor_to_compile_for_is_another_worker(monkeypatch: pytest.MonkeyPatch) -> None:
    ours = identity()
    monkeypatch.setenv("NUMBA_CPU_NAME", "x86-64")
    monkeypatch.setenv("NUMBA_CPU_FEATURES", "+sse2,-avx")
    found = " ".join(worker.differences(identity(), ours))
    assert "kernel_cpu x86-64, not " in found
    assert "kernel_cpu_features lacks " in found


def test_other_sources_are_another_worker(tmp_path: Path) -> None:
    model = tmp_path / "model.py"
    model.write_text("a = 1\n")
    before = worker.sources_digest([str(model)])
    assert before != worker.sources_digest([])
    model.write_text("a = 2\n")
    assert before != worker.sources_digest([str(model)])
