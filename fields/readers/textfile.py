"""A text file as lines and a hash, with every way a file can be unreadable told in one line."""

from __future__ import annotations

import hashlib
import stat
from dataclasses import dataclass
from pathlib import Path

from fields.errors import InputError

_SNIFFED = 65536  # enough to tell a binary file of any size before it is read whole
_HISTORY = "a CSV file or a published index text file"


@dataclass(frozen=True)
class TextFile:
    """Lines of a file (line 1 first, no line ends), its name as the user wrote it, SHA-256 of its bytes."""

    lines: list[str]
    file: str
    sha256: str


def read_text(path: str | Path, file: str, key: str, wanted: str = "") -> TextFile:
    """Read a UTF-8 text file whole.

    Parameters
    ----------
    path : path
    file : str
        Its name as the user wrote it.
    key : str
        The key under which the user gave that name.
    wanted : str, optional
        What it should be, for the error lines; a history by default.

    Raises
    ------
    InputError
        When the file is missing, no file, unreadable, empty or no text.
    """
    data = _bytes(Path(path), file, key, wanted or _HISTORY)
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as fault:
        line = data.count(b"\n", 0, fault.start) + 1
        raise InputError("not UTF-8 text", "save it as UTF-8", file=file, key=f"line {line}") from None
    if not text.strip():
        raise InputError("empty file", wanted or "a header and rows of time and value", file=file)
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")
    return TextFile(lines, file, hashlib.sha256(data).hexdigest())


def _bytes(path: Path, file: str, key: str, wanted: str) -> bytes:
    try:
        mode = path.stat().st_mode
        if stat.S_ISDIR(mode):
            raise InputError("a directory", "the name of a text file", key=key, value=file)
        if not stat.S_ISREG(mode):
            raise InputError("not a regular file", "the name of a text file", key=key, value=file)
        with path.open("rb") as stream:
            head = stream.read(_SNIFFED)
            _refuse_binary(head, file, wanted)
            data = head + stream.read()
    except FileNotFoundError:
        raise InputError("no such file", "a path relative to the run file", key=key, value=file) from None
    except PermissionError:
        raise InputError("may not be read", "read permission on it", key=key, value=file) from None
    except (OSError, ValueError) as fault:
        if isinstance(fault, InputError):
            raise
        reason = getattr(fault, "strerror", None) or str(fault)
        raise InputError(f"cannot be read ({reason})", "the name of a text file", key=key, value=file) from None
    _refuse_binary(data, file, wanted)
    return data


def _refuse_binary(data: bytes, file: str, wanted: str) -> None:
    if data.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise InputError("UTF-16 text", "save it as UTF-8", file=file)
    if b"\0" in data:
        raise InputError("binary, not text", wanted, file=file)
