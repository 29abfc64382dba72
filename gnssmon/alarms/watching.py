"""Alarms over a stream: the quantities of short windows, on a fixed grid of whole seconds of the time axis.

Strategy. Values over windows are computed for a whole batch of seconds at once. Only where a value is beyond a limit,
or an alarm is not quiet, are the rules stepped second by second. The grid is that of the epochs' own time, so that
the way a stream was cut can never change an answer; ``silence`` moves it on while nothing comes.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from gnssmon.alarms.rules import AlarmRule
from gnssmon.alarms.states import AlarmEvent, AlarmStates
from gnssmon.epochs.batch import EpochBatch
from gnssmon.quantities import Estimate
from gnssmon.statistics.instants import Sliding
from gnssmon.statistics.subject import Site

SECOND_MS = 1000
LONGEST_GAP_S = 7200
"""A gap in the time axis is stepped through second by second up to this; a clock that jumps by years is not."""


class Watch:
    """Every rule of a run, and what it has raised so far."""

    def __init__(self, rules: tuple[AlarmRule, ...], site: Site) -> None:
        self.states = AlarmStates(rules)
        self._rules = rules
        self._windows = [Sliding(rule.quantity, rule.over_s, site) for rule in rules]
        self._next_ms: int | None = None
        """The next second to look at."""
        self._ready_ms: int | None = None
        """No window is full before this: shares of a beginning would be alarms about nothing."""
        self._busy = False
        """Some alarm is not quiet."""

    def update(self, batch: EpochBatch, *, utc_offset_ms: int | None) -> list[AlarmEvent]:
        """Take in closed epochs; returns the events raised or cleared with them."""
        if not len(batch) or not self._rules:
            return []
        for window in self._windows:
            window.update(batch)
        if self._next_ms is None:
            first_ms = int(batch.axis_ms[0])
            self._next_ms = -(-first_ms // SECOND_MS) * SECOND_MS
            self._ready_ms = first_ms
        return self._until(int(batch.axis_ms.max()), utc_offset_ms)

    def silence(self, axis_ms: int, *, utc_offset_ms: int | None) -> list[AlarmEvent]:
        """Nothing has come up to this time of the axis."""
        return [] if self._next_ms is None else self._until(axis_ms, utc_offset_ms)

    @property
    def events(self) -> tuple[AlarmEvent, ...]:
        """All events so far, bounded."""
        return self.states.events

    def _until(self, last_ms: int, utc_offset_ms: int | None) -> list[AlarmEvent]:
        assert self._next_ms is not None
        assert self._ready_ms is not None
        begin_ms = max(self._next_ms, last_ms - LONGEST_GAP_S * SECOND_MS // SECOND_MS * SECOND_MS)
        begin_ms = -(-begin_ms // SECOND_MS) * SECOND_MS
        grid_ms = np.arange(begin_ms, last_ms + 1, SECOND_MS, dtype=np.int64)
        if not len(grid_ms):
            return []
        self._next_ms = int(grid_ms[-1]) + SECOND_MS
        values = np.array([window.at(grid_ms) for window in self._windows])
        for row, rule in enumerate(self._rules):
            values[row, grid_ms < self._ready_ms + rule.over_s * SECOND_MS] = np.nan
        beyond = np.zeros(len(grid_ms), dtype=bool)
        for rule, row in zip(self._rules, values, strict=True):
            beyond |= _beyond(rule, row)
        changed: list[AlarmEvent] = []
        i = 0
        while i < len(grid_ms):
            if not self._busy and not beyond[i]:
                ahead = np.flatnonzero(beyond[i:])
                if not len(ahead):
                    break
                i += int(ahead[0])
            changed += self._step(values[:, i], int(grid_ms[i]), utc_offset_ms)
            i += 1
        return changed

    def _step(self, values: npt.NDArray[np.float64], at_ms: int, utc_offset_ms: int | None) -> list[AlarmEvent]:
        by_window: dict[float, dict[str, Estimate]] = {}
        for rule, value in zip(self._rules, values.tolist(), strict=True):
            by_window.setdefault(rule.over_s, {})[rule.quantity] = Estimate(value if value == value else None)
        changed = self.states.evaluate(lambda window_s: by_window[window_s], at_ms, utc_offset_ms=utc_offset_ms)
        self._busy = any(self.states.phase(rule) != "quiet" for rule in self._rules)
        return changed


def _beyond(rule: AlarmRule, values: npt.NDArray[np.float64]) -> npt.NDArray[np.bool_]:
    with np.errstate(invalid="ignore"):
        past: npt.NDArray[np.bool_] = values < rule.limit if rule.below is not None else values > rule.limit
    return past
