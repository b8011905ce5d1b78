"""Who may import whom: the contracts of pyproject.toml hold, they can fail, and what they cannot say is said here."""

from __future__ import annotations

import ast
import json
import shutil
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

from fields import catalogue

ROOT = Path(__file__).parent.parent
LINT = "import sys; from importlinter.cli import lint_imports_command as lint; lint(sys.argv[1:])"


def lint(folder: Path) -> subprocess.CompletedProcess[str]:
    """import-linter over the packages in `folder`."""
    command = [sys.executable, "-c", LINT, "--no-cache"]
    return subprocess.run(command, cwd=folder, capture_output=True, text=True, check=False)


def test_contracts_hold() -> None:
    found = lint(ROOT)
    assert found.returncode == 0, found.stdout + found.stderr
    assert " 0 broken" in found.stdout


BREACHES = [
    ("fields/units.py", "import tracer.status", "fields knows nothing of particles"),
    ("tracer/scenario.py", "import tracer.runfile", "tracer: data flows one way"),
    ("fields/drivers.py", "import fields.field", "fields: data flows one way"),
    ("fields/novel.py", "", "fields: data flows one way"),
    ("tracer/novel.py", "", "tracer: data flows one way"),
    ("tracer/figures/style.py", "import tracer.figures.paths", "no cycles inside the rooms"),
    ("tracer/integrate.py", "from fields.magnetic.dipole import Dipole", "nothing in tracer assumes a dipole"),
    ("fields/lines.py", "import numba", "numba only in tracer.kernels"),
    ("tracer/records.py", "import h5py", "h5py only in tracer.store"),
    ("tracer/analysis/facts.py", "import matplotlib.pyplot", "matplotlib only in tracer.figures"),
    ("tracer/terminal.py", "import click", "click only in tracer.cli"),
    ("tracer/cli.py", "import rich", "rich only in tracer.terminal"),
    ("tracer/scenario.py", "from pydantic import BaseModel", "pydantic only in tracer.runfile"),
    ("tracer/records.py", "import xarray", "xarray only in tracer.labelled"),
    ("tracer/pipeline.py", "from dask.distributed import Client", "dask only in tracer.cluster"),
    ("tracer/orbit.py", "import astropy.time", "astropy only in fields.frames"),
    ("tracer/orbit.py", "import sgp4.api", "sgp4 only in tracer.ephemeris.twoline"),
]


@pytest.mark.parametrize(("file", "line", "contract"), BREACHES, ids=[f"{file}: {line}" for file, line, _ in BREACHES])
def test_a_breach_is_caught(tmp_path: Path, file: str, line: str, contract: str) -> None:
    for package in ("tracer", "fields"):
        shutil.copytree(ROOT / package, tmp_path / package, ignore=shutil.ignore_patterns("__pycache__"))
    shutil.copy(ROOT / "pyproject.toml", tmp_path)
    with (tmp_path / file).open("a", encoding="utf-8") as stream:
        stream.write(f"\n{line}\n")
    found = lint(tmp_path)
    assert found.returncode == 1, found.stdout + found.stderr
    broken = " ".join(found.stdout.split("Broken contracts")[1].split())
    assert contract in broken


def third_party_after(code: str) -> set[str]:
    """Top-level packages outside the standard library that running `code` brings in, in a fresh process."""
    script = (
        "import json, sys; before = set(sys.modules)\n"
        f"{code}\n"
        "found = {name.partition('.')[0] for name in set(sys.modules) - before}\n"
        "print(json.dumps(sorted(found - set(sys.stdlib_module_names))))"
    )
    done = subprocess.run([sys.executable, "-c", script], cwd=ROOT, capture_output=True, text=True, check=True)
    return set(json.loads(done.stdout))


def test_importing_the_packages_loads_nothing_heavy() -> None:
    assert third_party_after("import tracer, fields") <= {"tracer", "fields", "numpy"}


def test_importing_the_command_loads_nothing_heavy() -> None:
    assert third_party_after("import tracer.cli") <= {"tracer", "fields", "numpy", "click"}


def test_the_measure_of_what_is_loaded_sees_a_heavy_import() -> None:
    assert "scipy" in third_party_after("import scipy")


# bounce_T and bounce_Y are by definition those of a dipole
MAY_NAME_A_MODEL = {("tracer/adiabatic.py", "_unit_dipole")}


def test_no_code_in_tracer_names_a_field_model() -> None:
    models = [*catalogue.MAGNETIC.values(), *catalogue.ELECTRIC.values()]
    names = {model.__name__ for model in models} | {model.card.name for model in models}
    assert {"Dipole", "dipole", "volland-stern"} <= names
    found = {
        (path.relative_to(ROOT).as_posix(), getattr(statement, "name", f"line {statement.lineno}"))
        for path in sorted((ROOT / "tracer").rglob("*.py"))
        for statement in ast.parse(path.read_text("utf-8")).body
        if names & set(words_of(statement))
    }
    assert found == MAY_NAME_A_MODEL


def words_of(tree: ast.AST) -> Iterator[str]:
    """Every identifier and every whole text in `tree`; a name in the midst of a docstring or a message is none."""
    for node in ast.walk(tree):
        match node:
            case ast.Name(id=word) | ast.Attribute(attr=word) | ast.alias(name=word) | ast.Constant(value=str(word)):
                yield word.rpartition(".")[2]
