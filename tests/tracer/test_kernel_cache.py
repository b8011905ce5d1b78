"""Kernels on disk: found by later processes, by their content's name, whatever stands in the way.

What is tested is the machinery, so most tests let it build a kernel of one line (`tiny`), which compiles at once.
"""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Callable
from pathlib import Path
from typing import Any

import canonical
import numpy as np
import pytest
import storm_runs

from fields.drivers import Driver
from fields.electric.corotation import Corotation
from fields.electric.uniform import Uniform
from fields.electric.volland_stern import VollandStern
from fields.field import compose
from fields.magnetic.dipole import Dipole
from tracer.kernels import build

ROOT = Path(__file__).parents[2]

TINY = """
from tracer.kernels.arith import entry_point
from .field import DRIVERS, equator, potential


@entry_point
def advance(r, C):
    return equator(r, 0.0, 1.0, C) + DRIVERS
"""

PREAMBLE = """
import json, sys
from pathlib import Path
sys.path[:0] = [{tests!r}]
import fields
from tracer.kernels import build
"""

TINY_RUN = """
build.SOURCE = Path({source!r})
kernel = build.kernel_for(fields.compose(fields.Dipole(b0_nT=30000.0), [fields.Corotation()]))
value = kernel.module.advance(2.0, kernel.constants)
stats = kernel.module.advance.stats
print(json.dumps([value, sum(stats.cache_misses.values()), sum(stats.cache_hits.values()), kernel.module.__file__]))
"""

REAL_RUN = """
import storm_runs, canonical
from small_runs import population
from tracer.integrate import compile_kernel
quiet = fields.compose(fields.Dipole(b0_nT=29900.0), [fields.Corotation(), fields.VollandStern(gamma=2.0, kp=1.0)])
found = {{}}
for name, field, given in (
    ("storm", storm_runs.STORM, {{}}),
    ("storm, backward", storm_runs.STORM, {{"backward": True}}),
    ("constant Kp", quiet, {{}}),
    ("every electric model", fields.compose(canonical.MAGNETIC[0], canonical.ELECTRIC), {{"hours": 9.0}}),
):
    stats = compile_kernel(storm_runs.storm(population(count=1), field=field, **given)).module.advance.stats
    found[name] = [sum(stats.cache_misses.values()), sum(stats.cache_hits.values())]
print(json.dumps(found))
"""


def started(code: str, cache: Path | None = None, packages: Path = ROOT, **fill: str) -> subprocess.Popen[str]:
    """A fresh process that runs `code`."""
    env = {**os.environ, "PYTHONPATH": str(packages), "PYTHONDONTWRITEBYTECODE": "1"}
    if cache is not None:
        env["DRIFTROSE_CACHE_DIR"] = str(cache)
    text = (PREAMBLE + code).format(tests=str(ROOT / "tests"), **fill)
    return subprocess.Popen(
        [sys.executable, "-c", text], env=env, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )


def answer(process: subprocess.Popen[str]) -> Any:
    out, err = process.communicate(timeout=300)
    assert process.returncode == 0, err
    assert err == ""
    return json.loads(out.splitlines()[-1])


@pytest.fixture
def tiny(tmp_path: Path) -> Path:
    """The folder of a kernel's sources, with one line in it."""
    folder = tmp_path / "source"
    folder.mkdir()
    (folder / "advance.py").write_text(TINY, encoding="utf-8")
    return folder


@pytest.fixture
def cache(tmp_path: Path) -> Path:
    return tmp_path / "cache"


VALUE = pytest.approx(30000.0 / 8.0, rel=1e-14)


# ---------------------------------------------------------------------------------------------------- later processes


def test_a_second_process_compiles_nothing(tiny: Path, cache: Path) -> None:
    value, misses, hits, file = answer(started(TINY_RUN, cache, source=str(tiny)))
    assert (value, misses, hits) == (VALUE, 1, 0)
    assert Path(file).is_relative_to(cache)
    assert answer(started(TINY_RUN, cache, source=str(tiny))) == [VALUE, 0, 1, file]


