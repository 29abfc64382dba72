"""Assembler: decoded columns in, closed epochs out.

Strategy. Three steps, each in columns: number the epochs of a block's sentences (``grouping``), turn what they state
into rows (``statements``), and choose the rows that count (``building``), with their place in time (``dates``). Rows of
epochs that are still open wait for the next block. Nothing depends on how the stream was cut into blocks, or on when
they came.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from gnssmon.epochs.batch import EpochBatch
from gnssmon.epochs.building import Known, build
from gnssmon.epochs.dates import NOWHERE, Placed
from gnssmon.epochs.grouping import Grouping
from gnssmon.epochs.rows import Rows
from gnssmon.epochs.statements import CLOCK_RANK, LEADING, first_plain_number, stated_times, statements
from gnssmon.nmea.columns import Columns, Sentences, Table

UNKNOWN_BEFORE = Known(NOWHERE, np.zeros(len(LEADING), dtype=np.int64))

NO_EPOCHS = build({}, 0, 0, UNKNOWN_BEFORE, set(), None).batch
"""A batch without epochs."""


@dataclass(frozen=True, slots=True)
class Extent:
    """From where to where on the time axis a stream has come, its open epochs included; None: no time yet."""

    first: tuple[int, int] | None = None
    """Axis (ms) and UTC (ms since 1970, -1 unknown) of the first epoch with a time."""
    last: tuple[int, int] | None = None
    utc_offset_ms: int | None = None
    """Add to an axis time to get UTC, ms; None while no date is known. It changes only at a leap second and when a
    receiver's date is put right."""
    settled: bool = False
    """The first epoch is closed: what is said of it will not change."""

    def reaching(self, placed: Placed, closed: int) -> Extent:
        """Return the extent that takes in newly placed epochs, the first ``closed`` of which are closed."""
        timed = np.flatnonzero(placed.time_ms >= 0)
        if not len(timed):
            return self
        utc_ms, offset_ms = placed.utc_ms, self.utc_offset_ms
        dated = np.flatnonzero(placed.day >= 0)
        if len(dated):
            offset_ms = int(utc_ms[dated[-1]] - placed.axis_ms[dated[-1]])
        first, last = ((int(placed.axis_ms[row]), int(utc_ms[row])) for row in (timed[0], timed[-1]))
        return Extent(self.first if self.settled else first, last, offset_ms, self.settled or bool(timed[0] < closed))

    @property
    def first_utc_ms(self) -> int | None:
        """UTC of the first epoch, by the offset known since where it had no date of its own; None without any."""
        return self._utc(self.first)

    @property
    def last_utc_ms(self) -> int | None:
        return self._utc(self.last)

    def _utc(self, instant: tuple[int, int] | None) -> int | None:
        if instant is None:
            return None
        if instant[1] >= 0:
            return instant[1]
        return None if self.utc_offset_ms is None else instant[0] + self.utc_offset_ms


class Assembler:
    """Puts sentences of one instant together, for one stream from its start."""

    def __init__(self) -> None:
        self._grouping = Grouping()
        self._first = 0  # number of the first epoch not yet handed out
        self._held: dict[str, Rows] = {}
        self._known = UNKNOWN_BEFORE
        self._ambiguous_from: int | None = None
        self.opened = NO_EPOCHS
        """The epochs not handed out yet, at most two, as far as their sentences have come. Provisional."""
        self.extent = Extent()

    def feed(self, columns: Columns) -> EpochBatch:
        """Take in the next block and return the epochs that are complete with it, perhaps none."""
        rows = self._intake(columns)
        return self._close(rows, self._grouping.first_open) if rows else NO_EPOCHS

    def finish(self, columns: Columns | None = None) -> EpochBatch:
        """Take in the last block, if there is one, close what is open, and return it."""
        rows = self._intake(columns) if columns is not None else {}
        batch = self._close(rows, self._grouping.number + 1)
        self._grouping.close()
        self._first = self._grouping.number
        return batch

    def check(self) -> None:
        """Assert what must hold between any two calls."""
        self._grouping.check()
        assert self._grouping.first_open <= self._first <= self._grouping.number
        assert len(self.opened) <= 2
        assert all((rows.epoch >= self._first).all() for rows in self._held.values())

    def _intake(self, columns: Columns) -> dict[str, Rows]:
        parts: list[Table | Sentences] = [part for part in columns.tables.values() if len(part)]
        if len(columns.others):
            parts.append(columns.others)
        if not parts:
            return {}
        first = min(int(part.sequence[0]) for part in parts)
        count = max(int(part.sequence[-1]) for part in parts) - first + 1
        time_ms, rank = stated_times(columns, first, count)
        grouped = self._grouping.assign(first, time_ms, (time_ms >= 0) & (rank == CLOCK_RANK))
        if self._ambiguous_from is None:
            self._ambiguous_from = first_plain_number(columns, grouped, first)
        rows = statements(columns, grouped, first)
        timed = np.flatnonzero(time_ms >= 0)
        if len(timed):
            rows["time"] = Rows({"epoch": grouped.own[timed], "rank": rank[timed], "time_ms": time_ms[timed]})
        size = np.zeros(count)
        received_s = np.full(count, np.nan)
        for part in parts:
            size[part.sequence - first] = part.size
            received_s[part.sequence - first] = part.received_s
        rows["ledger"] = Rows({"epoch": grouped.own, "size": size, "received_s": received_s})
        return rows

    def _close(self, rows: dict[str, Rows], upto: int) -> EpochBatch:
        for group, earlier in self._held.items():
            rows[group] = earlier.followed_by(rows[group]) if group in rows else earlier
        if not rows:
            self.opened = NO_EPOCHS
            return NO_EPOCHS
        first, count = self._first, self._grouping.number + 1 - self._first
        built = build(rows, first, count, self._known, self._grouping.continued, self._ambiguous_from)
        closed = max(upto - first, 0)  # the first open one is new after ``finish``
        if closed:
            self._known = built.known(closed)
            self._first = upto
            self._grouping.continued -= {number for number in self._grouping.continued if number < upto}
        self._held = {group: kept for group, all_ in rows.items() if len(kept := all_.since(upto))}
        self.extent = self.extent.reaching(built.placed, closed)
        self.opened = built.batch.part(closed, count)
        return built.batch.part(0, closed)
