"""Damaged run files: reading one works or raises InputError of one line, and the command ends with 0 or 2 alike."""

from __future__ import annotations

import copy
import io
import shutil
import tomllib
from collections.abc import Iterator
from contextlib import redirect_stderr, redirect_stdout
from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path
from typing import Any

import pytest
import tomli_w
from hypothesis import given, settings
from hypothesis import strategies as st

import tracer
from tracer import preview
from tracer import tables as tables_module
from tracer.cli import main
from tracer.scenario import Scenario

SHIPPED = Path(tracer.__file__).parent / "scenarios"
ACCESS = Path(__file__).parents[1] / "data" / "access" / "run.toml"
TEXTS = [path.read_text("utf-8") for path in (*sorted(SHIPPED.glob("*.toml")), ACCESS)]
NUMBERS = st.one_of(
    st.integers(-(2**70), 2**70),
    st.floats(),
    st.sampled_from([0, -1, 1, 2, 90.0, 1e-300, 5e-324, 1e300, float("inf"), float("nan"), 10**9, 24.0, -0.0]),
)
MOMENTS = st.datetimes(timezones=st.sampled_from([None, UTC, timezone(timedelta(hours=5))]))
WORDS = st.one_of(
    st.text(max_size=8),
    st.sampled_from(["series:kp", "series:", "orbit.csv", "grid", "sobol", "log", "area", "isotropic", "e-", "."]),
)
SCALARS = st.one_of(NUMBERS, WORDS, st.booleans(), MOMENTS, st.dates(), st.times())
VALUES = st.recursive(
    SCALARS,
    lambda inner: st.one_of(st.lists(inner, max_size=4), st.dictionaries(WORDS, inner, max_size=3)),
    max_leaves=6,
)
RANGES = st.fixed_dictionaries(
    {"from": NUMBERS, "to": NUMBERS}, optional={"spacing": WORDS, "n": st.one_of(st.integers(-2, 10**12), NUMBERS)}
)


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Path]:
    path = tmp_path_factory.mktemp("mutations")
    for table in (*SHIPPED.glob("*.csv"), *ACCESS.parent.glob("*.csv")):
        shutil.copy(table, path)
    with pytest.MonkeyPatch.context() as patch:
        # a harmless mutation may ask for a billion particles; what `check` computes from a file read is not at stake
        patch.setattr(preview, "check", lambda scenario, watcher: {"title": scenario.title})
        patch.setattr(tables_module, "preview_text", lambda found: found["title"])
        yield path


def commanded(path: Path) -> tuple[int, str]:
    """Exit status and stderr of ``driftrose check``."""
    with redirect_stdout(io.StringIO()), redirect_stderr(io.StringIO()) as said:
        status = main(["check", str(path)])
    return status, said.getvalue()


def outcome(path: Path) -> Scenario | str:
    """The scenario, or the line of the fault without the file's name."""
    status, said = commanded(path)
    try:
        scenario = tracer.load(path)
        assert (status, said) == (0, "")
        return scenario
    except tracer.InputError as error:
        line = str(error)
        assert (status, said) == (2, line + "\n")
        assert line.startswith("driftrose: ")
        assert len(line.splitlines()) == 1
        assert "; " in line
        assert line.isprintable()
        return line.replace(f"{path}: ", "")


def places(tables: Any, path: tuple[Any, ...] = ()) -> list[tuple[Any, ...]]:
    """The paths of everything in the tables."""
    inner = tables.items() if isinstance(tables, dict) else enumerate(tables) if isinstance(tables, list) else ()
    return [path, *(place for key, value in inner for place in places(value, (*path, key)))]


@st.composite
def damaged_tables(draw: st.DrawFn) -> dict[str, Any]:
    """A shipped run file's tables with up to three entries deleted, replaced, renamed, doubled or swapped."""
    tables = tomllib.loads(draw(st.sampled_from(TEXTS)))
    for _ in range(draw(st.integers(1, 3))):
        found = [place for place in places(tables) if place]
        if not found:
            break
        *parents, last = draw(st.sampled_from(found))
        holder: Any = tables
        for part in parents:
            holder = holder[part]
        action = draw(st.sampled_from(["replace", "range", "delete", "rename", "double", "swap"]))
        if action == "replace":
            holder[last] = draw(VALUES)
        elif action == "range":
            holder[last] = draw(RANGES)
        elif action == "delete":
            del holder[last]
        elif action == "rename" and isinstance(holder, dict):
            holder[draw(WORDS)] = holder.pop(last)
        elif action == "double" and isinstance(holder, list):
            holder.append(copy.deepcopy(holder[last]))
        elif action == "swap" and isinstance(holder, dict):
            other = draw(st.sampled_from(sorted(holder)))
            holder[last], holder[other] = holder[other], holder[last]
    return tables


