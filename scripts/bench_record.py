"""The record of a run of the benchmark, as JSON: machine, versions, date, all ratios with their spread.

The opponents are frozen. The record holds a digest of their sources; when they have changed, it is written only with a
word on what was changed, which stays in it.
"""

from __future__ import annotations

import hashlib
import json
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

HERE = Path(__file__).parent
OPPONENTS = (
    "bench_heyoka.py", "bench_mirror.py", "bench_numbalsoda.py", "bench_plain.py", "bench_polar.py", "bench_scipy.py",
    "bench_storm.py",
)  # fmt: skip
ABOUT = (
    "What scripts/bench found. Ratios are of neighbours in time, so that the machine's mood hits both: the median over "
    "the rounds, the least and the most. The opponents are frozen, so that a later ratio tells of the kernel: whoever "
    "changes one of the files named under frozen says so under changes."
)


def digest() -> str:
    """Of the opponents' sources."""
    sums = hashlib.sha256()
    for name in OPPONENTS:
        sums.update(name.encode() + b"\0" + (HERE / name).read_bytes())
    return sums.hexdigest()


def changes(path: Path, word: str) -> list[dict[str, str]]:
    """The lines on the opponents, with one for the present sources if they are new.

    Raises
    ------
    SystemExit
        When they are new and `word` is empty.
    """
    known = json.loads(path.read_text("utf-8"))["changes"] if path.exists() else []
    present = digest()
    if known and known[-1]["sha256"] == present:
        return list(known)
    said = word or ("" if known else "frozen")
    if not said:
        raise SystemExit(f"{path.name}: the opponents have changed since; say with --changed what was changed, and why")
    return [*known, {"date": today(), "sha256": present, "what": said}]


def today() -> str:
    return datetime.now(UTC).date().isoformat()


def write(path: Path, lines: list[dict[str, str]], found: dict[str, Any]) -> None:
    """Put the record in place of the one before."""
    record = {"about": ABOUT, "date": today(), "frozen": list(OPPONENTS), "changes": lines, **found}
    path.write_text(json.dumps(record, indent=1) + "\n", "utf-8")
