"""Player: the chunks of a log, handed on at the pace of its own time.

The same bytes come in the same order as when the log is read in one go, cut where epochs start (a recording: where
its chunks arrived). What is due at once is handed on as one piece, so a fast replay costs no more than a check.

A jump forward lets everything up to there pass unpaced: whoever is fed knows all that came before. A jump backward
cannot unfeed anybody: the iteration ends with ``rewound`` set, and the next ``chunks()`` starts at the log's first
byte again, unpaced up to the target, for a new monitor.

    while True:
        session.run(player, monitor := Monitor(settings), (), clock, stop=stop, look=look)
        if not player.rewound:
            break

Controls may be called from any thread; they only set what the next look at the clock sees.
"""

from __future__ import annotations

import math
from collections import deque
from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.chunks import Arrivals, Chunk
from gnssmon.clocks import Clock, ReplayClock
from gnssmon.replay.epoch_starts import EpochStart, EpochStarts
from gnssmon.replay.tape import Tape
from gnssmon.sources.source import Kind, Source

SLOWEST = 0.1
"""Log seconds per second; infinity does not wait."""

LOOK_S = 0.05
"""How often a waiting player looks at its controls: below what a hand notices."""

LONGEST_WAIT_S = 86_400.0
"""A longer step of the log's time is no pause of the receiver: its date was set."""

REMEMBERED_EPOCHS = 10_000
"""Starts kept for stepping back; a minute of a 50 Hz log is 3000."""


@dataclass(frozen=True, slots=True)
class _Mark:
    """A place where the log may be held."""

    offset: int
    time_s: float
    """When its bytes are due, on the log's axis."""
    axis_ms: int | None
    """The epoch that starts here; None: only bytes that came later than those before."""


class Player(Source):
    """A log, or a simulated receiver, that plays."""

    def __init__(self, open_log: Callable[[], Source], clock: Clock, *, rate: float = 1.0) -> None:
        """``open_log`` opens the log anew for each pass; the first opening happens here and may raise SourceError."""
        self._open_log = open_log
        self._log = open_log()
        super().__init__(self._log.label)
        self.kind: Kind = self._log.kind
        self.size, self.baud = self._log.size, self._log.baud
        self._clock = clock
        self._rate = _checked(rate)
        self._time = ReplayClock(clock, self._rate)
        self._paused = False
        self._target_s: float | None = None
        self._rewind = False
        self._steps = 0
        self._stepping = False
        self._last_s = math.nan
        self._started: deque[int] = deque(maxlen=REMEMBERED_EPOCHS)
        self._passes = 0
        self.rewound = False
        """The iteration ended because of a jump backward: start again."""
        self.utc_offset_ms: int | None = None
        """Add to an ``axis_ms`` to get UTC since 1970; None while the log has told no date."""

    # What the log shows now

    @property
    def axis_ms(self) -> int | None:
        """Instant of the epoch last handed on; None before the first."""
        return self._started[-1] if self._started else None

    @property
    def paused(self) -> bool:
        """Whether time stands."""
        return self._paused

    @property
    def rate(self) -> float:
        """Log seconds per second while not paused."""
        return self._rate

    # Controls

    def set_rate(self, rate: float) -> None:
        """Play at ``rate`` (0.1 to infinity) from now on; a pause lasts on. Raises ValueError for other rates."""
        self._rate = _checked(rate)
        if not self._paused:
            self._time.rate = self._rate

    def pause(self) -> None:
        """Let time stand."""
        self._paused = True
        self._time.rate = 0.0

    def resume(self) -> None:
        """Let time run on at the rate set."""
        self._paused = False
        self._steps = 0
        self._time.rate = self._rate

    def jump(self, axis_ms: int) -> None:
        """Go to an instant on the log's axis: the last epoch handed on is then the last one not after it."""
        now_ms = self.axis_ms
        self._target_s = axis_ms / 1000.0
        if now_ms is not None and axis_ms < now_ms:
            self._rewind = True

    def step(self, epochs: int = 1) -> None:
        """Pause, and go some epochs on or (negative) back."""
        self.pause()
        if epochs >= 0:
            self._steps += epochs
        elif self._started:
            self.jump(self._started[max(epochs - 1, -len(self._started))])

    # The source

    def chunks(self) -> Iterator[Chunk]:
        if self._passes and not self.rewound:
            raise ValueError("a player is read once, and once more after each jump backward")
        if self._passes:
            self._log = self._open_log()
            self._started.clear()
            self._closing = False  # whoever read up to the jump has closed us
        self._passes += 1
        self.rewound = self._rewind = self._stepping = False
        self._steps, self._last_s = 0, math.nan
        self.state = "reading"
        try:
            yield from self._played()
        finally:
            self.state = "rewound" if self.rewound else "ended"
            self._log.close()

    def close(self) -> None:
        super().close()
        self._log.close()

    def _played(self) -> Iterator[Chunk]:
        tape, starts, schedule = Tape(), EpochStarts(), _Schedule()
        for chunk in self._log.chunks():
            if not chunk.data:
                yield from self._silence(chunk, tape, schedule)
                continue
            base = tape.end
            tape.push(chunk)
            marks = schedule.marks(chunk, base, starts.feed(chunk.data))
            self.utc_offset_ms, self.consumed = starts.utc_offset_ms, self._log.consumed
            yield from self._paced(tape, marks)
            if self._closing or self.rewound:
                return
            yield from tape.take(starts.certain)
        if self._closing or self.rewound:
            return
        yield from self._paced(tape, [_Mark(s.offset, s.axis_ms / 1000.0, s.axis_ms) for s in starts.finish()])
        if not self.rewound:
            yield from tape.take(tape.end)
        self.consumed, self.sha256, self.doubts = self._log.consumed, self._log.sha256, self._log.doubts

    def _silence(self, chunk: Chunk, tape: Tape, schedule: _Schedule) -> Iterator[Chunk]:
        """Each moment of a recorded silence at its time."""
        yield from tape.take(tape.end)
        times = [chunk.received_s] if chunk.arrivals is None else chunk.arrivals.received_s.tolist()
        for received_s in times:
            yield from self._paced(tape, schedule.moment(received_s, tape.end))
            if self._closing or self.rewound:
                return
            yield Chunk(b"", received_s)

    def _paced(self, tape: Tape, marks: list[_Mark]) -> Iterator[Chunk]:
        """Wait at each mark until it is due; what lies before it is handed on first."""
        for mark in marks:
            if not self._due(mark):
                yield from tape.take(mark.offset)
                while not self._due(mark):
                    self._clock.sleep(min(LOOK_S, self._time.wait_s(mark.time_s)))
            if self._closing or self._rewind:
                self.rewound = self._rewind
                return
            self._last_s = mark.time_s
            if mark.axis_ms is not None:
                self._started.append(mark.axis_ms)

    def _due(self, mark: _Mark) -> bool:
        """Whether the bytes at ``mark`` may pass now, or waiting makes no sense any more."""
        if self._closing or self._rewind:
            return True
        if self._target_s is not None:
            if mark.time_s <= self._target_s:
                return True
            self._time.jump(self._target_s)
            self._target_s = None
        elif not self._last_s <= mark.time_s <= self._last_s + LONGEST_WAIT_S:
            # The first mark, or the receiver's own time was set: nothing to wait for.
            self._time.jump(mark.time_s)
        if mark.axis_ms is not None:
            self._stepping = False
            if self._steps:
                self._steps -= 1
                self._stepping = True
        if self._stepping:
            self._time.jump(mark.time_s)
        return self._time.wait_s(mark.time_s) <= 0.0


