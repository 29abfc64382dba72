"""Tiles: whole numbers by minute and column, that add up to any window.

Strategy. A table of entries (minute, column) → numbers, kept sorted. A column is anything that can be counted apart: a
signal, a satellite at a level, a bin of a histogram; only what was seen takes room. Taking in samples adds entries, a
window is a slice of the table, merging two streams joins their tables and combines entries of equal key. Numbers are
whole, so that sums are exact and no cut of a stream can be seen in them. New entries wait in a heap until somebody asks
or the heap is large: a live epoch costs microseconds.

Bounded memory. Entries older than some ``age``, counted back from the latest minute seen, are joined to rows of
several minutes (``LADDER``); windows that begin inside such a row take all of it: that is the resolution given up.
Where even so the table would pass ``most`` entries, the ages are halved and the widest rows doubled, again and again.
Rows of one width lie wholly inside rows of the next, so the table depends on what was seen, not on when it was joined.
"""

from __future__ import annotations

from typing import NamedTuple, Self

import numpy as np
import numpy.typing as npt

Ints = npt.NDArray[np.int64]

LADDER = ((2880, 10), (14_400, 60))
"""Age and width in minutes: single minutes for two days, ten minutes for ten days, then hours."""
MOST_ENTRIES = 1_000_000
"""Of one table; 16 MB with one number per entry."""
MOST_WAITING = 8192
"""New entries that wait; a live stream of four systems brings some hundred a second."""
JOINING = 360
"""Minutes of new data after which old rows are joined although nobody asks."""
MOST_PRESSURE = 20
"""Halvings of the ages; a table that is still too large then is full of noise, and loses its oldest entries."""
STEP = 10
"""All ages and widths are multiples of this many minutes: what is old changes only so often."""
_COLUMN_BITS = 32
_COLUMN_MASK = (1 << _COLUMN_BITS) - 1


class Entries(NamedTuple):
    """A part of the table, by rising minute and column, each pair once. Nobody writes to the arrays."""

    minute: Ints
    """First minute of the row, shape (k,)."""
    column: Ints
    values: Ints
    """Shape (k, measures)."""


