"""Holding on to a source that is lost: on a clock moved by hand, and on real terminals and sockets."""

from __future__ import annotations

import os
import socket
import threading
import time
import tty
from collections.abc import Callable, Iterator
from itertools import pairwise
from pathlib import Path

import pytest

from gnssmon.chunks import Chunk
from gnssmon.clocks import ManualClock, SystemClock
from gnssmon.errors import SourceError
from gnssmon.sources import hold_source
from gnssmon.sources.address import Address
from gnssmon.sources.finding import Port
from gnssmon.sources.reconnecting import LONGEST_WAIT_S, Reconnecting
from gnssmon.sources.same_device import SameDevice
from gnssmon.sources.source import Source
from tests.sources.sentences import stream


class Once(Source):
    """Gives its chunks, one a second, and then ends or fails."""

    kind = "live"

    def __init__(self, clock: ManualClock, pieces: list[bytes], error: str | None = None) -> None:
        super().__init__("receiver")
        self._clock, self._pieces, self._error = clock, pieces, error

    def chunks(self) -> Iterator[Chunk]:
        for piece in self._pieces:
            self._clock.sleep(1.0)
            self.consumed += len(piece)
            yield Chunk(piece, self._clock.now())
        if self._error is not None:
            raise SourceError(self._error)


def opener(clock: ManualClock, script: list[Source | SourceError]) -> tuple[Callable[[], Source], list[float]]:
    """An opener that gives what the script says, one each call; and the times of the calls."""
    steps = iter(script)
    calls: list[float] = []

    def reopen() -> Source:
        calls.append(clock.steady())
        step = next(steps, SourceError("nothing more"))
        if isinstance(step, SourceError):
            raise step
        return step

    return reopen, calls


def test_bytes_of_both_lives_and_silence_between() -> None:
    """What comes after the return follows what came before, with a gap that is told once a second."""
    clock = ManualClock(0.0)
    script = [Once(clock, [b"a", b"b"], "unplugged"), *[SourceError("not there")] * 3, Once(clock, [b"c"])]
    reopen, calls = opener(clock, script)
    source = Reconnecting(reopen, clock, give_up_s=60.0)
    states = []

    chunks = []

    def read() -> None:
        for chunk in source.chunks():
            chunks.append(chunk)
            states.append(source.state)

    with pytest.raises(SourceError, match="given up"):
        read()

    data = [chunk.data for chunk in chunks]
    assert b"".join(data) == b"abc"
    lost_at, back_at = data.index(b"b"), data.index(b"c")
    stamps = [chunk.received_s for chunk in chunks]
    assert stamps == sorted(stamps)
    # A second, to one wait, and the second that the invented receiver takes for its first bytes.
    assert max(b - a for a, b in pairwise(stamps)) <= 1.0 + 0.2 + 1.0
    # Said at once, and kept up to date.
    assert states[lost_at + 1].startswith("lost 0 s ago: unplugged, trying again")
    assert "not there" in states[back_at - 1]
    assert states[back_at] == "reading"
    assert source.losses == 2
    assert source.consumed == 3
    # Waits double: 0.5, 1, 2, 4 s after the loss at 2 s.
    assert calls[1:5] == pytest.approx([2.5, 3.5, 5.5, 9.5], abs=0.01)


def test_waits_grow_to_a_limit_and_begin_anew() -> None:
    """Attempts come at most ten seconds apart; a connection that held for a while begins with short waits again."""
    clock = ManualClock(0.0)
    script = [Once(clock, [b"a"]), *[SourceError("no")] * 8, Once(clock, [b"b"] * 20), Once(clock, [b"c"])]
    reopen, calls = opener(clock, script)
    source = Reconnecting(reopen, clock, give_up_s=100.0)

    with pytest.raises(SourceError):
        list(source.chunks())

    waits = [b - a for a, b in pairwise(calls[1:])]
    assert max(waits[:7]) == pytest.approx(LONGEST_WAIT_S)
    returned = calls[9]
    assert calls[10] - returned == pytest.approx(20.0 + 0.5)


def test_first_opening_fails_at_once() -> None:
    """A source that was never there is an error, not something to wait for."""
    clock = ManualClock()
    reopen, _ = opener(clock, [SourceError("no such port")])

    with pytest.raises(SourceError, match="no such port"):
        Reconnecting(reopen, clock)


def test_closing_while_lost_ends_the_wait() -> None:
    """``close`` ends the iteration also in the middle of a long wait."""
    clock = ManualClock(0.0)
    reopen, _ = opener(clock, [Once(clock, [b"a"]), *[SourceError("no")] * 100])
    source = Reconnecting(reopen, clock)
    clock.at(33.3, source.close)

    list(source.chunks())

    assert clock.steady() == pytest.approx(33.3, abs=0.5)
    assert source.state == "ended"