class _Schedule:
    """When which bytes are due.

    Arrival times, where a recording has them, are laid on the log's axis by the difference at its first epoch; the
    receiver's delay is then seen as it was, the host's clock error is not.
    """

    def __init__(self) -> None:
        self._offset_s: float | None = None

    def marks(self, chunk: Chunk, base: int, starts: list[EpochStart]) -> list[_Mark]:
        """The marks that ``chunk``, whose first byte has the stream offset ``base``, adds, by offset."""
        if math.isnan(chunk.received_s):
            return [_Mark(s.offset, s.axis_ms / 1000.0, s.axis_ms) for s in starts]
        parts = chunk.arrivals or Arrivals(np.zeros(1, dtype=np.int64), np.array([chunk.received_s]))
        if self._offset_s is None and starts:
            self._offset_s = starts[0].axis_ms / 1000.0 - float(parts.at(_offsets(starts[:1], base))[0])
        if self._offset_s is None:
            return []
        came_s = parts.at(_offsets(starts, base)) + self._offset_s
        marks = [_Mark(s.offset, t, s.axis_ms) for s, t in zip(starts, came_s.tolist(), strict=True)]
        times = (parts.received_s + self._offset_s).tolist()
        marks += [_Mark(base + o, t, None) for o, t in zip(parts.offset.tolist(), times, strict=True)]
        marks.sort(key=lambda mark: (mark.offset, mark.axis_ms is None))
        return marks

    def moment(self, received_s: float, offset: int) -> list[_Mark]:
        """The mark of a silence; none before the first epoch, or where it has no time."""
        if self._offset_s is None or math.isnan(received_s):
            return []
        return [_Mark(offset, received_s + self._offset_s, None)]


def _offsets(starts: list[EpochStart], base: int) -> npt.NDArray[np.int64]:
    # A line that began in the chunk before came, for our purpose, with the first bytes of this one.
    return np.array([max(0, s.offset - base) for s in starts], dtype=np.int64)


def _checked(rate: float) -> float:
    if not rate >= SLOWEST:
        raise ValueError(f"a log cannot be played at {rate:g} times its speed; 0.1 is the slowest")
    return rate
