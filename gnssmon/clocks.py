"""Clocks: the system's, a replay's, and one whose hands a test moves.

Two readings, because a computer's wall clock may be set while we run (a small board without a battery starts in the
past and jumps when the network comes up): ``now`` is for stamps, ``steady`` for "how long".
"""

from __future__ import annotations

import heapq
import math
import time
from collections.abc import Callable
from itertools import count
from typing import Protocol


class Clock(Protocol):
    """What may be asked of time."""

    def now(self) -> float:
        """Seconds since 1970-01-01 UTC. Steps when the host's clock is set."""

    def steady(self) -> float:
        """Seconds since some fixed moment. Never steps."""

    def sleep(self, seconds: float) -> None:
        """Return after ``seconds``; at once when that is not positive."""


class SystemClock:
    """The host's own clock."""

    def now(self) -> float:
        return time.time()

    def steady(self) -> float:
        return time.monotonic()

    def sleep(self, seconds: float) -> None:
        if seconds > 0.0:
            time.sleep(seconds)


class ReplayClock:
    """A log's time, driven by another clock: it has a rate and can jump.

    Before the first ``jump`` its time is unknown (NaN).
    """

    def __init__(self, clock: Clock, rate: float = 1.0) -> None:
        self._clock = clock
        self._rate = rate
        self._at_s = math.nan
        self._since = clock.steady()

    @property
    def rate(self) -> float:
        """Log seconds per second; 0 stands still, infinity does not wait at all."""
        return self._rate

    @rate.setter
    def rate(self, rate: float) -> None:
        if not rate >= 0.0:
            raise ValueError(f"a replay cannot run at the rate {rate}")
        # At an infinite rate time goes as far as the data does: ``jump`` moves it along.
        self._at_s, self._since = self.time_s(), self._clock.steady()
        self._rate = rate

    def jump(self, to_s: float) -> None:
        """Set the log's time."""
        self._at_s, self._since = to_s, self._clock.steady()

    def time_s(self) -> float:
        """The log's time now, seconds on the log's own axis."""
        passed = self._clock.steady() - self._since
        return self._at_s if math.isinf(self._rate) else self._at_s + passed * self._rate

    def wait_s(self, until_s: float) -> float:
        """Real seconds until the log's time is ``until_s``: 0 when it is past, infinity while the clock stands."""
        left = until_s - self.time_s()
        if math.isinf(self._rate) or not left > 0.0:
            return 0.0
        return left / self._rate if self._rate else math.inf


class ManualClock:
    """A clock that moves only when someone sleeps on it, and then at once; for tests and rehearsals.

    ``at(seconds, action)`` plans an action, which runs when a sleep crosses that steady time: a key press during a
    pause, a device unplugged after a minute.
    """

    def __init__(self, now_s: float = 1_700_000_000.0) -> None:
        self._start_s = now_s
        self._steady = 0.0
        self._step_s = 0.0
        self._planned: list[tuple[float, int, Callable[[], object]]] = []
        self._order = count()

    def now(self) -> float:
        return self._start_s + self._step_s + self._steady

    def steady(self) -> float:
        return self._steady

    def sleep(self, seconds: float) -> None:
        until = self._steady + max(0.0, seconds)
        while self._planned and self._planned[0][0] <= until:
            at, _, action = heapq.heappop(self._planned)
            self._steady = max(self._steady, at)
            action()
        self._steady = until

    def at(self, steady_s: float, action: Callable[[], object]) -> None:
        """Plan ``action`` for the steady time ``steady_s``."""
        heapq.heappush(self._planned, (steady_s, next(self._order), action))

    def set(self, now_s: float) -> None:
        """Set the wall clock, as an operator or a time server would; the steady time does not notice."""
        self._step_s = now_s - self._start_s - self._steady