def test_a_second_process_compiles_no_kernel_of_a_run() -> None:
    answer(started(REAL_RUN))  # compiles what no earlier test has
    found = answer(started(REAL_RUN))
    assert len(found) == 4
    for name, (misses, hits) in found.items():
        assert (misses, hits) == (0, 1) or (name == "storm, backward" and misses == 0), name


FRESH_RUN = """
build.SOURCE = Path({source!r})
kernel = build.kernel_for(fields.compose(fields.Dipole(b0_nT=30000.0), [fields.Corotation()]))
called = {called!r} and kernel.module.advance(2.0, kernel.constants)
print(json.dumps([kernel.fresh, called]))
"""


def test_what_has_yet_to_be_compiled_is_known_before(tiny: Path, cache: Path) -> None:
    def run(called: str = "") -> Any:
        return answer(started(FRESH_RUN, cache, source=str(tiny), called=called))

    assert run() == [True, ""]  # the sources stand there now, as when a process is killed while it compiles
    assert run("yes") == [True, VALUE]
    assert run() == [False, ""]
    (data,) = cache.rglob("*.nbc")  # numba writes its index first
    data.unlink()
    assert list(cache.rglob("*.nbi"))
    assert run("yes") == [True, VALUE]
    assert run("yes") == [False, VALUE]


def test_processes_that_start_at_once_agree(tiny: Path, cache: Path) -> None:
    running = [started(TINY_RUN, cache, source=str(tiny)) for _ in range(3)]
    found = [answer(process) for process in running]
    assert [f[0] for f in found] == [VALUE] * 3
    assert len({f[3] for f in found}) == 1
    assert [path.name for path in cache.iterdir()] == [Path(found[0][3]).parent.name]  # nothing half-made is left
    assert answer(started(TINY_RUN, cache, source=str(tiny)))[1] == 0


# ------------------------------------------------------------------------------------------------------ in the way


def test_an_installation_that_cannot_be_written_is_left_alone(tiny: Path, cache: Path, tmp_path: Path) -> None:
    packages = tmp_path / "installed"
    for name in ("tracer", "fields"):
        shutil.copytree(ROOT / name, packages / name, ignore=shutil.ignore_patterns("__pycache__"))

    def contents() -> dict[str, int]:
        return {str(path): path.stat().st_mtime_ns for path in packages.rglob("*")}

    for path in packages.rglob("*"):
        path.chmod(0o555 if path.is_dir() else 0o444)
    before = contents()
    try:
        file = answer(started(TINY_RUN, cache, packages, source=str(tiny)))[3]
        assert Path(file).is_relative_to(cache)
        assert contents() == before
    finally:
        for path in packages.rglob("*"):
            path.chmod(0o755)


def test_without_a_cache_folder_a_temporary_one_serves_and_goes(
    tiny: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    (tmp_path / "taken").write_text("a file", encoding="utf-8")
    temporary = tmp_path / "temporary"
    temporary.mkdir()
    monkeypatch.setenv("TMPDIR", str(temporary))
    value, misses, _, file = answer(started(TINY_RUN, tmp_path / "taken" / "cache", source=str(tiny)))
    assert (value, misses) == (VALUE, 1)
    assert Path(file).is_relative_to(temporary)
    assert list(temporary.iterdir()) == []


def test_one_temporary_folder_serves_all_kernels_of_a_process(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "taken").write_text("a file", encoding="utf-8")
    monkeypatch.setenv("DRIFTROSE_CACHE_DIR", str(tmp_path / "taken"))
    first = build.cache_root()
    assert first.is_dir()
    assert build.cache_root() == first


def test_where_kernels_are_kept(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("DRIFTROSE_CACHE_DIR", str(tmp_path / "named"))
    assert build.cache_root() == tmp_path / "named"
    monkeypatch.delenv("DRIFTROSE_CACHE_DIR")
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "xdg"))
    assert build.cache_root() == tmp_path / "xdg" / "driftrose"
    monkeypatch.delenv("XDG_CACHE_HOME")
    monkeypatch.setenv("HOME", str(tmp_path))
    assert build.cache_root() == tmp_path / ".cache" / "driftrose"


