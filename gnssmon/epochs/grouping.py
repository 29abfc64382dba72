"""Which epoch each sentence belongs to, by the order of the sentences alone.

Strategy. Sentences with a time of day (GGA, GNS, RMC, GLL, GST, GBS, GRS, ZDA) drive; all others belong to the epoch
that is open when they come, those before the first time to the first epoch. Neighbours with the same time are taken
together as a run, and one short loop over the runs does what cannot be done in columns: remembering.

- A run whose time is that of the open epoch joins it; a run with the time of the epoch before is late and joins that
  one; any other time opens a new epoch. So an epoch is complete once the second next has opened.
- "The same time" allows for a tolerance below 20 ms and a quarter of the shortest period seen so far: receivers round
  the times of one epoch differently.
- ZDA tells when it was sent rather than when the fix was taken (real logs have it 10 ms before and 30 ms behind its
  epoch), so it may stand a quarter of the period away, and gives way as soon as a position tells the time.
- An epoch that stays open for ``MOST_SENTENCES`` (a receiver without a clock, or with one that stands still) is cut
  there and goes on under a new number, so that what is held stays bounded.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.utc import DAY_MS

Ints = npt.NDArray[np.int64]

MOST_SENTENCES = 2048
"""Some thirty times a full burst of a four-system, three-band receiver."""

TOLERANCE_MS = 20
"""Times of one epoch differ by less; the period of the fastest stream, 50 Hz, is no less."""

CLOCK_TOLERANCE_MS = 250
"""The most that a ZDA may stand away from its epoch."""

LEAP_SECOND_MS = 1000


@dataclass(frozen=True, slots=True)
class Grouped:
    """Epoch numbers of the sentences of one block, counted from the start of the stream. Arrays of shape (n,)."""

    own: Ints
    """The epoch a sentence belongs to."""
    current: Ints
    """The epoch that was open when it came; differs from ``own`` for a late sentence. Never decreases."""


@dataclass(slots=True)
class _Mark:
    """The time of an epoch, as far as it is known."""

    time_ms: int
    from_clock: bool
    """Only a ZDA has told it so far."""


class Grouping:
    """Numbers the epochs of a stream."""

    def __init__(self) -> None:
        self.number = 0
        """Of the open epoch; it exists from the start, before any time is known."""
        self.continued: set[int] = set()
        """Epochs that only go on with one that was cut."""
        self._opened = -1  # sequence of the open epoch's first sentence; -1 before it has come
        self._open: _Mark | None = None
        self._before: _Mark | None = None
        self._shortest_ms: int | None = None
        self._tolerance_ms = float(TOLERANCE_MS)
        self._clock_tolerance_ms = float(TOLERANCE_MS)

    @property
    def first_open(self) -> int:
        """Epochs below this number are complete."""
        return max(self.number - 1, 0)

    def assign(self, sequence: int, time_ms: Ints, from_clock: npt.NDArray[np.bool_]) -> Grouped:
        """Number the next sentences of the stream.

        ``sequence`` is that of the first; ``time_ms`` (n,) is the time of day stated, -1 none; ``from_clock`` (n,)
        tells the ZDA sentences.
        """
        if self._opened < 0:
            self._opened = sequence
        timed = np.flatnonzero(time_ms >= 0)
        time, clock = time_ms[timed], from_clock[timed]
        if (regular := self._regular(sequence, len(time_ms), timed, time, clock)) is not None:
            return regular
        changes = np.ones(len(timed), dtype=bool)
        changes[1:] = (time[1:] != time[:-1]) | (clock[1:] != clock[:-1])
        first = np.flatnonzero(changes)
        base = self.number
        cuts: list[int] = []  # where a new number begins, as sequences
        late: list[tuple[int, int, int]] = []  # timed sentences from, to, and the epoch they join
        place = (timed + sequence).tolist()
        bounds = [*first.tolist(), len(timed)]
        runs = zip(bounds[:-1], bounds[1:], time[first].tolist(), clock[first].tolist(), strict=True)
        for start, stop, at_ms, is_clock in runs:
            while start < stop:
                self._cut_before(place[start], cuts)
                if self._joins_open(at_ms, is_clock):
                    start = stop
                elif self._is_late(at_ms, is_clock):
                    taken = start
                    while taken < stop and place[taken] <= self._opened + MOST_SENTENCES:
                        taken += 1
                    late.append((start, taken, self.number - 1))
                    start = taken
                else:
                    self._open_new(place[start], at_ms, is_clock)
                    cuts.append(place[start])
                    start = stop
        self._cut_before(sequence + len(time_ms), cuts)
        step = np.zeros(len(time_ms), dtype=np.int64)
        step[np.array(cuts, dtype=np.int64) - sequence] = 1
        current = base + np.cumsum(step)
        own = current
        if late:
            own = current.copy()
            for start, stop, number in late:
                own[timed[start:stop]] = number
        return Grouped(own, current)

    def _regular(
        self, sequence: int, count: int, timed: Ints, time: Ints, clock: npt.NDArray[np.bool_]
    ) -> Grouped | None:
        """The same for a block in which nothing has to be remembered, as nearly all blocks of a log are; else None.

        Every new time is later than the last one by at least a tolerance and no ZDA brings one: then each opens an
        epoch, none is late, and no epoch is long enough to be cut.
        """
        if self._open is None or self._open.from_clock or not len(timed):
            return None
        if self._before is not None and self._before.time_ms >= self._open.time_ms:
            return None
        step_ms = np.diff(time, prepend=self._open.time_ms)
        opens = np.flatnonzero(step_ms)
        if not len(opens) or clock[opens].any() or int(step_ms[opens].min()) < TOLERANCE_MS:
            return None
        place = timed[opens] + sequence
        if int(np.diff(place, prepend=self._opened, append=sequence + count).max()) >= MOST_SENTENCES:
            return None
        before_ms = int(time[opens[-2]]) if len(opens) > 1 else self._open.time_ms
        # The period's tolerances only ever shrink with it, and every step is beyond the widest of them.
        shortest_ms = int(step_ms[opens].min())
        self._before, self._open = _Mark(before_ms, False), _Mark(before_ms + shortest_ms, False)
        self._learn_period()
        self._open = _Mark(int(time[opens[-1]]), False)
        step = np.zeros(count, dtype=np.int64)
        step[timed[opens]] = 1
        current = self.number + np.cumsum(step)
        self.number += len(opens)
        self._opened = int(place[-1])
        return Grouped(current, current)

    def close(self) -> None:
        """Close all epochs; whatever comes next begins a new one."""
        self.number += 1
        self._opened, self._open, self._before = -1, None, None

    def check(self) -> None:
        """Assert what must hold between any two calls."""
        assert 0 <= self.first_open <= self.number
        assert self._open is not None or self._before is None
        assert self._shortest_ms is None or self._shortest_ms > 0

    def _joins_open(self, at_ms: int, is_clock: bool) -> bool:
        if self._open is None:
            self._open = _Mark(at_ms, is_clock)
            return True
        if not self._same(self._open, at_ms, is_clock):
            return False
        if self._open.from_clock and not is_clock:
            self._open = _Mark(at_ms, False)
            self._learn_period()
        return True

    def _is_late(self, at_ms: int, is_clock: bool) -> bool:
        return self._before is not None and self._same(self._before, at_ms, is_clock)

    def _open_new(self, place: int, at_ms: int, is_clock: bool) -> None:
        self._before = self._open
        self._open = _Mark(at_ms, is_clock)
        self.number += 1
        self._opened = place
        self._learn_period()

    def _cut_before(self, place: int, cuts: list[int]) -> None:
        # A sentence at ``place`` is about to be taken in; all up to it have been.
        while self._opened + MOST_SENTENCES < place:
            self._cut(cuts)

    def _cut(self, cuts: list[int]) -> None:
        self._opened += MOST_SENTENCES
        self.number += 1
        self._before = None
        self.continued.add(self.number)
        cuts.append(self._opened)

    def _same(self, mark: _Mark, at_ms: int, is_clock: bool) -> bool:
        loose = mark.from_clock or is_clock
        return apart_ms(mark.time_ms, at_ms) < (self._clock_tolerance_ms if loose else self._tolerance_ms)

    def _learn_period(self) -> None:
        if self._before is None or self._open is None or self._before.from_clock or self._open.from_clock:
            return
        period_ms = self._open.time_ms - self._before.time_ms
        if period_ms > 0 and (self._shortest_ms is None or period_ms < self._shortest_ms):
            self._shortest_ms = period_ms
            self._tolerance_ms = min(TOLERANCE_MS, period_ms / 4)
            self._clock_tolerance_ms = min(CLOCK_TOLERANCE_MS, period_ms / 4)


def apart_ms(one_ms: int, other_ms: int) -> int:
    """Return how far two times of day are apart on the clock's face; the day has one second more for 23:59:60."""
    apart = abs(one_ms - other_ms)
    if apart <= DAY_MS // 2:
        return apart
    day_ms = DAY_MS + LEAP_SECOND_MS if max(one_ms, other_ms) >= DAY_MS else DAY_MS
    return abs(day_ms - apart)