def test_device_is_known_under_another_name() -> None:
    """A USB device that comes back as another port is found by its identity; a stranger on its old name is not it."""
    ours, stranger = Port("/dev/ttyUSB0", "", "1546:01A8 77"), Port("/dev/ttyUSB0", "", "0403:6001 A1")
    moved = Port("/dev/ttyUSB3", "", "1546:01A8 77")
    plugged = [[ours], [], [stranger], [stranger, moved]]
    seen: list[str] = []

    class Noting(SameDevice):
        def __call__(self) -> None:  # type: ignore[override]
            seen.append(self._device())

    device = Noting(
        Address("/dev/ttyUSB0", "serial", "/dev/ttyUSB0", 9600), ManualClock(), ports=lambda: plugged.pop(0)
    )

    device()
    for _ in range(2):
        with pytest.raises(SourceError, match="not plugged in"):
            device()
    device()

    assert seen == ["/dev/ttyUSB0", "/dev/ttyUSB3"]


class Reading:
    """A source read in a thread of its own, as a session does."""

    def __init__(self, source: Source) -> None:
        self.source = source
        self.data = b""
        self.thread = threading.Thread(target=self._read)
        self.thread.start()

    def _read(self) -> None:
        for chunk in self.source.chunks():
            self.data += chunk.data

    def until(self, true: Callable[[], bool], meanwhile: Callable[[], object] = lambda: None) -> float:
        """Wait until something holds; returns the seconds that it took."""
        began = time.monotonic()
        while not true():
            assert time.monotonic() - began < 8.0, (self.source.state, self.data)
            meanwhile()
            time.sleep(0.02)
        return time.monotonic() - began

    def close(self) -> None:
        self.source.close()
        self.thread.join(5.0)
        assert not self.thread.is_alive()


def terminal() -> tuple[int, int, str]:
    near, far = os.openpty()
    tty.setraw(far)
    return near, far, os.ttyname(far)


def test_terminal_hung_up_and_back(tmp_path: Path) -> None:
    """A terminal whose other end goes is told as lost within 2 s, and read on when it is there again.

    The port is a link, as udev makes them, that leads to a new terminal after the loss.
    """
    link = tmp_path / "receiver"
    near, far, name = terminal()
    link.symlink_to(name)
    reading = Reading(hold_source(f"{link}@9600", clock=SystemClock()))
    os.write(near, b"before\r\n")
    reading.until(lambda: b"before\r\n" in reading.data)
    os.close(near)
    os.close(far)

    took_s = reading.until(lambda: reading.source.state.startswith("lost"))
    near, far, name = terminal()
    link.unlink()
    link.symlink_to(name)
    # Opening a port drops what waited there: say it until it is heard.
    reading.until(lambda: b"after\r\n" in reading.data, lambda: os.write(near, b"after\r\n"))
    state = reading.source.state
    reading.close()
    os.close(near)
    os.close(far)

    assert took_s < 2.0
    assert state == "reading"


def test_network_peer_gone_and_back() -> None:
    """A server that is stopped and started again: lost within 2 s, then read on."""
    with socket.create_server(("127.0.0.1", 0)) as server:
        where = server.getsockname()
        reading = Reading(hold_source(f"tcp://127.0.0.1:{where[1]}", clock=SystemClock()))
        peer, _ = server.accept()
        peer.sendall(b"before")
        reading.until(lambda: reading.data == b"before")
        peer.close()
    took_s = reading.until(lambda: reading.source.state.startswith("lost"))
    with socket.create_server(where) as server:
        server.settimeout(8.0)
        peer, _ = server.accept()
        with peer:
            peer.sendall(b"after")
            reading.until(lambda: reading.data == b"beforeafter")
            reading.close()

    assert took_s < 2.0


def test_a_rate_that_turns_to_garbage_is_found_again() -> None:
    """Sentences, then nothing but noise, then sentences again: told within 2 s of the noise, and read on.

    On a pseudo-terminal every rate reads the same bytes, so the search ends at the first rate that it tries.
    """
    near, far, name = terminal()
    reading = Reading(hold_source(f"{name}@9600", clock=SystemClock()))
    os.write(near, stream(2))
    reading.until(lambda: len(reading.data) == len(stream(2)))
    noise = bytes(range(128, 256))

    took_s = reading.until(lambda: "nothing readable" in reading.source.state, lambda: os.write(near, noise))
    before = len(reading.data)
    reading.until(
        lambda: b"$GNGGA" in reading.data[before:] and reading.source.state == "reading",
        lambda: os.write(near, stream(1)),
    )
    reading.close()
    os.close(near)
    os.close(far)

    assert took_s < 2.0
