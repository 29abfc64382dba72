"""Following a log that grows."""

from __future__ import annotations

import gzip
import math
from collections.abc import Callable
from pathlib import Path

import pytest

from gnssmon.chunks import Chunk
from gnssmon.clocks import ManualClock
from gnssmon.errors import SourceError
from gnssmon.sources.following import Following
from gnssmon.sources.source import WAIT_S
from tests.sources.sentences import burst, stream


def follow(path: Path, plan: dict[float, Callable[[], object]], until_s: float) -> list[Chunk]:
    clock = ManualClock(0.0)
    source = Following(path, clock)
    for at, action in plan.items():
        clock.at(at, action)
    clock.at(until_s, source.close)
    return list(source.chunks())


def test_what_is_added_is_read_and_stamped(tmp_path: Path) -> None:
    """Old bytes have no time of arrival, new ones that of their appearance; silence in between is told."""
    path = tmp_path / "log"
    path.write_bytes(stream(3))

    def add() -> None:
        with path.open("ab") as log:
            log.write(burst(3))

    chunks = follow(path, {5.0: add}, 9.0)

    assert b"".join(chunk.data for chunk in chunks) == stream(4)
    assert math.isnan(chunks[0].received_s)
    assert chunks[0].data == stream(3)
    (new,) = [chunk for chunk in chunks[1:] if chunk.data]
    assert 5.0 <= new.received_s <= 5.0 + 2 * WAIT_S
    assert sum(not chunk.data for chunk in chunks) in (6, 7)


@pytest.mark.parametrize("how", ["replaced", "cut back"])
def test_a_log_that_begins_anew(tmp_path: Path, how: str) -> None:
    """A new file under the name, or the same one emptied, is read from its start; the old one to its end."""
    path = tmp_path / "log"
    path.write_bytes(stream(3))

    def renew() -> None:
        if how == "replaced":
            path.rename(tmp_path / "log.1")
        path.write_bytes(burst(9))

    chunks = follow(path, {2.0: renew}, 4.0)

    assert b"".join(chunk.data for chunk in chunks) == stream(3) + burst(9)


def test_a_log_that_is_gone_is_waited_for(tmp_path: Path) -> None:
    """Between the removal of the old log and the first byte of the new one nothing is lost and nothing raised."""
    path = tmp_path / "log"
    path.write_bytes(stream(1))

    chunks = follow(path, {1.0: path.unlink, 3.0: lambda: path.write_bytes(burst(1))}, 5.0)

    assert b"".join(chunk.data for chunk in chunks) == stream(2)


def test_a_compressed_log_does_not_grow(tmp_path: Path) -> None:
    """A compressed log cannot be followed, and the answer says what can be done with it."""
    path = tmp_path / "log.gz"
    path.write_bytes(gzip.compress(stream(1)))

    with pytest.raises(SourceError, match="gnssmon replay"):
        Following(path, ManualClock())
