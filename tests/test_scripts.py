"""The scripts before anything is installed: what is missing from the system is named in one line, exit status 2."""

from __future__ import annotations

import shutil
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
TOOLS = ("bash", "dirname", "cat", "cksum")

OLD = "#!/bin/sh\nexit 1\n"  # answers "no" to being new enough
NO_VENV = '#!/bin/sh\ncase "$2" in *ensurepip*) exit 1 ;; esac\nexit 0\n'


def run(script: str, folder: Path, python: str | None) -> subprocess.CompletedProcess[str]:
    """A script of a fresh copy of the project, on a system whose only Python is the shell script `python`."""
    copy, tools = folder / "project", folder / "tools"
    (copy / "tracer").mkdir(parents=True)
    shutil.copytree(ROOT / "scripts", copy / "scripts")
    shutil.copy(ROOT / "pyproject.toml", copy)
    tools.mkdir()
    for name in TOOLS:
        found = shutil.which(name)
        assert found
        (tools / name).symlink_to(found)
    if python is not None:
        (tools / "python3").write_text(python)
        (tools / "python3").chmod(0o755)
    command = [str(tools / "bash"), str(copy / "scripts" / script)]
    done = subprocess.run(command, cwd="/", env={"PATH": str(tools)}, capture_output=True, text=True, check=False)
    assert not (copy / ".venv").exists()
    return done


@pytest.mark.parametrize("script", ["quickstart", "test"])
@pytest.mark.parametrize(
    ("python", "line"),
    [
        (None, "driftrose: python3 is missing, or older than 3.11; on Debian: apt install python3 python3-venv"),
        (OLD, "driftrose: python3 is missing, or older than 3.11; on Debian: apt install python3 python3-venv"),
        (NO_VENV, "driftrose: python3-venv is missing for {python}; on Debian: apt install python3-venv"),
    ],
    ids=["no python", "old python", "no venv"],
)
def test_a_missing_system_package_is_named(tmp_path: Path, script: str, python: str | None, line: str) -> None:
    done = run(script, tmp_path, python)
    assert done.returncode == 2
    assert done.stderr == line.format(python=tmp_path / "tools" / "python3") + "\n"
    assert done.stdout == ""


@pytest.mark.parametrize("name", ["scripts/quickstart", "scripts/test", "scripts/bench", ".ci/run"])
def test_scripts_are_executable(name: str) -> None:
    assert (ROOT / name).stat().st_mode & 0o111
