"""What the command loads before it gets to work; how long that takes is for scripts/bench to say."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
HEAVY = {"numba", "scipy", "matplotlib", "xarray", "pydantic", "h5py", "rich", "llvmlite", "pandas"}


def installed() -> dict[str, str]:
    """An environment in which sources are kept compiled, as those of any installed package are."""
    env = {**os.environ, "PYTHONPATH": str(ROOT)}
    env.pop("PYTHONDONTWRITEBYTECODE", None)
    return env


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


FIRST_PARTICLE = """
import json, os, sys
import tracer.accuracy

def first_moved(*arguments, advance=tracer.accuracy.advance):
    found = advance(*arguments)
    os.write(1, json.dumps([len(found[0]), sorted(sys.modules)]).encode())
    os._exit(0)

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
import tracer
from tracer.integrate import compile_kernel
from tracer.kernels.loading import BLAS

kernel = compile_kernel(tracer.load("storm.toml"))
assert sum(kernel.module.advance.stats.cache_hits.values()) == 1
print(BLAS in sys.modules, "numba.np.npyimpl" in sys.modules)
import numba

@numba.njit
def own(a, b, days):
    return np.dot(a, b), np.linalg.solve(a, b), np.sin(a), days[1] - days[0]

a, b = np.random.default_rng(1).random((2, 4, 4))
product, solution, sine, between = own(a, b, np.array(["2027-03-04", "2027-03-06"], "datetime64[D]"))
np.testing.assert_allclose(product, a @ b, rtol=1e-12)
np.testing.assert_allclose(solution, np.linalg.solve(a, b), rtol=1e-9)
np.testing.assert_allclose(sine, np.sin(a), rtol=1e-14)
assert between == np.timedelta64(2, "D")
print(BLAS in sys.modules, "numba.np.npyimpl" in sys.modules)
"""


def python(code: str, folder: Path) -> str:
    """What the code prints in a process of its own."""
    done = subprocess.run([sys.executable, "-c", code], cwd=folder, env=installed(), capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    return done.stdout


# of numba, what it compiles with: half of the time that it takes to load
COMPILING = {"numba.np.npyimpl", "numba.np.npdatetime", "numba.cpython.mathimpl", "numba.typed.typeddict"}
NEEDLESS = {"matplotlib", "xarray", "rich", "dask", "pandas", "numpy.f2py", "numpy.testing", "hypothesis", "pytest"} | {
    f"scipy.{part}" for part in ("linalg", "stats", "special", "integrate", "optimize")
}


def test_nothing_needless_is_loaded_before_the_first_particle_moves(storm: Path) -> None:
    compile_it(storm)
    moved, loaded = json.loads(python(FIRST_PARTICLE, storm))
    assert moved == 384
    assert {"numba", "h5py", "pydantic", "tracer.pipeline"} <= set(loaded)
    assert not (NEEDLESS | COMPILING) & set(loaded)
    assert not [name for name in loaded if name.startswith("tracer.figures")]


def test_a_trace_loads_what_it_needs_only(drizzle: Path) -> None:
    compile_it(drizzle)
    status, loaded = json.loads(python(LOADED, drizzle))
    assert status == 0
    assert {"numba", "h5py", "pydantic", "tracer.sobol"} <= set(loaded)
    assert not (NEEDLESS | COMPILING) & set(loaded)


def test_all_of_numba_works_after_a_kernel_came_from_the_disk(drizzle: Path) -> None:
    """A user's own compiled functions in the same process, of parts that the kernel never calls: against numpy."""
    compile_it(drizzle)
    assert python(ALGEBRA, drizzle).splitlines() == ["False False", "True True"]


def compile_it(folder: Path) -> None:
    """Have the kernels of a run on the disk."""
    python("from tracer import cli; cli.main(['check', 'storm.toml'])", folder)


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
