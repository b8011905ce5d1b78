"""A real dask scheduler and real workers: the same bits, workers killed, joined and refused, the scheduler lost."""

from __future__ import annotations

import logging
import os
import socket
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
from crews import RUN, SPANS, TOLERANCE, assert_all_there, by_this_process, datasets

import tracer
from tracer import cli, cluster, pipeline, templates
from tracer.cluster import Cluster, unlike
from tracer.progress import Silent
from tracer.stopping import WorkersLost
from tracer.worker import dismiss

pytest.importorskip("dask.distributed", reason="the extra cluster is not installed")

ROOT = Path(__file__).parent.parent.parent

# what a worker loads before it begins
OTHER_VERSION = """
import tracer.store_attrs, tracer.worker
tracer.worker.versions = lambda: {**tracer.store_attrs.versions(), "numpy_version": "1.0"}
"""
FATAL = """
import os, tracer.worker
tracer.worker.run_chunk = lambda *_, **__: os._exit(7)
"""
NOT_INSTALLED = "import sys; sys.modules['tracer.worker'] = None"


class Site:
    """A scheduler and its workers, as a user starts them."""

    def __init__(self, folder: Path, **environment: str) -> None:
        self._folder = folder
        self.file = folder / "scheduler.json"
        self.port = free_port()
        self.address = f"tcp://127.0.0.1:{self.port}"
        self.processes: list[subprocess.Popen[bytes]] = []
        place = ("--port", str(self.port), "--scheduler-file", str(self.file))
        self.scheduler = self._dask("scheduler", *place, **environment)

    def worker(
        self, *options: str, threads: int = 1, preload: str = "", **environment: str
    ) -> tuple[subprocess.Popen[bytes], str]:
        """A worker and its address; it may not have joined yet."""
        port = free_port()
        place = (self.address, "--no-nanny", "--nthreads", str(threads), "--worker-port", str(port))
        if preload:
            script = self._folder / f"preload{port}.py"
            script.write_text(preload)
            place += ("--preload", str(script))
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


def test_the_same_bits_whoever_forgets_or_dies(site: Site) -> None:
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
        crew._client.run(dismiss, crew._key)  # as processes started anew at the same addresses
        found += [next(coming) for _ in range(7)]
        second.kill()
        found += coming
    assert_all_there(found)
    assert first.poll() is None


def test_all_workers_lost_and_others_come(site: Site, caplog: pytest.LogCaptureFixture) -> None:
    victim, _ = site.worker()
    with Cluster(RUN, site.address) as crew:
        coming = crew.chunks(SPANS, TOLERANCE, Silent())
        found = [next(coming)]
        victim.kill()
        _, unlike_us = site.worker(preload=OTHER_VERSION)
        until(lambda: crew._survey() or crew._refused)
        crew._refused.clear()  # as if the run had not looked yet
        _, address = site.worker()
        found += coming
        assert list(crew._threads) == [address]
    assert_all_there(found)
    (refusal,) = [record for record in caplog.records if record.name == cluster.__name__]
    assert refusal.levelno == logging.WARNING
    assert refusal.getMessage().startswith(f"{unlike_us} is given no work: numpy_version 1.0, not ")


def test_workers_of_another_kind_are_refused_by_name(site: Site, monkeypatch: pytest.MonkeyPatch) -> None:
    _, like_us = site.worker()
    _, older = site.worker(preload=OTHER_VERSION)
    _, plain = site.worker(NUMBA_CPU_NAME="x86-64")
    _, bare = site.worker(preload=NOT_INSTALLED)
    gather = Cluster._gather

    def all_of_them(crew: Cluster, starting: bool = False) -> None:
        until(lambda: len(crew._client.nthreads()) == 4)
        gather(crew, starting)

    monkeypatch.setattr(Cluster, "_gather", all_of_them)
    with pytest.raises(tracer.InputError) as caught, Cluster(RUN, site.address):
        pass
    said = str(caught.value)
    assert said.startswith(f'driftrose: scheduler = "{site.address}": has workers unlike this process: ')
    assert f"{older} (numpy_version 1.0, not " in said
    assert f"{plain} (kernel_cpu x86-64, not " in said
    assert f"{bare} (cannot load the run: ModuleNotFoundError(" in said
    assert like_us not in said
    assert "\n" not in said


