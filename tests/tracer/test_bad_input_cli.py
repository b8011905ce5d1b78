"""The commands say of a bad run file what reading it says: one line on stderr, exit status 2, nothing written."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

from tracer import cli

BAD = Path(__file__).parents[1] / "data" / "bad"
CASES = sorted(path.stem for path in BAD.glob("*.toml"))


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    for path in BAD.iterdir():
        if path.suffix != ".txt":
            shutil.copy(path, tmp_path)
    monkeypatch.chdir(tmp_path)
    return tmp_path


def test_all_cases(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    before = sorted(folder.iterdir())
    for command in ("check", "trace", "access"):
        for name in CASES:
            status = cli.main([command, f"{name}.toml"])
            printed = capsys.readouterr()
            assert (status, printed.out, printed.err) == (2, "", (BAD / f"{name}.txt").read_text("utf-8")), name
    assert sorted(folder.iterdir()) == before
