"""Sums and peaks by the minute, for pictures over time.

Sums are kept in whole units of ``UNIT``, so that they are exact and do not depend on how a stream was cut.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Self

import numpy as np
import numpy.typing as npt

from gnssmon.estimators.rows import Rows
from gnssmon.statistics.subject import Span

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]

UNIT = 1e-4
"""Finer than any decimal that NMEA receivers print for what is summed here."""
MOST_MINUTES = 70_000
"""Newest minutes kept, seven weeks: a picture shows no more, and counts over longer times are kept elsewhere."""


class Minutes:
    """One row per minute that had samples: sums of some columns, largest values of others."""

    def __init__(self, *, sums: tuple[str, ...], peaks: tuple[str, ...] = ()) -> None:
        self._sums, self._peaks = sums, peaks
        self._rows = Rows({"minute": np.int64, **dict.fromkeys(sums + peaks, np.float64)})

    def update(
        self, minute: Ints, sums: Mapping[str, npt.NDArray[np.generic]], peaks: Mapping[str, Floats] | None = None
    ) -> None:
        """Take in samples in stream order, arrays of shape (n,); a NaN among the peaks says nothing."""
        if not len(minute):
            return
        start = np.flatnonzero(np.diff(minute, prepend=minute[0] - 1))
        columns: dict[str, npt.NDArray[np.generic]] = {
            name: np.add.reduceat(np.rint(np.asarray(sums[name], dtype=np.float64) / UNIT), start)
            for name in self._sums
        }
        for name in self._peaks:
            columns[name] = np.fmax.reduceat((peaks or {})[name], start)
        self._join(minute[start], columns)

    def merge(self, other: Self) -> None:
        """Take in the minutes of a later part of the stream."""
        if len(other._rows):
            minute = other._rows["minute"].view(np.int64)
            self._join(minute, {name: other._rows[name] for name in self._sums + self._peaks})

    def within(self, span: Span) -> tuple[Ints, dict[str, Floats]]:
        """Minutes that touch ``span``, rising and each once, and their columns."""
        minute = self._rows["minute"].view(np.int64)
        inside = np.ones(len(minute), dtype=bool)
        if span.from_ms is not None:
            inside &= minute >= span.from_ms // 60_000
        if span.to_ms is not None:
            inside &= minute < -(-span.to_ms // 60_000)
        keys, row = np.unique(minute[inside], return_inverse=True)
        columns: dict[str, Floats] = {}
        for name in self._sums:
            values = self._rows[name].view(np.float64)[inside]
            # Divided, not multiplied by UNIT: 369 000 units are 36.9 to the last digit.
            columns[name] = np.bincount(row, weights=values, minlength=len(keys)) / round(1.0 / UNIT)
        for name in self._peaks:
            columns[name] = np.full(len(keys), np.nan)
            np.fmax.at(columns[name], row, self._rows[name].view(np.float64)[inside])
        return keys, columns

    def _join(self, minute: Ints, columns: Mapping[str, npt.NDArray[np.generic]]) -> None:
        rows = self._rows
        begin = 0
        if len(rows) and rows["minute"][-1] == minute[0]:
            for name in self._sums:
                rows[name][-1] += columns[name][0]
            for name in self._peaks:
                rows[name][-1] = np.fmax(rows[name][-1], columns[name][0])
            begin = 1
        rows.append(minute=minute[begin:], **{name: column[begin:] for name, column in columns.items()})
        if len(rows) > 2 * MOST_MINUTES:
            rows.keep(slice(-MOST_MINUTES, None))
