"""What any source must obey (``gnssmon/sources/source.py``), as one checker for all of them."""

from __future__ import annotations

import math
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import AbstractContextManager

from gnssmon.chunks import Chunk
from gnssmon.sources.source import WAIT_S, Source

Making = Callable[[], AbstractContextManager[tuple[Source, bytes]]]
"""An open source and the bytes that it is to give."""

PATIENCE_S = 10.0


def check_source(make: Making) -> None:
    """Run everything that any source must obey."""
    _gives_its_bytes(make)
    _closes_at_any_time(make)


def _gives_its_bytes(make: Making) -> None:
    with make() as (source, expected):
        assert source.kind in ("log", "live", "simulated")
        assert source.label
        chunks: list[Chunk] = []
        size = 0
        for chunk in _bounded(source.chunks()):
            chunks.append(chunk)
            size += len(chunk.data)
            assert chunk.arrivals is None or chunk.arrivals.offset[0] == 0
            if size >= len(expected):
                break
        source.close()

        data = b"".join(chunk.data for chunk in chunks)
        assert data[: len(expected)] == expected
        stamps = [chunk.received_s for chunk in chunks]
        if source.kind == "live":
            assert all(abs(stamp - time.time()) < PATIENCE_S for stamp in stamps)
        known = [stamp for stamp in stamps if not math.isnan(stamp)]
        assert known == sorted(known)


def _closes_at_any_time(make: Making) -> None:
    with make() as (source, _):
        source.close()
        source.close()
    with make() as (source, _):
        running = source.chunks()
        next(running, None)
        closer = threading.Timer(0.02, source.close)
        closer.start()
        began = time.monotonic()
        for _chunk in _bounded(running):
            pass
        assert time.monotonic() - began < 4 * WAIT_S
        closer.join()
        source.close()
        assert source.state == "ended"


def _bounded(chunks: Iterator[Chunk]) -> Iterator[Chunk]:
    """Fail rather than hang."""
    began = time.monotonic()
    for chunk in chunks:
        assert time.monotonic() - began < PATIENCE_S
        yield chunk