def test_a_user_without_a_home_has_a_cache_too(monkeypatch: pytest.MonkeyPatch) -> None:
    def nowhere() -> Path:
        raise RuntimeError("Could not determine home directory.")

    for name in ("DRIFTROSE_CACHE_DIR", "XDG_CACHE_HOME"):
        monkeypatch.delenv(name, raising=False)
    monkeypatch.setattr(Path, "home", nowhere)
    assert build.cache_root().is_relative_to(tempfile.gettempdir())


# ------------------------------------------------------------------------------------------------------------- names


def text_of(*electric: Any, b0_nT: float = 30000.0) -> str:
    return build.field_source(compose(Dipole(b0_nT=b0_nT), list(electric)))[0]


def test_runs_that_differ_in_numbers_share_a_kernel() -> None:
    one = text_of(Corotation(), VollandStern(kp=storm_runs.KP))
    assert (
        text_of(Corotation(potential_kV=80.0), VollandStern(kp=storm_runs.steady(4.0), phi0_deg=20.0), b0_nT=31000.0)
        == one
    )


def test_other_combinations_have_other_kernels() -> None:
    texts = {
        text_of(),
        text_of(Corotation()),
        text_of(Uniform(e0_mV_per_m=0.2)),
        text_of(Corotation(), Uniform(e0_mV_per_m=0.2)),
        text_of(Uniform(e0_mV_per_m=0.2), Corotation()),
        text_of(VollandStern(kp=3.0)),
        text_of(VollandStern(kp=storm_runs.KP)),
        text_of(VollandStern(amplitude_kV=1.0)),
        text_of(VollandStern(gamma=3.0, amplitude_kV=1.0)),
    }
    assert len(texts) == 9


def test_a_driver_used_twice_is_passed_once() -> None:
    field = compose(Dipole(b0_nT=30000.0), [Uniform(e0_mV_per_m=storm_runs.KP), VollandStern(kp=storm_runs.KP)])
    assert "DRIVERS = 1" in build.field_source(field)[0]
    assert build.driver_table(field.drivers)[1].shape == (16, 3)


