"""How long the command takes to answer, in processor time, and what it loads for it."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
HEAVY = {"numba", "scipy", "matplotlib", "xarray", "pydantic", "h5py", "rich", "llvmlite", "pandas"}


def processor_s(*arguments: str, folder: Path) -> float:
    """Processor time of one call of the command: what others do on the machine does not count."""
    command = [sys.executable, "-m", "tracer", *arguments]
    child = subprocess.Popen(
        command, cwd=folder, stdout=subprocess.DEVNULL, env={**os.environ, "PYTHONPATH": str(ROOT)}
    )
    _, status, used = os.wait4(child.pid, 0)
    child.returncode = os.waitstatus_to_exitcode(status)
    assert child.returncode == 0
    return used.ru_utime + used.ru_stime


@pytest.mark.skipif(not hasattr(os, "wait4"), reason="no processor time of a child here")
def test_help_takes_less_than_a_third_of_a_second(tmp_path: Path) -> None:
    best = min(processor_s("--help", folder=tmp_path) for _ in range(5))
    assert best < 0.3


@pytest.mark.skipif(not hasattr(os, "wait4"), reason="no processor time of a child here")
def test_a_second_trace_of_a_small_run_takes_less_than_three_seconds(tmp_path: Path) -> None:
    from tracer.templates import new_runfile

    path = tmp_path / "storm.toml"
    new_runfile(path)
    path.write_text(path.read_text("utf-8").replace("count = 20000", "count = 200"), encoding="utf-8")
    processor_s("trace", "storm.toml", folder=tmp_path)  # compiles, if nobody has
    best = min(processor_s("trace", "storm.toml", "--overwrite", folder=tmp_path) for _ in range(2))
    assert best < 3.0


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
