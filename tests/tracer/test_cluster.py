"""A real dask scheduler and real worker processes: the same bits, workers killed, joined and refused, the scheduler lost."""

from __future__ import annotations

import logging
import os
import signal
import socket
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
from crews import RUN, SPANS, TOLERANCE, assert_all_there, by_this_process

import tracer
from tracer import cluster
from tracer.cluster import Cluster, unlike
from tracer.progress import Silent

pytest.importorskip("dask.distributed", reason="the extra cluster is not installed")

ROOT = Path(__file__).parent.parent.parent

# loaded by a worker before it begins: it then claims to be of another version
OTHER_VERSION = """
import tracer.store_attrs
tracer.store_attrs.versions = dict
import tracer.worker
honest = tracer.worker.versions
tracer.worker.versions = lambda: {**tracer.worker._versions(), "numpy_version": "1.0"}
"""


class Site:
    """A scheduler and its workers, as a user starts them."""

    def __init__(self, folder: Path) -> None:
        self._folder = folder
        self.file = folder / "scheduler.json"
        self.port = free_port()
        self.address = f"tcp://127.0.0.1:{self.port}"
        self.processes: list[subprocess.Popen[bytes]] = []
        self.scheduler = self._dask("scheduler", "--port", str(self.port), "--scheduler-file", str(self.file))

    def worker(self, *options: str, threads: int = 1, **environment: str) -> tuple[subprocess.Popen[bytes], str]:
        """A worker and its address; it may not have joined yet."""
        port = free_port()
        place = (self.address, "--no-nanny", "--nthreads", str(threads), "--worker-port", str(port))
        return self._dask("worker", *place, *options, **environment), f"tcp://127.0.0.1:{port}"

    def _dask(self, role: str, *options: str, **environment: str) -> subprocess.Popen[bytes]:
        with (self._folder / "log.txt").open("ab") as log:
            process = subprocess.Popen(
                [sys.executable, "-m", "dask", role, "--host", "127.0.0.1", "--no-dashboard", *options],
                stdout=log,
                stderr=log,
                cwd=self._folder,
                env={**os.environ, "PYTHONPATH": str(ROOT), **environment},
            )
        self.processes.append(process)
        return process

    def close(self) -> None:
        for process in self.processes:
            process.kill()
            process.wait()


def free_port() -> int:
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        return int(taken.getsockname()[1])


@pytest.fixture
def site(tmp_path: Path) -> Iterator[Site]:
    found = Site(tmp_path)
    yield found
    found.close()


def until(true: Callable[[], Any], within_s: float = 20.0) -> None:
    deadline = time.monotonic() + within_s
    while not true():
        assert time.monotonic() < deadline
        time.sleep(0.05)


def test_the_same_bits_and_a_killed_worker(site: Site) -> None:
    by_this_process()
    (first, address), (second, other) = site.worker(), site.worker(threads=2)
    until(site.file.exists)
    with Cluster(RUN, str(site.file)) as crew:
        until(lambda: crew._survey() or len(crew._threads) == 2)
        assert crew._threads == {address: 1, other: 2}
        assert crew.slots == 3
        given = 0

        def spans() -> Iterator[tuple[int, int]]:
            nonlocal given
            for span in SPANS:
                given += 1
                yield span

        coming = crew.chunks(spans(), TOLERANCE, Silent())
        found = [next(coming) for _ in range(2)]
        assert given <= len(found) + 5  # two and three in hand
        second.kill()
        found += coming
    assert_all_there(found)
    assert first.poll() is None


def test_all_workers_lost_and_another_one_comes(site: Site) -> None:
    victim, _ = site.worker()
    with Cluster(RUN, site.address) as crew:
        coming = crew.chunks(SPANS, TOLERANCE, Silent())
        found = [next(coming)]
        victim.kill()
        _, address = site.worker()
        found += coming
        assert list(crew._threads) == [address]
    assert_all_there(found)
