"""The one exception that bad input raises, and the one line it prints."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from difflib import get_close_matches
from typing import Any

PREFIX = "driftrose"


class InputError(ValueError):
    """Bad input from the user: what was given, what is wrong with it and what would be right.

    Parameters
    ----------
    problem : str
        What is wrong, in plain words.
    remedy : str, optional
        What would be right.
    key : str, optional
        The key of a run file, the name of an argument, or a place in a file ("line 12").
    value : object, optional
        The value as given; left out of the line when `key` is empty.
    file : str, optional
        The file in which it stands, as the user wrote its name.
    """

    def __init__(self, problem: str, remedy: str = "", *, key: str = "", value: Any = None, file: str = "") -> None:
        self.problem = problem
        self.remedy = remedy
        self.key = key
        self.value = value
        self.file = file
        super().__init__(self.line())

    def line(self) -> str:
        """The line that the command prints: ``driftrose: FILE: KEY = VALUE: problem; remedy``."""
        parts = [PREFIX]
        if self.file:
            parts.append(self.file)
        if self.key:
            parts.append(self.key if self.value is None else f"{self.key} = {shown(self.value)}")
        parts.append(self.problem + (f"; {self.remedy}" if self.remedy else ""))
        return visible(" ".join(": ".join(parts).split()))

    def __str__(self) -> str:
        return self.line()

    def placed(self, *, file: str = "", key: str = "", value: Any = None) -> InputError:
        """The same fault with the place filled in where it is still unknown."""
        return InputError(
            self.problem,
            self.remedy,
            key=self.key or key,
            value=self.value if self.key else value,
            file=self.file or file,
        )


def visible(text: str) -> str:
    """`text` with control characters and the like escaped, so that it cannot act on a terminal."""
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode() for c in text)


def shown(value: Any, limit: int = 60) -> str:
    """`value` as it stands in the error line: run-file notation, one line, cut to `limit` characters."""
    if isinstance(value, bool):
        text = str(value).lower()
    elif isinstance(value, str):
        text = f'"{value}"'
    elif isinstance(value, Mapping):
        text = "{ " + ", ".join(f"{key} = {shown(member, limit)}" for key, member in value.items()) + " }"
    elif isinstance(value, (list, tuple)):
        text = "[" + ", ".join(shown(member, limit) for member in value) + "]"
    else:
        text = str(value)
    text = " ".join(text.split())
    return text if len(text) <= limit else text[: limit - 3] + "..."


def nearest(word: str, known: Iterable[str]) -> str:
    """``did you mean X`` when one of `known` is close to `word`, else ``one of A, B, ...``."""
    names = [str(name) for name in known]
    close = get_close_matches(str(word), names, n=1, cutoff=0.6)
    return f"did you mean {close[0]}" if close else "one of " + ", ".join(names)
