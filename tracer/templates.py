"""Run files to start from: the scenarios that travel with the package."""

from __future__ import annotations

import os
import tomllib
from importlib.resources import files
from importlib.resources.abc import Traversable
from pathlib import Path

from fields.errors import InputError, nearest

DEFAULT = "storm"


def names() -> dict[str, str]:
    """The shipped scenarios and their titles, the default first."""
    found = {
        Path(item.name).stem: str(tomllib.loads(item.read_text("utf-8"))["title"])
        for item in _shipped().iterdir()
        if item.name.endswith(".toml")
    }
    return {name: found[name] for name in sorted(found, key=lambda name: (name != DEFAULT, name))}


def new_runfile(path: str | os.PathLike[str], like: str = DEFAULT) -> list[Path]:
    """Write a commented run file to start from, and beside it the histories that it reads.

    Parameters
    ----------
    path : str or path
        The file to write. Nothing is ever overwritten; a history that already stands there unchanged is used as it
        is.
    like : str
        The shipped scenario to copy.

    Returns
    -------
    list of Path
        The files written, the run file first.

    Raises
    ------
    InputError
        When the scenario is unknown, a file is in the way, or the folder is missing or cannot be written.
    """
    if like not in names():
        raise InputError("no such scenario", nearest(like, names()), key="--like", value=like)
    target = Path(path)
    _refuse_folder(target)
    text = (_shipped() / f"{like}.toml").read_bytes()
    copies = {target: text}
    for name in _histories(text):
        copies[target.parent / name] = (_shipped() / name).read_bytes()
    if target.name in _histories(text):
        raise InputError("is the name of the history that the run file reads", "another name", file=str(path))
    missing = [place for place, content in copies.items() if place == target or not _stands(place, content)]
    for place in missing:
        if os.path.lexists(place):
            raise InputError("already exists, and is not overwritten", "another name or folder", file=str(place))
    for place in reversed(missing):  # the run file last: it never stands there without its histories
        _write_new(place, copies[place])
    return missing


def _shipped() -> Traversable:
    return files("tracer") / "scenarios"


def _histories(text: bytes) -> list[str]:
    tables = tomllib.loads(text.decode("utf-8"))
    return [series["file"] for series in tables.get("series", {}).values() if "file" in series]


def _refuse_folder(target: Path) -> None:
    if not target.parent.is_dir():
        raise InputError("no such folder", "an existing one", file=str(target.parent))
    if target.is_dir():
        raise InputError("is a folder", "the name of a file to write", file=str(target))


def _stands(place: Path, content: bytes) -> bool:
    try:
        return place.is_file() and place.read_bytes() == content
    except OSError:
        return False


def _write_new(place: Path, content: bytes) -> None:
    try:
        with open(place, "xb") as stream:
            stream.write(content)
    except FileExistsError:
        raise InputError("already exists, and is not overwritten", "another name or folder", file=str(place)) from None
    except OSError as error:
        raise InputError(
            f"cannot be written: {error.strerror}", "a folder that may be written", file=str(place)
        ) from None