def writable(value: Any) -> bool:
    """Whether TOML can hold it: its text has no lone surrogates, its times no odd offsets."""
    if isinstance(value, dict):
        return all(writable(key) and writable(member) for key, member in value.items())
    if isinstance(value, list):
        return all(map(writable, value))
    return not isinstance(value, str) or value.isprintable() or not any(0xD800 <= ord(c) < 0xE000 for c in value)


@settings(max_examples=250, deadline=5000)
@given(tables=damaged_tables())
def test_damaged_tables(tables: dict[str, Any], folder: Path) -> None:
    """From a file and from code: the same scenario or the same line."""
    try:
        built: Scenario | str = tracer.build(tables, base=folder)
    except tracer.InputError as error:
        built = str(error)
        assert len(built.splitlines()) == 1
    if not writable(tables):
        assert isinstance(built, str)
        return
    path = folder / "tables.toml"
    path.write_text(tomli_w.dumps(tables), "utf-8", newline="\n")
    loaded = outcome(path)
    if isinstance(built, str):
        # a dict keeps an order that TOML cannot: single keys stand before tables
        assert isinstance(loaded, str)
    else:
        assert isinstance(loaded, Scenario)
        assert loaded.populations == built.populations
        assert loaded.start == built.start


@settings(max_examples=150, deadline=5000)
@given(data=st.data())
def test_damaged_lines(data: st.DataObject, folder: Path) -> None:
    lines = data.draw(st.sampled_from(TEXTS)).splitlines()
    lines = [line for line in lines if line and not line.startswith("#")]
    at = st.integers(0, len(lines) - 1)
    for _ in range(data.draw(st.integers(1, 3))):
        i, j = data.draw(at), data.draw(at)
        action = data.draw(st.sampled_from(["delete", "double", "swap", "cut", "value"]))
        if action == "delete":
            lines[i] = ""
        elif action == "double":
            lines.insert(j, lines[i])
        elif action == "swap":
            lines[i], lines[j] = lines[j], lines[i]
        elif action == "cut":
            lines[i] = lines[i][: data.draw(st.integers(0, len(lines[i])))]
        else:
            key = lines[i].split("=")[0]
            lines[i] = f"{key}= {data.draw(st.one_of(NUMBERS, st.text(max_size=6)))}"
    path = folder / "lines.toml"
    path.write_bytes("\n".join(lines).encode("utf-8", "surrogatepass"))
    outcome(path)


@settings(max_examples=150, deadline=5000)
@given(data=st.data())
def test_damaged_bytes(data: st.DataObject, folder: Path) -> None:
    raw = bytearray(data.draw(st.sampled_from(TEXTS)).encode())
    if data.draw(st.booleans()):
        raw = raw[: data.draw(st.integers(0, len(raw)))]
    for _ in range(data.draw(st.integers(0, 8))):
        start = data.draw(st.integers(0, len(raw)))
        raw[start : start + data.draw(st.integers(0, 3))] = data.draw(st.binary(max_size=3))
    path = folder / "bytes.toml"
    path.write_bytes(raw)
    outcome(path)


@settings(max_examples=60, deadline=5000)
@given(data=st.data())
def test_damaged_history(data: st.DataObject, folder: Path) -> None:
    raw = bytearray((SHIPPED / "storm-kp.csv").read_bytes())
    for _ in range(data.draw(st.integers(0, 6))):
        start = data.draw(st.integers(0, len(raw)))
        raw[start : start + data.draw(st.integers(0, 3))] = data.draw(st.binary(max_size=3))
    (folder / "noisy.csv").write_bytes(raw)
    path = folder / "history.toml"
    path.write_text((SHIPPED / "storm.toml").read_text("utf-8").replace('"storm-kp.csv"', '"noisy.csv"'), "utf-8")
    outcome(path)


def test_some_damage_is_harmless(folder: Path) -> None:
    """The property above is not met by refusing everything."""
    path = folder / "shorter.toml"
    tables = tomllib.loads((SHIPPED / "storm.toml").read_text("utf-8"))
    del tables["output"], tables["losses"], tables["title"], tables["population"][0]["seed"]
    path.write_text(tomli_w.dumps(tables), "utf-8")
    found = outcome(path)
    assert isinstance(found, Scenario)
    assert found.count == 20000
    assert found.start == datetime(2027, 3, 4, tzinfo=UTC)
