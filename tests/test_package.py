"""What is installed: one version, a wheel that holds both packages whole and no more, names that stay functions."""

from __future__ import annotations

import importlib.metadata
import pkgutil
import re
import shutil
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

import tracer

ROOT = Path(__file__).parent.parent
BUILD = "import sys; from setuptools.build_meta import build_wheel; build_wheel(sys.argv[1])"


def test_the_installed_version_is_that_of_the_code() -> None:
    assert importlib.metadata.version("driftrose") == tracer.__version__


def test_the_version_is_written_in_one_place() -> None:
    sources = [path for package in ("tracer", "fields") for path in (ROOT / package).rglob("*.py")]
    found = [p for p in [ROOT / "pyproject.toml", *sources] if f'"{tracer.__version__}"' in p.read_text("utf-8")]
    assert found == [ROOT / "tracer" / "__init__.py"]


def test_those_who_must_repeat_the_version_agree() -> None:
    citation = (ROOT / "CITATION.cff").read_text("utf-8")
    assert re.findall(r"^version: (.+)$", citation, re.MULTILINE) == [tracer.__version__]
    released = re.findall(r"^## \[(\d.*?)\]", (ROOT / "CHANGELOG.md").read_text("utf-8"), re.MULTILINE)
    assert released[0] == tracer.__version__


@pytest.mark.parametrize("name", [name for name in tracer.__all__ if name != "__version__"])
def test_a_public_name_is_no_module(name: str) -> None:
    # importing a submodule puts it on the package under its own name, over whatever else is meant by it
    assert name not in {module.name for module in pkgutil.iter_modules(tracer.__path__)}
    assert callable(getattr(tracer, name))
    assert callable(getattr(tracer, name))  # the second time too


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> set[str]:
    """Names of the files in the wheel."""
    source, target = tmp_path_factory.mktemp("source"), tmp_path_factory.mktemp("wheel")
    for package in ("tracer", "fields", "tests", "runs", "scripts"):
        shutil.copytree(ROOT / package, source / package, ignore=shutil.ignore_patterns("__pycache__", "out", "*.h5"))
    for file in ("pyproject.toml", "README.md", "LICENSE"):
        shutil.copy(ROOT / file, source)
    subprocess.run([sys.executable, "-c", BUILD, str(target)], cwd=source, capture_output=True, text=True, check=True)
    (built,) = target.glob("driftrose-*.whl")
    assert built.name == f"driftrose-{tracer.__version__}-py3-none-any.whl"
    with zipfile.ZipFile(built) as archive:
        return set(archive.namelist())


def test_the_wheel_holds_both_packages_whole(wheel: set[str]) -> None:
    wanted = {
        path.relative_to(ROOT).as_posix()
        for package in ("tracer", "fields")
        for path in (ROOT / package).rglob("*")
        if path.is_file() and "__pycache__" not in path.parts
    }
    assert {"tracer/scenarios/storm.toml", "tracer/scenarios/storm-kp.csv", "tracer/py.typed"} <= wanted
    held = {name for name in wheel if ".dist-info/" not in name}
    assert held == wanted


def test_the_wheel_carries_its_licence(wheel: set[str]) -> None:
    assert f"driftrose-{tracer.__version__}.dist-info/licenses/LICENSE" in wheel
