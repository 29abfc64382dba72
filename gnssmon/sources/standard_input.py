"""Standard input and named pipes.

Two very different things come through a pipe: a receiver's bytes as they arrive (``socat … | gnssmon watch -``), and
a log poured in (``zcat day.gz | gnssmon check -``), whose time of arrival here says nothing of the receiver. They are
told apart by speed: what ends, or brings more than ``POURED_BYTES``, within ``DECIDE_S`` of its first byte is faster
than any receiver's line and is read as a log, without arrival times. Redirected files (``< day.nmea``) are logs.
"""

from __future__ import annotations

import math
import os
import select
import stat
import sys
from collections.abc import Generator, Iterator

from gnssmon.chunks import Chunk
from gnssmon.clocks import Clock
from gnssmon.errors import SourceError
from gnssmon.sources.log_file import BLOCK_BYTES
from gnssmon.sources.source import MOST_BYTES, SILENCE_S, WAIT_S, Kind, Source

DECIDE_S = 0.5
POURED_BYTES = 65536
"""In half a second 46 080 bytes come over a line of 921 600 baud, the fastest in use."""


class Pipe(Source):
    """Bytes from an open file descriptor that is no terminal line and cannot seek."""

    kind: Kind = "live"

    def __init__(self, label: str, clock: Clock, *, descriptor: int, keep_open: bool = False) -> None:
        super().__init__(label)
        self._clock = clock
        self._descriptor = descriptor
        self._keep_open = keep_open
        self._running = False
        if stat.S_ISREG(os.fstat(descriptor).st_mode):
            self.kind = "log"
            self.size = os.fstat(descriptor).st_size

    def chunks(self) -> Iterator[Chunk]:
        self._running = True
        try:
            waiting = [] if self.kind == "log" else (yield from self._first())
            if self.kind == "log":
                yield from self._poured([chunk.data for chunk in waiting])
            else:
                yield from waiting
                yield from self._live()
        finally:
            self._running = False
            self.state = "ended"
            self._release()

    def close(self) -> None:
        super().close()
        if not self._running:
            self._release()

    def _first(self) -> Generator[Chunk, None, list[Chunk]]:
        """Wait for the first bytes, decide by their speed what is coming, and return them."""
        waiting: list[Chunk] = []
        decide_at = math.inf
        heard = self._clock.steady()
        while not self._closing and self._clock.steady() < decide_at:
            data = self._read(WAIT_S)
            if data is None:
                self.kind = "log"
                break
            if data:
                waiting.append(Chunk(data, self._clock.now()))
                decide_at = min(decide_at, self._clock.steady() + DECIDE_S)
                if sum(len(chunk.data) for chunk in waiting) >= POURED_BYTES:
                    self.kind = "log"
                    break
            elif not waiting and self._clock.steady() - heard >= SILENCE_S:
                heard = self._clock.steady()
                yield Chunk(b"", self._clock.now())
        return waiting

    def _live(self) -> Iterator[Chunk]:
        heard = self._clock.steady()
        while not self._closing and (data := self._read(WAIT_S)) is not None:
            if data or self._clock.steady() - heard >= SILENCE_S:
                heard = self._clock.steady()
                yield Chunk(data, self._clock.now())

    def _poured(self, waiting: list[bytes]) -> Iterator[Chunk]:
        """Large blocks; what has come is handed on when nothing more does for a moment."""
        size = sum(map(len, waiting))
        while not self._closing:
            data = self._read(WAIT_S)
            if data:
                waiting.append(data)
                size += len(data)
            if waiting and (not data or size >= BLOCK_BYTES):
                yield Chunk(b"".join(waiting))
                waiting, size = [], 0
            if data is None:
                return

    def _read(self, wait_s: float) -> bytes | None:
        """What has come; ``b""`` when nothing did for ``wait_s``; None at the end."""
        try:
            # Windows cannot wait for a pipe: there the read blocks, and silence is not told.
            if os.name == "posix" and not select.select([self._descriptor], [], [], wait_s)[0]:
                return b""
            data = os.read(self._descriptor, MOST_BYTES)
        except (OSError, ValueError) as error:
            if self._closing:
                return None
            raise SourceError(f"reading '{self.label}' failed: {error}") from error
        self.consumed += len(data)
        return data or None

    def _release(self) -> None:
        if self._descriptor >= 0 and not self._keep_open:
            os.close(self._descriptor)
        self._descriptor = -1


def standard_input(clock: Clock) -> Pipe:
    """The bytes piped into this program. Raises SourceError when there are none to come: a terminal, a closed input."""
    try:
        descriptor = sys.stdin.fileno()
        on_terminal = os.isatty(descriptor)
    except (AttributeError, OSError, ValueError) as error:
        raise SourceError("standard input is closed; give a file, a port or an address instead of '-'") from error
    if on_terminal:
        raise SourceError("'-' reads what is piped in, but standard input is the keyboard; try 'gnssmon ports'")
    return Pipe("-", clock, descriptor=descriptor, keep_open=True)


def named_pipe(path: str, clock: Clock) -> Pipe:
    """A FIFO in the file system. Raises SourceError when it cannot be opened."""
    try:
        # Without O_NONBLOCK this would wait, deaf to signals in a thread, until someone writes.
        descriptor = os.open(path, os.O_RDONLY | os.O_NONBLOCK)
    except OSError as error:
        raise SourceError(f"'{path}' cannot be opened: {error.strerror or error}") from error
    return Pipe(path, clock, descriptor=descriptor)
