"""What all live sources share: stamps, silence, the end."""

from __future__ import annotations

from collections.abc import Iterator

import pytest

from gnssmon.chunks import Chunk
from gnssmon.clocks import ManualClock
from gnssmon.errors import SourceError
from gnssmon.sources.source import WAIT_S, LiveSource


class Scripted(LiveSource):
    """Gives what its script says: bytes, a pause in seconds, an error, or the end."""

    def __init__(self, clock: ManualClock, script: list[bytes | float | SourceError]) -> None:
        super().__init__("scripted", clock)
        self._script = iter(script)
        self._pause_s = 0.0
        self.released = 0

    def _receive(self, wait_s: float) -> bytes | None:
        if self._pause_s > 0.0:
            slept = min(wait_s, self._pause_s)
            self._pause_s -= slept
            self._clock.sleep(slept)
            return b""
        step = next(self._script, None)
        if isinstance(step, float):
            self._pause_s = step
            return b""
        if isinstance(step, SourceError):
            raise step
        return step

    def _release(self) -> None:
        self.released += 1


def run(script: list[bytes | float | SourceError]) -> list[tuple[float, bytes]]:
    clock = ManualClock(0.0)
    return [(round(chunk.received_s, 3), chunk.data) for chunk in Scripted(clock, script).chunks()]


def test_silence_is_told_once_a_second() -> None:
    """Nothing for 3.5 s gives three empty chunks, a second apart (to one wait); short pauses give none."""
    told = run([b"a", 0.9, b"b", 3.5, b"c"])

    assert [data for _, data in told] == [b"a", b"b", b"", b"", b"", b"c"]
    assert told[0][0] == 0.0
    assert told[1][0] == 0.9
    assert [t - told[1][0] for t, data in told if not data] == pytest.approx([1.0, 2.0, 3.0], abs=3 * WAIT_S)
    assert told[-1][0] == 4.4


def test_a_wall_clock_that_is_set_does_not_disturb_the_waiting() -> None:
    """A host clock set back by a year changes stamps from then on, and no wait."""
    clock = ManualClock(4e7)
    clock.at(1.5, lambda: clock.set(1000.0))

    told = [chunk.received_s for chunk in Scripted(clock, [b"a", 3.7, b"b"]).chunks()]

    assert told[0] == 4e7
    assert told[-1] == pytest.approx(1000.0 + 2.2, abs=0.01)
    assert len(told) == 5


def test_an_error_comes_behind_the_bytes_and_releases() -> None:
    """A loss ends the iteration with SourceError, and what was held is let go."""
    clock = ManualClock()
    source = Scripted(clock, [b"a", SourceError("gone")])

    def drained() -> Iterator[Chunk]:
        yield from source.chunks()

    chunks = drained()
    assert next(chunks).data == b"a"
    with pytest.raises(SourceError, match="gone"):
        next(chunks)
    assert source.released == 1
    assert source.state == "ended"


def test_closing_before_reading_releases() -> None:
    """A source that was never read lets go at once, and may be closed again."""
    source = Scripted(ManualClock(), [b"a"])

    source.close()
    source.close()

    assert source.released >= 1
    assert list(source.chunks()) == []
