"""How long the command takes to answer, in processor time, and what it loads for it."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import time
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
HEAVY = {"numba", "scipy", "matplotlib", "xarray", "pydantic", "h5py", "rich", "llvmlite", "pandas"}


def installed() -> dict[str, str]:
    """An environment in which sources are kept compiled, as those of any installed package are."""
    env = {**os.environ, "PYTHONPATH": str(ROOT)}
    env.pop("PYTHONDONTWRITEBYTECODE", None)
    return env


def processor_s(*arguments: str, folder: Path) -> float:
    """Processor time of one call of the command: what others do on the machine does not count."""
    command = [sys.executable, "-m", "tracer", *arguments]
    child = subprocess.Popen(command, cwd=folder, stdout=subprocess.DEVNULL, env=installed())
    _, status, used = os.wait4(child.pid, 0)
    child.returncode = os.waitstatus_to_exitcode(status)
    assert child.returncode == 0
    return used.ru_utime + used.ru_stime


@pytest.mark.skipif(not hasattr(os, "wait4"), reason="no processor time of a child here")
def test_help_takes_less_than_a_third_of_a_second(tmp_path: Path) -> None:
    best = min(processor_s("--help", folder=tmp_path) for _ in range(5))
    assert best < 0.3


@pytest.fixture
def storm(tmp_path: Path) -> Path:
    from tracer.templates import new_runfile

    new_runfile(tmp_path / "storm.toml")
    return tmp_path


@pytest.fixture
def drizzle(storm: Path) -> Path:
    """The same with few particles."""
    path = storm / "storm.toml"
    path.write_text(path.read_text("utf-8").replace("count = 20000", "count = 200"), encoding="utf-8")
    return storm


@pytest.mark.skipif(not hasattr(os, "wait4"), reason="no processor time of a child here")
def test_a_second_trace_of_a_small_run_takes_less_than_three_seconds(drizzle: Path) -> None:
    processor_s("trace", "storm.toml", folder=drizzle)  # compiles, if nobody has
    assert min(processor_s("trace", "storm.toml", "--overwrite", folder=drizzle) for _ in range(2)) < 3.0


@pytest.mark.skipif(not hasattr(os, "wait4"), reason="no processor time of a child here")
def test_a_second_trace_of_the_shipped_storm_takes_less_than_three_seconds(storm: Path) -> None:
    """By the clock or, where others use the machine too, in the processor time of all threads together."""
    processor_s("trace", "storm.toml", folder=storm)  # compiles, if nobody has
    best = float("inf")
    for _ in range(5):
        began = time.perf_counter()
        used = processor_s("trace", "storm.toml", "--overwrite", folder=storm)
        best = min(best, used, time.perf_counter() - began)
        if best < 3.0:
            return
    if os.getloadavg()[0] > 0.75 * (os.cpu_count() or 1):
        pytest.skip(f"{best:.1f} s on a busy machine: not measurable")
    assert best < 3.0


FIRST_PARTICLE = """
import os, sys, time
import tracer.accuracy

def first_moved(*arguments, advance=tracer.accuracy.advance):
    found = advance(*arguments)
    os.write(1, str(time.process_time()).encode())
    os._exit(0 if found[0].shape[0] else 1)

tracer.accuracy.advance = first_moved
from tracer.cli import main
main(["trace", "storm.toml", "--overwrite"])
"""

LOADED = """
import json, sys
from tracer.cli import main
status = main(["trace", "storm.toml", "--overwrite", "--quiet"])
print(json.dumps([status, sorted(sys.modules)]))
"""

ALGEBRA = """
import sys
import numpy as np
from tracer.kernels.loading import BLAS, load_library
load_library()
assert BLAS not in sys.modules
import numba

@numba.njit
def both(a, b):
    return np.dot(a, b), np.linalg.solve(a, b)

a, b = np.random.default_rng(1).random((2, 4, 4))
product, solution = both(a, b)
np.testing.assert_allclose(product, a @ b, rtol=1e-12)
np.testing.assert_allclose(solution, np.linalg.solve(a, b), rtol=1e-9)
print(BLAS in sys.modules)
"""


def python(code: str, folder: Path) -> str:
    """What the code prints in a process of its own."""
    done = subprocess.run([sys.executable, "-c", code], cwd=folder, env=installed(), capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    return done.stdout


def test_the_first_particle_moves_soon(storm: Path) -> None:
    python(FIRST_PARTICLE, storm)  # compiles, if nobody has
    assert min(float(python(FIRST_PARTICLE, storm)) for _ in range(5)) < 1.2


def test_a_trace_loads_what_it_needs_only(drizzle: Path) -> None:
    status, loaded = json.loads(python(LOADED, drizzle))
    assert status == 0
    assert {"numba", "h5py", "pydantic", "tracer.sobol"} <= set(loaded)
    needless = ("matplotlib", "xarray", "rich", "dask", "pandas", "scipy.linalg", "scipy.stats", "scipy.special")
    assert not {*needless, "scipy.integrate", "scipy.optimize", "numpy.f2py", "numpy.testing"} & set(loaded)


def test_linear_algebra_works_all_the_same(tmp_path: Path) -> None:
    """A user's own compiled functions in the same process: against numpy."""
    assert python(ALGEBRA, tmp_path).strip() == "True"


@pytest.mark.parametrize(
    "arguments", [["--help"], ["--version"], ["trace", "--help"], ["new", "storm.toml"], ["models"]]
)
def test_what_needs_no_particles_loads_nothing_heavy(arguments: list[str], tmp_path: Path) -> None:
    code = (
        "import json, sys\n"
        "from tracer.cli import main\n"
        f"status = main({arguments!r})\n"
        "print(json.dumps([status, sorted({name.partition('.')[0] for name in sys.modules})]))"
    )
    env = {**os.environ, "PYTHONPATH": str(ROOT)}
    command = [sys.executable, "-c", code]
    done = subprocess.run(command, cwd=tmp_path, env=env, capture_output=True, text=True, check=True)
    status, loaded = json.loads(done.stdout.splitlines()[-1])
    assert status == 0
    assert "click" in loaded
    assert not HEAVY & set(loaded)
