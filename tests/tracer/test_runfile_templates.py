"""The shipped scenarios, and the run files written from them."""

from __future__ import annotations

import os
import tomllib
from pathlib import Path

import pytest

import tracer
from tracer import templates

SHIPPED = Path(tracer.__file__).parent / "scenarios"
NAMES = list(templates.names())


def test_default_stands_first() -> None:
    assert NAMES[0] == templates.DEFAULT == "storm"
    assert {"storm", "quiet", "electrons"} <= set(NAMES)


@pytest.mark.parametrize("name", NAMES)
def test_new_file_loads(name: str, tmp_path: Path) -> None:
    path = tmp_path / "mine.toml"
    written = templates.new_runfile(path, like=name)
    assert written[0] == path
    assert path.read_bytes() == (SHIPPED / f"{name}.toml").read_bytes()
    assert sorted(written) == sorted(tmp_path.iterdir())
    run = tracer.load(path)
    assert run.origin.remarks == ()
    assert run.field.warnings() == []


@pytest.mark.parametrize("name", NAMES)
def test_scenario_says_that_it_is_invented(name: str) -> None:
    text = (SHIPPED / f"{name}.toml").read_text("utf-8")
    assert "invented" in text.splitlines()[0].lower()
    assert "invented" in tomllib.loads(text)["title"].lower()


@pytest.mark.parametrize("path", sorted(SHIPPED.glob("*.csv")), ids=lambda path: path.name)
def test_history_says_that_it_is_invented(path: Path) -> None:
    assert "invented" in path.read_text("utf-8").splitlines()[0].lower()


def test_storm_names_every_key() -> None:
    """The default scenario teaches: each key of the tables that it shows is in it, as a key or in a comment."""
    from tracer.runfile.schema import TABLES, keys_of

    text = (SHIPPED / "storm.toml").read_text("utf-8")
    explained_elsewhere = {"time", "value", "column", "n", "access", "orbit"}
    for place, table in TABLES.items():
        if not {"access", "orbit"} & set(place):
            for key in set(keys_of(table)) - explained_elsewhere:
                assert key in text, key


def test_never_overwrites(tmp_path: Path) -> None:
    path = tmp_path / "mine.toml"
    path.write_text("mine")
    with pytest.raises(tracer.InputError) as caught:
        templates.new_runfile(path)
    assert str(caught.value) == f"driftrose: {path}: already exists, and is not overwritten; another name or folder"
    assert [p.name for p in tmp_path.iterdir()] == ["mine.toml"]
    assert path.read_text() == "mine"


def test_history_in_the_way(tmp_path: Path) -> None:
    (tmp_path / "storm-kp.csv").write_text("time,kp\n")
    with pytest.raises(tracer.InputError, match=r"storm-kp\.csv: already exists, and is not overwritten"):
        templates.new_runfile(tmp_path / "mine.toml")
    assert [p.name for p in tmp_path.iterdir()] == ["storm-kp.csv"]


def test_same_history_is_shared(tmp_path: Path) -> None:
    assert len(templates.new_runfile(tmp_path / "one.toml")) == 2
    assert templates.new_runfile(tmp_path / "two.toml", like="backward") == [tmp_path / "two.toml"]
    assert tracer.load(tmp_path / "two.toml").backward


def test_dangling_link_is_not_written_through(tmp_path: Path) -> None:
    (tmp_path / "mine.toml").symlink_to(tmp_path / "elsewhere.toml")
    with pytest.raises(tracer.InputError, match="already exists"):
        templates.new_runfile(tmp_path / "mine.toml")
    assert not (tmp_path / "elsewhere.toml").exists()


def test_faults_of_the_target(tmp_path: Path) -> None:
    with pytest.raises(tracer.InputError, match="no such folder; an existing one"):
        templates.new_runfile(tmp_path / "none" / "mine.toml")
    with pytest.raises(tracer.InputError, match="is a folder"):
        templates.new_runfile(tmp_path)
    with pytest.raises(tracer.InputError, match="is the name of the history"):
        templates.new_runfile(tmp_path / "storm-kp.csv")
    with pytest.raises(tracer.InputError, match=r'--like = "strom": no such scenario; did you mean storm'):
        templates.new_runfile(tmp_path / "mine.toml", like="strom")
    assert not any(tmp_path.iterdir())


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write anywhere")
def test_folder_that_may_not_be_written(tmp_path: Path) -> None:
    tmp_path.chmod(0o500)
    with pytest.raises(tracer.InputError, match="cannot be written: Permission denied"):
        templates.new_runfile(tmp_path / "mine.toml")


def test_worked_example_loads() -> None:
    run = tracer.load(Path(__file__).parents[2] / "runs" / "injection.toml")
    assert [p.name for p in run.populations] == ["protons", "electrons"]
    assert list(run.origin.input_sha256) == ["injection-kp.csv"]