def test_a_lost_scheduler_leaves_a_run_to_resume(site: Site, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    class Watch(Silent):
        began = 0.0

        def advanced(self, count: int) -> None:
            if not self.began:
                self.began = time.monotonic()
                site.scheduler.kill()

    monkeypatch.setattr(pipeline, "chunk_size", lambda count, slots: 9)
    tracer.trace(RUN, tmp_path / "whole.h5", threads=1)
    site.worker()
    watch = Watch()
    with pytest.raises(tracer.Stopped) as caught:
        tracer.trace(RUN, tmp_path / "out.h5", scheduler=site.address, watcher=watch)
    assert str(caught.value).startswith(f"the scheduler at {site.address} was lost; stopped after ")
    assert time.monotonic() - watch.began < 15.0
    assert not (tmp_path / "out.h5").exists()
    tracer.trace(RUN, tmp_path / "out.h5", resume=True)
    assert datasets(tmp_path / "out.h5") == datasets(tmp_path / "whole.h5")


def test_the_command_uses_a_cluster(site: Site, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    templates.new_runfile("storm.toml")
    text = Path("storm.toml").read_text("utf-8").replace("count = 20000", "count = 60")
    Path("storm.toml").write_text(text)
    site.worker()
    until(site.file.exists)
    assert cli.main(["trace", "storm.toml", "--quiet", "--scheduler", "scheduler.json", "-o", "a.h5"]) == 0
    assert cli.main(["trace", "storm.toml", "--quiet", "-o", "b.h5"]) == 0
    assert datasets(tmp_path / "a.h5") == datasets(tmp_path / "b.h5")


def test_a_chunk_that_ends_its_workers_stops_the_run(tmp_path: Path) -> None:
    site = Site(tmp_path, DASK_DISTRIBUTED__SCHEDULER__ALLOWED_FAILURES="0")
    try:
        _, address = site.worker(preload=FATAL)
        with (
            Cluster(RUN, site.address) as crew,
            pytest.raises(WorkersLost, match=f"workers of {site.address} died on one chunk, the last .*{address}"),
        ):
            list(crew.chunks(SPANS, TOLERANCE, Silent()))
    finally:
        site.close()


# --------------------------------------------------------------------------------------------------- nobody to work


def refused(address: str) -> str:
    with pytest.raises(tracer.InputError) as caught, Cluster(RUN, address):
        pass
    return str(caught.value)


def test_a_cluster_without_workers(site: Site, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(cluster, "GATHERING_S", 0.5)
    until(site.file.exists)
    assert "has no workers after 0.5 s; start some: dask worker tcp://" in refused(site.address)


def test_no_scheduler(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(cluster, "CONNECT_S", 0.5)
    for address in (f"tcp://127.0.0.1:{free_port()}", "nonsense://here", "127.0.0.1:1"):
        said = refused(address)
        assert said.startswith(f'driftrose: scheduler = "{address}": no scheduler answers: ')
        assert said.endswith("; the address that dask scheduler printed, or the path of its scheduler file")


def test_no_scheduler_file(tmp_path: Path) -> None:
    assert ": no such file; " in refused(str(tmp_path / "none.json"))
    assert ": is empty; " in refused("")


def test_dask_is_not_installed(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "dask.distributed", None)
    assert refused("tcp://a:1").endswith("which is not installed; pip install 'driftrose[cluster]'")


def test_a_worker_that_died_while_it_was_asked_is_not_of_another_kind() -> None:
    assert unlike(OSError("closed"), {"a": "1"}) == ""
    assert unlike({"a": "1"}, {"a": "1"}) == ""
    assert unlike({"a": "2"}, {"a": "1"}) == "a 2, not 1"
