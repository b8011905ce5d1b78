"""Memory of the process, against what the system's own accounts say."""

from __future__ import annotations

import resource
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

import tracer
from tracer import memory

MEGABYTE = 2**20
SAID = "from tracer.memory import peak_bytes; print(peak_bytes())"


def test_what_is_touched_is_counted_and_the_peak_stays() -> None:
    before = memory.resident_bytes()
    held = np.ones(64 * MEGABYTE // 8)
    within = memory.resident_bytes()
    assert within - before == pytest.approx(held.nbytes, abs=8 * MEGABYTE)
    del held
    assert memory.resident_bytes() < within - 32 * MEGABYTE
    assert memory.peak_bytes() >= within - MEGABYTE  # the system counts by the lot


def test_the_peak_is_that_of_getrusage_where_nothing_else_tells(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(memory, "STATUS", Path("/nowhere/status"))
    unit = 1 if sys.platform == "darwin" else 1024
    assert memory.peak_bytes() == resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * unit
    assert memory.resident_bytes() == memory.peak_bytes()


@pytest.mark.skipif(not memory.STATUS.exists(), reason="the system does not tell")
def test_a_large_parent_is_not_counted() -> None:
    held = np.ones(256 * MEGABYTE // 8)
    root = str(Path(tracer.__file__).parents[1])
    done = subprocess.run([sys.executable, "-c", SAID], cwd=root, capture_output=True, text=True, check=True)
    assert MEGABYTE < int(done.stdout) < held.nbytes