class Tiles:
    """``measures`` numbers for every minute and column, combined by ``combine`` (np.add, np.minimum or np.maximum)."""

    def __init__(
        self,
        measures: int = 1,
        *,
        combine: np.ufunc = np.add,
        ladder: tuple[tuple[int, int], ...] = LADDER,
        most: int = MOST_ENTRIES,
    ) -> None:
        self._measures, self._combine, self._ladder, self._most = measures, combine, ladder, most
        self._key: Ints = np.empty(0, dtype=np.int64)
        self._values: Ints = np.empty((0, measures), dtype=np.int64)
        self._used = 0
        self._waiting: list[tuple[Ints, Ints]] = []
        self._waiting_entries = 0
        self._latest: int | None = None
        self._joined_at: int | None = None
        """``_latest``, in whole steps, when old rows were last joined."""
        self._pressure = 0
        """How often the ages were halved."""

    def __len__(self) -> int:
        """Entries in the table."""
        self._settle()
        return self._used

    @property
    def latest(self) -> int | None:
        """Latest minute seen; None: nothing yet."""
        return self._latest

    def add(self, minute: Ints, column: npt.NDArray[np.integer], *values: npt.NDArray[np.generic]) -> None:
        """Take in samples: arrays of shape (n,), ``column`` from 0 to 2³² - 1, one array of whole numbers a measure.

        Samples of equal minute and column are combined. Without ``values`` each counts 1.
        """
        if not len(minute):
            return
        key = (np.asarray(minute, dtype=np.int64) << _COLUMN_BITS) | np.asarray(column, dtype=np.int64)
        table = np.ones((len(key), self._measures), dtype=np.int64)
        for measure, numbers in enumerate(values):
            table[:, measure] = numbers
        self._wait(key, table, int(np.max(minute)))

    def merge(self, other: Self) -> None:
        """Take in the entries of ``other``, which stays as it is."""
        for key, values in [(other._key[: other._used], other._values[: other._used]), *other._waiting]:
            if len(key):
                self._wait(key, values, other._latest if other._latest is not None else int(key[-1]) >> _COLUMN_BITS)
        if other._pressure > self._pressure:
            self._pressure, self._joined_at = other._pressure, None
        self._settle()

    def select(self, from_ms: int | None = None, to_ms: int | None = None) -> Entries:
        """The entries of the rows from the one that holds ``from_ms`` to the last that ends by ``to_ms``.

        None: open on that side. A stretch within one minute takes that minute.
        """
        self._settle()
        part = self._part(from_ms, to_ms)
        key = self._key[part]
        return Entries(key >> _COLUMN_BITS, key & _COLUMN_MASK, self._values[part])

    def total(self, from_ms: int | None = None, to_ms: int | None = None) -> tuple[Ints, Ints]:
        """Columns, rising and each once, and their numbers over the stretch of time, shapes (k,) and (k, measures)."""
        _, column, values = self.select(from_ms, to_ms)
        return combined(column, values, self._combine)

    def by_minute(self, from_ms: int | None = None, to_ms: int | None = None) -> tuple[Ints, Ints]:
        """Minutes, rising and each once, and their numbers over all columns, shapes (t,) and (t, measures)."""
        minute, _, values = self.select(from_ms, to_ms)
        return combined(minute, values, self._combine, rising=True)

    def check(self) -> None:
        """Say with an AssertionError where the table is not what it should be (for tests)."""
        key = self._key[: self._used]
        assert (np.diff(key) > 0).all(), "keys rise, each once"
        assert self._used <= self._most, "bounded"

    def _part(self, from_ms: int | None, to_ms: int | None) -> slice:
        key = self._key[: self._used]
        low, high = 0, self._used
        if from_ms is not None:
            low = int(np.searchsorted(key, self._row_of(np.array([from_ms // 60_000]))[0] << _COLUMN_BITS))
        if to_ms is not None:
            # Of a minute that the window ends in, a live stream has seen a part and a log perhaps all: it is left out.
            minute = to_ms // 60_000
            if from_ms is not None and minute <= from_ms // 60_000:
                minute = -(-to_ms // 60_000)
            high = int(np.searchsorted(key, minute << _COLUMN_BITS))
        return slice(low, max(low, high))

    def _row_of(self, minute: Ints) -> Ints:
        """First minute of the row that holds each minute."""
        row = minute
        if self._latest is None:
            return row
        for age, wide in self._rungs():
            begin = minute // wide * wide
            row = np.where(begin + wide <= self._latest - age, begin, row)
        return row

    def _rungs(self) -> list[tuple[int, int]]:
        """Ages and widths as they are now."""
        rungs = [((age >> self._pressure) // STEP * STEP, wide) for age, wide in self._ladder]
        age, wide = rungs[-1]
        return [*rungs[:-1], (age, wide << self._pressure)]

    def _wait(self, key: Ints, values: Ints, latest: int) -> None:
        self._waiting.append((key, values))
        self._waiting_entries += len(key)
        self._latest = latest if self._latest is None else max(self._latest, latest)
        if self._waiting_entries > MOST_WAITING:
            self._take_in()
            if self._joined_at is None or self._latest - self._joined_at >= JOINING or self._used > self._most:
                self._settle()

    def _settle(self) -> None:
        """Bring the table to the state that depends on nothing but what was seen."""
        self._take_in()
        if self._latest is None:
            return
        step = self._latest // STEP * STEP
        if step != self._joined_at:
            self._joined_at = step
            self._join_old()
        while self._used > self._most:
            if self._pressure == MOST_PRESSURE:
                kept = self._used - self._most
                self._replace(0, self._key[kept : self._used].copy(), self._values[kept : self._used].copy())
                break
            self._pressure += 1
            self._join_old()

    def _take_in(self) -> None:
        """Move what waits into the table."""
        if not self._waiting:
            return
        key = np.concatenate([key for key, _ in self._waiting])
        values = np.concatenate([values for _, values in self._waiting])
        self._waiting, self._waiting_entries = [], 0
        key, values = combined(key, values, self._combine)
        if self._latest is not None and key[0] >> _COLUMN_BITS < self._latest - self._rungs()[0][0]:
            self._joined_at = None  # What has just come is old enough to be joined at once.
        # Usually new entries lie behind the table but for its last minute; a receiver's clock may step back.
        begin = int(np.searchsorted(self._key[: self._used], key[0]))
        if begin < self._used:
            key = np.concatenate([self._key[begin : self._used], key])
            values = np.concatenate([self._values[begin : self._used], values])
            key, values = combined(key, values, self._combine)
        self._replace(begin, key, values)

    def _replace(self, begin: int, key: Ints, values: Ints) -> None:
        """Put entries in the place of all those from ``begin`` on."""
        end = begin + len(key)
        if end > len(self._key):
            roomier_key = np.empty(max(256, end + end // 4), dtype=np.int64)
            roomier_values = np.empty((len(roomier_key), self._measures), dtype=np.int64)
            roomier_key[:begin], roomier_values[:begin] = self._key[:begin], self._values[:begin]
            self._key, self._values = roomier_key, roomier_values
        self._key[begin:end] = key
        self._values[begin:end] = values
        self._used = end

    def _join_old(self) -> None:
        """Combine the entries of rows that have grown wider."""
        assert self._latest is not None
        youngest = self._latest - self._rungs()[0][0]
        end = int(np.searchsorted(self._key[: self._used], youngest << _COLUMN_BITS))
        key = self._key[:end]
        minute = key >> _COLUMN_BITS
        row = self._row_of(minute)
        if (row == minute).all():
            return
        key, values = combined((row << _COLUMN_BITS) | (key & _COLUMN_MASK), self._values[:end], self._combine)
        tail_key, tail_values = self._key[end : self._used].copy(), self._values[end : self._used].copy()
        self._replace(0, key, values)
        self._replace(len(key), tail_key, tail_values)


def combined(key: Ints, values: Ints, combine: np.ufunc = np.add, *, rising: bool = False) -> tuple[Ints, Ints]:
    """Keys, rising and each once, with the combined rows of ``values`` (k, m). ``rising``: the keys rise already."""
    if not rising and not (key[1:] >= key[:-1]).all():
        order = np.argsort(key, kind="stable")
        key, values = key[order], values[order]
    first = np.ones(len(key), dtype=bool)
    np.not_equal(key[1:], key[:-1], out=first[1:])
    if first.all():
        return key, values
    start = np.flatnonzero(first)
    result: Ints = combine.reduceat(values, start, axis=0)
    return key[start], result
