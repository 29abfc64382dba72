"""Chunks: joining and cutting lose no byte and no time of arrival."""

from __future__ import annotations

import math

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.chunks import Chunk, joined

PIECES = st.lists(st.tuples(st.binary(max_size=6), st.floats(0, 2e9)), min_size=1, max_size=12)


def parts(chunk: Chunk) -> list[tuple[bytes, float]]:
    """The pieces that a chunk was put together from."""
    if chunk.arrivals is None:
        return [(chunk.data, chunk.received_s)]
    ends = [*chunk.arrivals.offset.tolist()[1:], len(chunk.data)]
    starts = chunk.arrivals.offset.tolist()
    return [(chunk.data[a:b], t) for a, b, t in zip(starts, ends, chunk.arrivals.received_s.tolist(), strict=True)]


@settings(max_examples=200, deadline=None)
@given(PIECES)
def test_joining_keeps_every_piece(pieces: list[tuple[bytes, float]]) -> None:
    """The pieces of a joined chunk are those that went in, empty ones (silence) included."""
    chunk = joined([Chunk(data, received_s) for data, received_s in pieces])

    assert parts(chunk) == pieces
    assert chunk.received_s == pieces[-1][1]


@settings(max_examples=200, deadline=None)
@given(PIECES, PIECES, PIECES)
def test_joining_is_associative(a: list, b: list, c: list) -> None:
    """Joining joined chunks gives the same as joining all at once."""
    first, second, third = ([Chunk(*piece) for piece in group] for group in (a, b, c))

    assert parts(joined([joined(first), joined([*second, *third])])) == a + b + c


@settings(max_examples=300, deadline=None)
@given(PIECES, st.integers(0, 80))
def test_cutting_keeps_bytes_and_times(pieces: list[tuple[bytes, float]], at: int) -> None:
    """Each byte on either side of a cut came when it came before; both sides begin at their own offset 0."""
    whole = joined([Chunk(*piece) for piece in pieces])
    at = min(at, len(whole.data))
    times = [t for data, t in parts(whole) for _ in data]

    head, tail = whole.cut(at)

    assert head.data + tail.data == whole.data
    assert len(head.data) == at
    assert [t for data, t in parts(head) for _ in data] == times[:at]
    assert [t for data, t in parts(tail) for _ in data] == times[at:]
    assert tail.received_s == whole.received_s
    for side in (head, tail):
        assert side.arrivals is None or side.arrivals.offset[0] == 0


@settings(max_examples=100, deadline=None)
@given(PIECES)
def test_time_of_each_byte(pieces: list[tuple[bytes, float]]) -> None:
    """``Arrivals.at`` gives each byte the time of the piece it came with."""
    whole = joined([Chunk(b"first", 1.0), *[Chunk(*piece) for piece in pieces]])
    expected = [1.0] * 5 + [t for data, t in pieces for _ in data]

    assert whole.arrivals is not None
    assert whole.arrivals.at(np.arange(len(whole.data))).tolist() == expected


def test_a_log_without_times_stays_without() -> None:
    """Blocks of a log have no times, joined or not."""
    chunk = joined([Chunk(b"ab"), Chunk(b"cd")])

    assert (chunk.data, chunk.arrivals) == (b"abcd", None)
    assert math.isnan(chunk.received_s)
