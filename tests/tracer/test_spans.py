"""Spans: cutting loses nobody and joining undoes it."""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from tracer.spans import Span, joined, pieces

LENGTHS = st.lists(st.tuples(st.integers(1, 9), st.integers(1, 9)), max_size=6)


def apart(lengths: list[tuple[int, int]]) -> list[Span]:
    """Rising spans with a gap before each."""
    spans, at = [], 0
    for gap, length in lengths:
        spans.append((at + gap, at + gap + length))
        at = spans[-1][1]
    return spans


@given(LENGTHS, st.integers(1, 7))
def test_pieces_joined_are_the_spans(lengths: list[tuple[int, int]], size: int) -> None:
    spans = apart(lengths)
    cut = list(pieces(spans, size))
    assert joined(cut) == spans
    assert [i for a, b in cut for i in range(a, b)] == [i for a, b in spans for i in range(a, b)]
    assert all(b - a <= size and a // size == (b - 1) // size for a, b in cut)
