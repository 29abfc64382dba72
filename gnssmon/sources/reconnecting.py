"""Reconnecting: any source that may return, held on to.

When the source is lost (unplugged, powered off, the peer gone, the rate changed under our hands) this says so at
once in ``state``, goes on yielding ``Chunk(b"", now)`` once a second, so that the gap is in the data, and opens it
again: soon at first, then at growing intervals. A USB device that comes back under another name is known by its
identity.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator

from gnssmon.chunks import Chunk
from gnssmon.clocks import Clock
from gnssmon.errors import SourceError
from gnssmon.sources.source import SILENCE_S, WAIT_S, Kind, Source

FIRST_WAIT_S, LONGEST_WAIT_S = 0.5, 10.0
"""Between two attempts: doubled from the first to the longest. A device is back within ten seconds of its plug."""

LASTING_S = 5.0
"""A connection that held so long was a good one: the next loss begins with short waits again."""


class Reconnecting(Source):
    """A live source that outlasts its losses."""

    kind: Kind = "live"

    def __init__(self, reopen: Callable[[], Source], clock: Clock, *, give_up_s: float | None = None) -> None:
        """``reopen`` opens the source, now and after each loss; what it raises now is raised here.

        ``give_up_s``: a loss that lasts so long is final and raised as SourceError; None: never.
        """
        self._reopen = reopen
        self._clock = clock
        self._give_up_s = give_up_s
        self._inner: Source | None = reopen()
        super().__init__(self._inner.label)
        self.baud = self._inner.baud
        self.losses = 0
        self._lost_at_s: float | None = None
        self._why = ""
        self._earlier = 0

    @property
    def state(self) -> str:
        """For people: ``reading``, ``ended``, ``lost 3 s ago: the device is gone, trying again``."""
        if self._lost_at_s is None:
            return self._state
        return f"lost {self._clock.steady() - self._lost_at_s:.0f} s ago: {self._why}, trying again"

    @state.setter
    def state(self, state: str) -> None:
        self._state = state

    def chunks(self) -> Iterator[Chunk]:
        wait_s = FIRST_WAIT_S
        try:
            while not self._closing:
                opened_s = self._clock.steady()
                yield from self._until_lost()
                if self._closing:
                    return
                if self._clock.steady() - opened_s >= LASTING_S:
                    wait_s = FIRST_WAIT_S
                while not self._closing and self._inner is None:
                    yield from self._silence(wait_s)
                    wait_s = min(2.0 * wait_s, LONGEST_WAIT_S)
                    self._try()
        finally:
            self._lost_at_s, self.state = None, "ended"
            if self._inner is not None:
                self._inner.close()

    def close(self) -> None:
        super().close()
        if (inner := self._inner) is not None:
            inner.close()

    def _until_lost(self) -> Iterator[Chunk]:
        inner = self._inner
        assert inner is not None
        try:
            for chunk in inner.chunks():
                self.consumed = self._earlier + inner.consumed
                yield chunk
            why = "the other end closed the connection"
        except SourceError as error:
            why = str(error)
        inner.close()
        self._earlier = self.consumed
        self._inner = None
        if not self._closing:
            self.losses += 1
            self._why, self._lost_at_s = why, self._clock.steady()

    def _silence(self, seconds: float) -> Iterator[Chunk]:
        """Wait, and say so once a second."""
        until = self._clock.steady() + seconds
        said = self._clock.steady()
        yield Chunk(b"", self._clock.now())
        while not self._closing and (left := until - self._clock.steady()) > 0.0:
            self._clock.sleep(min(WAIT_S, left))
            if self._clock.steady() - said >= SILENCE_S:
                said = self._clock.steady()
                yield Chunk(b"", self._clock.now())

    def _try(self) -> None:
        try:
            self._inner = self._reopen()
        except SourceError as error:
            self._why = str(error)
            lost_s = self._clock.steady() - (self._lost_at_s or 0.0)
            if self._give_up_s is not None and lost_s >= self._give_up_s:
                raise SourceError(f"{error} (given up {lost_s:.0f} s after it was lost)") from error
            return
        self.baud = self._inner.baud
        self._lost_at_s, self.state = None, "reading"