@pytest.fixture
def watched(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Callable[[str], str]:
    """The name of a kernel when the only source watched holds the text given."""
    path = tmp_path / "model.py"
    monkeypatch.setattr(build, "WATCHED", (path,))

    def name(source: str) -> str:
        path.write_text(source, encoding="utf-8")
        build.sources_digest.cache_clear()
        return build.kernel_name("text", ())

    yield name
    build.sources_digest.cache_clear()


def test_a_changed_source_changes_the_name(watched: Callable[[str], str]) -> None:
    assert watched("a = 1") != watched("a = 2")
    assert watched("a = 1") == watched("a = 1")


def test_every_source_is_watched() -> None:
    wanted = {path for folder in ("fields", "tracer/kernels") for path in (ROOT / folder).rglob("*.py")}
    assert wanted | {ROOT / "tracer" / "status.py"} == {Path(path).resolve() for path in build.WATCHED}


def test_all_else_that_machine_code_depends_on_is_in_the_name(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    names = [build.kernel_name("text", ()), build.kernel_name("other text", ())]
    for variable, value in (("NUMBA_CPU_NAME", "generic"), ("NUMBA_CPU_FEATURES", "+sse2")):
        with monkeypatch.context() as patch:
            patch.setenv(variable, value)
            names.append(build.kernel_name("text", ()))
    for library in ("numba", "llvmlite", "numpy"):
        with monkeypatch.context() as patch:
            patch.setattr(build, "version", lambda name, changed=library: "0.0" if name == changed else "1.0")
            names.append(build.kernel_name("text", ()))
    with monkeypatch.context() as patch:
        patch.setattr(sys, "version", "3.99")
        names.append(build.kernel_name("text", ()))
    assert len(set(names)) == len(names)
    assert build.kernel_name("text", ()) == names[0]


# ------------------------------------------------------------------------------------------------- models from outside

OUTSIDE = """
from dataclasses import dataclass
from typing import ClassVar
from fields.arith import pointwise
from fields.contract import Card, ElectricModel, Term

@pointwise
def tilted(r, sin, cos, slope):
    return {factor} * slope * r, {factor} * slope, 0.0 * r

@dataclass(frozen=True, eq=False)
class Tilted(ElectricModel):
    card: ClassVar[Card] = Card("tilted", "electric", "a test's own", "Phi = slope r", (), "nobody (2027)")
    def term(self, magnetic):
        return Term(tilted, (5.0,))
"""

OUTSIDE_SOURCE = TINY.replace("equator(r, 0.0, 1.0, C) + DRIVERS", "potential(r, 0.0, 1.0, 0.0, C, (0.0,))[0]")

OUTSIDE_RUN = """
sys.path[:0] = [{folder!r}]
import outside_model
build.SOURCE = Path({source!r})
kernel = build.kernel_for(fields.compose(fields.Dipole(b0_nT=30000.0), [outside_model.Tilted()]))
value = kernel.module.advance(2.0, kernel.constants)
print(json.dumps([value, sum(kernel.module.advance.stats.cache_misses.values())]))
"""


def test_a_model_from_outside_is_compiled_kept_and_made_anew_when_it_changes(
    tiny: Path, cache: Path, tmp_path: Path
) -> None:
    (tiny / "advance.py").write_text(OUTSIDE_SOURCE, encoding="utf-8")
    model = tmp_path / "outside_model.py"

    def run() -> Any:
        return answer(started(OUTSIDE_RUN, cache, source=str(tiny), folder=str(tmp_path)))

    model.write_text(OUTSIDE.format(factor=1.0), encoding="utf-8")
    assert run() == [10.0, 1]
    assert run() == [10.0, 0]
    model.write_text(OUTSIDE.format(factor=3.0), encoding="utf-8")
    assert run() == [30.0, 1]


# ---------------------------------------------------------------------------------------------------------- drivers


def test_driver_table_has_the_corners_of_all_drivers_within_their_common_cover() -> None:
    steps = Driver("series:a", np.array([-1.0, 3.0, 6.0]), np.array([1.0, 2.0, 3.0]), np.zeros(3), 9.0)
    ramps = Driver("series:b", np.array([0.0, 4.0]), np.array([1.0, 5.0]), np.array([1.0, -0.5]), 8.0)
    edges, segments = build.driver_table((steps, ramps))
    assert edges.tolist() == [0.0, 3.0, 4.0, 6.0, 8.0]
    assert segments.shape == (4, 5)
    middle = 0.5 * (edges[:-1] + edges[1:])
    for column, driver in ((1, steps), (3, ramps)):
        value = segments[:, column] + segments[:, column + 1] * (middle - segments[:, 0])
        np.testing.assert_allclose(value, driver.at(middle), rtol=1e-15)


def test_without_drivers_one_segment_holds_for_ever() -> None:
    edges, segments = build.driver_table(())
    assert edges.tolist() == [-np.inf, np.inf]
    assert segments.shape == (1, 1)


def test_two_drivers_in_one_kernel() -> None:
    # each argument finds its own driver: the slope is that of tracer.drift_rate in every segment
    import tracer

    other = Driver("series:e", np.array([0.0, 5.0]), np.array([0.1, 0.6]), np.array([0.02, 0.0]), 9.0)
    field = compose(
        Dipole(b0_nT=30000.0), [Uniform(e0_mV_per_m=other), Corotation(), VollandStern(kp=canonical.RISING_KP)]
    )
    kernel = build.kernel_for(field)
    slope = storm_runs.part(kernel, "drift").slope_at
    for time in (1.0, 4.0, 5.5, 8.0):
        want = tracer.drift_rate(field, "H+", 0.0, 90.0, 5.0, 15.0, time)
        got = slope(time, 5.0, np.pi / 4, (0.0, 0.0, 1.0, 1e-6), kernel.constants, storm_runs.drivers_at(kernel, time))
        assert got == pytest.approx((float(want.dr_re_per_h), float(want.dmlt_per_h) * np.pi / 12), rel=1e-12)
