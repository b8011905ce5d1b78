"""What the documents say is so: examples print what they say, tables name every key and command, the map every room."""

from __future__ import annotations

import io
import re
import subprocess
import sys
from contextlib import redirect_stdout
from pathlib import Path

import click
import pytest

import tracer
from fields import catalogue
from tracer import templates
from tracer.analysis.summary import sentences
from tracer.cli import command
from tracer.records import GROUPS
from tracer.runfile.schema import QUANTITIES, TABLES, Table, keys_of
from tracer.scenario import SPECIES

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text("utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text("utf-8")

FENCE = r"```{0}\n(.*?)```"
EXAMPLE = re.compile(r"<!-- run -->\n" + FENCE.format("python") + r"\n+" + FENCE.format("text"), re.DOTALL)
QUESTION = re.compile(r"<!-- run: storm.h5 -->\n" + FENCE.format("python") + r"\n+" + FENCE.format("text"), re.DOTALL)
SENTENCES = re.compile(r"<!-- sentences -->\n" + FENCE.format("text"), re.DOTALL)


def printed(code: str) -> str:
    with redirect_stdout(io.StringIO()) as out:
        exec(compile(code, "README.md", "exec"), {})
    return out.getvalue()


def test_the_python_example_prints_what_it_says() -> None:
    ((code, text),) = EXAMPLE.findall(README)
    assert printed(code) == text


@pytest.mark.slow
def test_the_worked_question_has_the_stated_answer(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    templates.new_runfile("storm.toml")
    result = tracer.trace(tracer.load("storm.toml"), out="storm.h5")
    (said,) = SENTENCES.findall(README)
    assert sentences(result) == said.splitlines()
    ((code, text),) = QUESTION.findall(README)
    assert printed(code) == text


def tables() -> list[tuple[str, type[Table]]]:
    return [(".".join(path), table) for path, table in TABLES.items() if not set(path) & set(QUANTITIES)]


@pytest.mark.parametrize(("place", "table"), tables(), ids=[place or "root" for place, _ in tables()])
def test_every_key_of_the_run_file_is_described(place: str, table: type[Table]) -> None:
    section = README.split("## Run file")[1].split("\n## ")[0]
    missing = [key for key in keys_of(table) if not re.search(rf"[`\[{{ ]{key}[`\],. }}]", section)]
    assert missing == []


def test_every_command_and_option_of_the_readme_exists() -> None:
    section = README.split("## Commands")[1].split("\n## ")[0]
    assert isinstance(command, click.Group)
    assert set(re.findall(r"`driftrose (\w+)", section)) == set(command.commands)
    known = {option for sub in command.commands.values() for parameter in sub.params for option in parameter.opts}
    assert set(re.findall(r"--[a-z]+", section)) <= known


def test_the_readme_names_the_scenarios_and_species() -> None:
    for name in templates.names():
        assert f"`{name}`" in README
    for name in SPECIES:
        assert f'`"{name}"`' in README


def test_the_readme_names_the_columns_of_the_file() -> None:
    section = README.split("## Trajectory file")[1].split("\n## ")[0]
    at_release = {column.name for column in GROUPS["track"]} | {"release_h"}  # "the state at release"
    for group, columns in GROUPS.items():
        row = next(line for line in section.splitlines() if line.startswith(f"| `/{group}/`"))
        wanted = {column.name for column in columns} - (at_release if group == "particle" else set())
        assert {name for name in wanted if not re.search(rf"\b{name}\b", row)} == set()


def test_the_figures_of_the_readme_are_there() -> None:
    for name in re.findall(r"!\[.*?\]\((.*?)\)", README):
        assert (ROOT / name).read_bytes().startswith(b"\x89PNG")


def test_the_map_shows_every_module() -> None:
    section = DEVELOPERS.split("## The map")[1].split("\n## ")[0]
    for package in ("fields", "tracer"):
        for path in (ROOT / package).rglob("*.py"):
            if path.name != "__init__.py":
                assert re.search(rf"\b{path.stem}(\.py)?`", section), path.relative_to(ROOT)


def test_the_map_shows_nothing_that_is_not_there() -> None:
    section = DEVELOPERS.split("## The map")[1].split("\n## ")[0]
    modules = {path.name for package in ("fields", "tracer") for path in (ROOT / package).rglob("*.py*")}
    rows = "\n".join(line for line in section.splitlines() if line.startswith("|"))
    named = re.findall(r"\b\w+\.pyi?\b", rows)
    assert named
    assert [name for name in named if name not in modules] == []


def test_the_developers_guide_names_what_a_model_must_be() -> None:
    for model in (*catalogue.MAGNETIC.values(), *catalogue.ELECTRIC.values()):
        assert model.card.name in DEVELOPERS


def test_the_module_runs_as_the_command() -> None:
    done = subprocess.run(
        [sys.executable, "-m", "tracer", "--version"], cwd=ROOT, capture_output=True, text=True, check=True
    )
    assert done.stdout == f"driftrose, version {tracer.__version__}\n"
