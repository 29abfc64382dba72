"""Pipes: what pours in is a log, what trickles is live."""

from __future__ import annotations

import math
import os
import threading
import time
from pathlib import Path

import pytest

from gnssmon.chunks import Chunk
from gnssmon.clocks import SystemClock
from gnssmon.errors import SourceError
from gnssmon.sources import open_source
from gnssmon.sources.standard_input import DECIDE_S, POURED_BYTES, Pipe, standard_input
from tests.sources.sentences import stream

CLOCK = SystemClock()


def read(pieces: list[bytes], pause_s: float) -> tuple[list[Chunk], Pipe]:
    """Write pieces with pauses into a pipe and read it to its end."""
    reader, writer = os.pipe()

    def write() -> None:
        for piece in pieces:
            os.write(writer, piece)
            time.sleep(pause_s)
        os.close(writer)

    thread = threading.Thread(target=write)
    thread.start()
    source = Pipe("-", CLOCK, descriptor=reader)
    chunks = list(source.chunks())
    thread.join()
    return chunks, source


@pytest.mark.parametrize("size", [0, 10, POURED_BYTES - 1, POURED_BYTES, 5 * POURED_BYTES])
def test_what_pours_in_is_a_log(size: int) -> None:
    """A short log that ends at once, and a long one that comes faster than any receiver, have no arrival times."""
    data = (stream(1) * (size // 500 + 1))[:size]

    chunks, source = read([data], 0.0)

    assert source.kind == "log"
    assert b"".join(chunk.data for chunk in chunks) == data
    assert all(math.isnan(chunk.received_s) for chunk in chunks)


def test_what_trickles_is_live() -> None:
    """Bytes at a receiver's pace are live, each piece with its own time of arrival, the first ones too."""
    began = time.time()

    chunks, source = read([b"$A\r\n"] * 8, DECIDE_S / 6)

    assert source.kind == "live"
    assert b"".join(chunk.data for chunk in chunks) == b"$A\r\n" * 8
    stamps = [chunk.received_s for chunk in chunks]
    assert stamps == sorted(stamps)
    assert began <= stamps[0] < began + 0.3
    assert stamps[-1] - stamps[0] > DECIDE_S


def test_a_redirected_file_is_a_log(tmp_path: Path) -> None:
    """``< file`` is read as the file that it is."""
    path = tmp_path / "log"
    path.write_bytes(stream(3))
    descriptor = os.open(path, os.O_RDONLY)
    source = Pipe("-", CLOCK, descriptor=descriptor)

    assert (source.kind, source.size) == ("log", len(stream(3)))
    assert b"".join(chunk.data for chunk in source.chunks()) == stream(3)


def test_standard_input_that_cannot_be_read(monkeypatch: pytest.MonkeyPatch) -> None:
    """A keyboard and a closed input are told apart from a pipe before anything is read."""
    _near, far = os.openpty()
    with os.fdopen(far, "r") as keyboard:
        monkeypatch.setattr("sys.stdin", keyboard)
        with pytest.raises(SourceError, match="keyboard"):
            open_source("-", clock=CLOCK)
    os.close(_near)
    monkeypatch.setattr("sys.stdin", None)
    with pytest.raises(SourceError, match="closed"):
        standard_input(CLOCK)
