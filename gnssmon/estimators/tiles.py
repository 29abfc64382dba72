"""Tiles: one row of counts and sums per minute, which add up to any window.

Strategy. An update groups a batch's samples by minute with ``bincount`` and adds a row per minute; a window is the sum
of the rows that lie in it; merging two streams' tiles joins their rows. So the merge law holds by construction and a
24 h log costs no Python loop per epoch. Counts and sums are whole numbers, so that they are exact and do not depend on
how a stream was cut. The memory is bounded: past ``MOST_FINE`` minutes the older half is rolled up into ten-minute rows
(later into hours), and windows that begin inside such a row take all of it: that is the resolution given up.
"""

from __future__ import annotations

from typing import Self

import numpy as np
import numpy.typing as npt

from gnssmon.estimators.rows import Rows

Ints = npt.NDArray[np.int64]

MOST_FINE = 3000
"""Minutes kept one by one, two days; a live window is an hour, a log that is looked into closely seldom two days."""
COARSER = (10, 60)
"""Widths in minutes that older rows are rolled up to, one after the other."""


class Tiles:
    """Rows of ``width`` whole numbers, keyed by minute. ``grid`` minutes share a row from the start."""

    def __init__(self, width: int, *, grid: int = 1, kind: npt.DTypeLike = np.int32) -> None:
        self.width, self._grid, self._kind = width, grid, np.dtype(kind)
        self._rows = Rows({"minute": np.int64})
        self._values = np.empty((0, width), dtype=self._kind)

    def __len__(self) -> int:
        return len(self._rows)

    def add(self, minute: Ints, column: npt.NDArray[np.integer], weight: npt.NDArray[np.generic] | None = None) -> None:
        """Add 1 (or ``weight``) to ``column`` of each sample's minute; arrays of shape (n,), in stream order."""
        if not len(minute):
            return
        keys, row = grouped(minute // self._grid * self._grid)
        cell = row * self.width + column
        total = np.bincount(cell, weights=weight, minlength=len(keys) * self.width)
        self._join(keys, np.rint(total).astype(self._kind).reshape(len(keys), self.width))

    def merge(self, other: Self) -> None:
        """Take in the rows of ``other``, which stays as it is."""
        if len(other):
            self._join(other.minute, other._values[: len(other)])

    @property
    def minute(self) -> Ints:
        """First minute of each row, in stream order; one may stand in several rows."""
        return self._rows["minute"].view(np.int64)

    def within(self, from_ms: int | None, to_ms: int | None) -> tuple[Ints, Ints]:
        """Minutes in the stretch of time, rising and each once, and their rows, shapes (t,) and (t, width)."""
        inside = self._inside(from_ms, to_ms)
        keys, row = np.unique(self.minute[inside], return_inverse=True)
        values = self._values[: len(self)][inside].astype(np.int64)
        if len(keys) == len(values):
            return keys, values[np.argsort(row)]
        total = np.zeros((len(keys), self.width), dtype=np.int64)
        np.add.at(total, row, values)
        return keys, total

    def total(self, from_ms: int | None = None, to_ms: int | None = None) -> Ints:
        """Sum over the stretch of time, shape (width,)."""
        values = self._values[: len(self)]
        if from_ms is not None or to_ms is not None:
            values = values[self._inside(from_ms, to_ms)]
        summed: Ints = values.sum(axis=0, dtype=np.int64)
        return summed

    def _inside(self, from_ms: int | None, to_ms: int | None) -> npt.NDArray[np.bool_]:
        minute = self.minute
        inside = np.ones(len(minute), dtype=bool)
        if from_ms is not None:
            inside &= (minute + self._grid) * 60_000 > from_ms
        if to_ms is not None:
            inside &= minute * 60_000 < to_ms
        return inside

    def _join(self, keys: Ints, values: npt.NDArray[np.generic]) -> None:
        begin = 0
        if len(self) and self.minute[-1] == keys[0]:
            self._values[len(self) - 1] += values[0].astype(self._kind)
            begin = 1
        before = len(self)
        self._rows.append(minute=keys[begin:])
        if len(self) > len(self._values):
            roomier = np.zeros((max(16, len(self), len(self._values) * 3 // 2), self.width), dtype=self._kind)
            roomier[:before] = self._values[:before]
            self._values = roomier
        self._values[before : len(self)] = values[begin:]
        if len(self) > 2 * MOST_FINE:
            self._roll_up()

    def _roll_up(self) -> None:
        """Join the older half of the rows to coarser ones; those that are coarse already to still coarser."""
        half = len(self) // 2
        minute = self.minute.copy()
        older = np.arange(len(minute)) < half
        for wide in COARSER:
            keys = np.where(older, minute // wide * wide, minute)
            kept, row = np.unique(keys, return_inverse=True)
            if len(kept) <= MOST_FINE + half:
                minute = keys
                break
        kept, row = np.unique(minute, return_inverse=True)
        total = np.zeros((len(kept), self.width), dtype=self._kind)
        np.add.at(total, row, self._values[: len(self)])
        self._rows = Rows({"minute": np.int64})
        self._rows.append(minute=kept)
        self._values = total


def grouped(keys: Ints) -> tuple[Ints, npt.NDArray[np.intp]]:
    """Distinct keys in order of first appearance run by run, and for each sample which of them it has.

    Keys that come in runs, as minutes of a stream do, need no sorting.
    """
    change = np.empty(len(keys), dtype=bool)
    change[0] = True
    np.not_equal(keys[1:], keys[:-1], out=change[1:])
    return keys[change], np.cumsum(change) - 1
