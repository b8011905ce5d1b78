"""Consecutive particles as spans: from one index up to, not including, another."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence

Span = tuple[int, int]


def joined(spans: Iterable[Span]) -> list[Span]:
    """Rising spans, those that touch made one."""
    found: list[Span] = []
    for first, stop in spans:
        if found and found[-1][1] == first:
            found[-1] = (found[-1][0], stop)
        else:
            found.append((first, stop))
    return found


def pieces(spans: Sequence[Span], size: int) -> Iterator[Span]:
    """The same particles in spans of at most `size`, cut at its multiples."""
    for begin, end in spans:
        for cut in range(begin // size * size, end, size):
            yield max(cut, begin), min(cut + size, end)
