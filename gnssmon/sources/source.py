"""Source: where bytes come from, and what any source must obey.

``chunks`` may be iterated once. It ends when the bytes have come to their natural end (end of a log, of a pipe, the
peer said goodbye). It raises ``SourceError`` when they ended before their time: a log that is cut off inside a
compressed block, a device that was unplugged. Everything that could be read has been yielded before.

A *live* source stamps each chunk with the host's time of arrival, read once, and yields ``Chunk(b"", now)`` once a
second while nothing comes: silence is data too. A *log* knows no arrival times unless a recording's table gives them.

``close`` may be called at any time, from any thread, as often as one likes; a running iteration then ends within
``WAIT_S`` and lets go of the port, socket or file.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Iterator
from typing import Literal

from gnssmon.chunks import Chunk
from gnssmon.clocks import Clock

Kind = Literal["log", "live", "simulated"]

SILENCE_S = 1.0
"""A live source that hears nothing says so this often."""

WAIT_S = 0.2
"""Longest wait inside one read: how soon ``close`` is noticed."""

MOST_BYTES = 65536
"""Most bytes of one live read: 0.7 s at 921 600 baud, and the largest UDP datagram fits."""


class Source(ABC):
    """One stream of a receiver's bytes."""

    kind: Kind

    def __init__(self, label: str) -> None:
        self.label = label
        """As the user named it; untrusted."""
        self.baud: int | None = None
        """Rate of the serial line; None where there is none, or where it means nothing."""
        self.size: int | None = None
        """Bytes of the log as stored; None for a stream."""
        self.sha256: str | None = None
        """Of the log's bytes as stored, once read to the end; hex."""
        self.consumed = 0
        """Bytes taken so far, as stored: with ``size`` the share that was read."""
        self.state = "reading"
        """For people: ``reading``, ``ended``, ``lost 3 s ago: unplugged, trying again``."""
        self.doubts: tuple[str, ...] = ()
        """What is wrong with the evidence though it could be read: one line each, untrusted."""
        self._closing = False

    @abstractmethod
    def chunks(self) -> Iterator[Chunk]:
        """The bytes, in order; see the module's words for how it ends."""

    def close(self) -> None:
        """Stop reading and let go of what is held."""
        self._closing = True


class LiveSource(Source):
    """Bytes that come when they like."""

    kind: Kind = "live"

    def __init__(self, label: str, clock: Clock) -> None:
        super().__init__(label)
        self._clock = clock
        self._running = False

    def chunks(self) -> Iterator[Chunk]:
        self._running = True
        try:
            heard = self._clock.steady()
            while not self._closing:
                data = self._receive(WAIT_S)
                if data is None:
                    break
                if data:
                    self.consumed += len(data)
                elif self._clock.steady() - heard < SILENCE_S:
                    continue
                heard = self._clock.steady()
                yield Chunk(data, self._clock.now())
        finally:
            self._running = False
            self.state = "ended"
            self._release()

    def close(self) -> None:
        super().close()
        if not self._running:
            self._release()

    @abstractmethod
    def _receive(self, wait_s: float) -> bytes | None:
        """What has come, at most ``MOST_BYTES``; ``b""`` when nothing did for ``wait_s``; None at the natural end.

        Raises SourceError when the source is lost.
        """

    @abstractmethod
    def _release(self) -> None:
        """Close what was opened; called more than once."""
