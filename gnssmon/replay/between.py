"""A part of a log by its own time: ``--from``, ``--to`` and ``--for``, exact to the epoch."""

from __future__ import annotations

from collections.abc import Iterator

from gnssmon import utc
from gnssmon.chunks import Chunk
from gnssmon.errors import ConfigurationError
from gnssmon.replay.epoch_starts import EpochStart, EpochStarts
from gnssmon.replay.tape import Tape
from gnssmon.sources.log_file import BLOCK_BYTES
from gnssmon.sources.source import Source
from gnssmon.utc import Instant


class Between(Source):
    """The epochs of another source from one instant up to, and without, another.

    Without ``from_`` the stream's first bytes belong to it, whatever they are. ``for_s`` counts from the first epoch
    that passes; it is left to the host's clock (``session.run``) while the source is a live one. A log is read to its
    end all the same, so that its hash is that of the whole evidence.
    """

    def __init__(
        self, source: Source, *, from_: Instant | None = None, to: Instant | None = None, for_s: float | None = None
    ) -> None:
        self.source = source
        super().__init__(source.label)
        self.kind = source.kind
        self.baud, self.size = source.baud, source.size
        self._from, self._to, self._for_s = from_, to, for_s
        self._starts = EpochStarts()
        self._first: EpochStart | None = None
        self._passed: EpochStart | None = None
        self._over = False

    @property
    def state(self) -> str:
        """That of the source itself."""
        return self.source.state

    @state.setter
    def state(self, state: str) -> None:
        """The source tells its own state."""

    def chunks(self) -> Iterator[Chunk]:
        tape = Tape()
        held: list[EpochStart] = []
        try:
            for chunk in self.source.chunks():
                self._mirror()
                if self._over:
                    continue
                if self.kind == "live":
                    # Nobody cuts the present, and half a line must not wait for its other half.
                    yield chunk
                    continue
                tape.push(chunk)
                held += self._starts.feed(chunk.data)
                if self._undated and tape.end - tape.start < BLOCK_BYTES:
                    continue
                yield from self._cut(tape, held, self._starts.certain)
                held.clear()
                if self._over and self.kind != "log":
                    return
            if not self._over and not self._closing:
                held += self._starts.finish()
                yield from self._cut(tape, held, tape.end)
        finally:
            self._mirror()
            self.source.close()
        if self._from is not None and self._passed is None and not self._closing:
            raise ConfigurationError(self._nothing_there())

    def close(self) -> None:
        super().close()
        self.source.close()

    def _cut(self, tape: Tape, starts: list[EpochStart], certain: int) -> Iterator[Chunk]:
        for start in starts:
            if self._over:
                return
            self._first = self._first or start
            if self._passed is None and self._reached(self._from, start):
                self._passed = start
                if self._from is not None:
                    tape.drop(start.offset)
            if self._passed is not None and self._ends(start):
                yield from tape.take(start.offset)
                self._over = True
        if self._over:
            tape.drop(tape.end)
        elif self._passed is not None or self._from is None:
            yield from tape.take(certain)
        else:
            tape.drop(certain)

    def _reached(self, instant: Instant | None, start: EpochStart) -> bool:
        assert self._first is not None
        if instant is None:
            return True
        at_ms = instant.on_axis(self._first.axis_ms, self._starts.utc_offset_ms)
        return at_ms is not None and start.axis_ms >= at_ms

    def _ends(self, start: EpochStart) -> bool:
        assert self._passed is not None
        if self._for_s is not None and self.kind != "live":
            passed_s = (start.axis_ms - self._passed.axis_ms) / 1000.0
            if passed_s >= self._for_s:
                return True
        return self._to is not None and self._reached(self._to, start)

    @property
    def _undated(self) -> bool:
        """A dated instant cannot be placed before the stream has told its date."""
        dated = (self._from is not None and self._from.dated) or (self._to is not None and self._to.dated)
        return dated and self._starts.utc_offset_ms is None

    def _mirror(self) -> None:
        self.kind = self.source.kind
        self.sha256, self.consumed, self.doubts = self.source.sha256, self.source.consumed, self.source.doubts
        self.baud = self.source.baud

    def _nothing_there(self) -> str:
        if self._first is None:
            return f"'{self.label}' holds no sentence with a time: leave --from and --to away"
        offset_ms, last_ms = self._starts.utc_offset_ms, self._starts.last_axis_ms
        if offset_ms is None:
            first, last = utc.time_of_day(self._first.axis_ms), utc.time_of_day(last_ms or 0)
            undated = ", without a date" if self._from is not None and self._from.dated else ""
        else:
            first, last = utc.iso(self._first.axis_ms + offset_ms), utc.iso((last_ms or 0) + offset_ms)
            undated = ""
        return f"'{self.label}' has no epoch from --from on: it runs from {first} to {last}{undated}"
