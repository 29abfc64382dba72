"""Cutting a log by time: exact to the epoch, whatever the blocks, with the hash of the whole."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.chunks import Chunk
from gnssmon.errors import ConfigurationError
from gnssmon.replay.between import Between
from gnssmon.sources.log_file import LogFile
from gnssmon.sources.source import Source
from gnssmon.utc import parse_instant
from tests.sources.sentences import burst, stream

DATA = b"\r\nstarting up\r\n" + stream(30)


class Blocks(Source):
    """Given bytes in blocks of a size."""

    kind = "log"

    def __init__(self, data: bytes, size: int, *, first_s: float | None = None) -> None:
        super().__init__("blocks")
        self._data, self._size, self._first_s = data, size, first_s

    def chunks(self) -> Iterator[Chunk]:
        for at in range(0, len(self._data), self._size):
            piece = self._data[at : at + self._size]
            yield Chunk(piece) if self._first_s is None else Chunk(piece, self._first_s + at)
        self.sha256 = hashlib.sha256(self._data).hexdigest()


def cut(data: bytes, size: int = 1000, **span: object) -> tuple[bytes, Between]:
    between = Between(Blocks(data, size), **span)  # type: ignore[arg-type]
    return b"".join(chunk.data for chunk in between.chunks()), between


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 30), st.integers(0, 30), st.integers(1, 3000))
def test_exact_to_the_epoch(first: int, last: int, size: int) -> None:
    """From 10:00:first up to, without, 10:00:last: those bursts and no byte else, for any size of blocks."""
    first, last = min(first, 29), max(first, last)

    data, between = cut(
        DATA, size, from_=parse_instant(f"10:00:{first:02d}"), to=parse_instant(f"2031-05-04T10:00:{last:02d}Z")
    )

    assert data == b"".join(burst(second) for second in range(first, min(last, 30)))
    assert between.sha256 == hashlib.sha256(DATA).hexdigest()


@settings(max_examples=30, deadline=None)
@given(st.integers(1, 40), st.integers(1, 3000))
def test_for_counts_from_the_first_epoch(seconds: int, size: int) -> None:
    """So many seconds of the log's own time, with what stood before its first epoch."""
    data, _ = cut(DATA, size, for_s=float(seconds))

    assert data == DATA[: len(DATA) - len(stream(30)) + len(stream(min(seconds, 30)))]


def test_without_limits_nothing_is_left_out() -> None:
    """A span that is open on both sides is the log itself."""
    assert cut(DATA, 7)[0] == DATA


def test_for_and_from_together() -> None:
    """``--for`` counts from ``--from`` on."""
    data, _ = cut(DATA, from_=parse_instant("10:00:10"), for_s=5.0)

    assert data == b"".join(burst(second) for second in range(10, 15))


def test_date_before_it_is_told() -> None:
    """A dated start at the log's first epoch holds that epoch, though its date comes only in its second sentence,
    and each sentence in a chunk of its own."""
    gga, rest = stream(3).split(b"\r\n", 1)
    pieces = [gga + b"\r\n", rest]

    class Two(Blocks):
        def chunks(self) -> Iterator[Chunk]:
            yield from map(Chunk, pieces)

    between = Between(Two(b"", 1), from_=parse_instant("2031-05-04T10:00:00Z"))

    assert b"".join(chunk.data for chunk in between.chunks()) == stream(3)


@pytest.mark.parametrize(
    ("instant", "words"),
    [
        ("11:30", r"no epoch from --from on: it runs from 2031-05-04T10:00:00\.000Z to 2031-05-04T10:00:29\.000Z"),
        ("2031-05-05T10:00", "no epoch from --from on"),
    ],
)
def test_a_span_outside_the_log(instant: str, words: str) -> None:
    """A start behind the log's end is wrong usage, and the answer says what the log holds."""
    with pytest.raises(ConfigurationError, match=words):
        cut(DATA, from_=parse_instant(instant))


def test_a_log_without_any_time() -> None:
    """A log without a single time cannot be cut by it."""
    with pytest.raises(ConfigurationError, match="no sentence with a time"):
        cut(b"nothing here\r\n" * 10, from_=parse_instant("10:00"))


def test_arrival_times_stay_with_their_bytes() -> None:
    """Pieces of a recording are cut with their times: each byte that passes came when it came before."""
    between = Between(Blocks(DATA, 100, first_s=5000.0), from_=parse_instant("10:00:07"), for_s=3.0)
    begin = DATA.index(burst(7))

    for chunk in between.chunks():
        at = DATA.index(chunk.data, begin)
        assert chunk.received_s == 5000.0 + at // 100 * 100
        begin = at


def test_live_sources_pass_at_once() -> None:
    """Of a live source nothing is held back, not even half a line, and silence passes."""

    class Live(Blocks):
        kind = "live"

        def chunks(self) -> Iterator[Chunk]:
            yield from (Chunk(b"$GPG", 1.0), Chunk(b"", 2.0), Chunk(b"GA,", 3.0))

    between = Between(Live(b"", 1), for_s=1.0)

    assert [(c.data, c.received_s) for c in between.chunks()] == [(b"$GPG", 1.0), (b"", 2.0), (b"GA,", 3.0)]


def test_closing_reaches_the_source(tmp_path: Path) -> None:
    """Closing the part closes the whole."""
    path = tmp_path / "log"
    path.write_bytes(DATA)
    log = LogFile(path, block_bytes=100)
    between = Between(log, for_s=3600.0)
    running = between.chunks()
    next(running)

    between.close()

    assert list(running) == []
    assert log.state == between.state == "ended"
