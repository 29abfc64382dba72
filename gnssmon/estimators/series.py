"""Samples kept one by one, with their times: exact for as long as they fit, then thinned evenly in time.

Strategy. Most answers (quantiles about a mean that moves, correlation, jumps) need the samples themselves. A day at
1 Hz is 86 400 rows of a few numbers: nothing. For a stream that never ends, a grid is laid over the time axis and the
first sample of each cell is kept; when the rows no longer fit, the cells get twice as wide. Cells of one width lie
wholly inside cells of the next, so the samples kept depend on the samples alone, not on when thinning happened or how
the stream was cut: merging stays exact. What is given up is resolution in time, never the early part of the record;
receivers' errors are alike over many seconds, so little is lost.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import numpy.typing as npt

from gnssmon.estimators.rows import Column, Rows

Ints = npt.NDArray[np.int64]
Selection = slice | npt.NDArray[np.intp]

FINEST_GRID_MS = 125
"""First cell width when thinning starts: an eighth of a second; eight doublings later half a minute."""
WIDEST_GRID_MS = 1 << 40
"""A receiver whose clock jumps to and fro for ever defeats any grid: at 35 years a cell the oldest rows go instead."""


class Series:
    """Time-stamped rows in stream order, at most ``most_rows`` of them."""

    def __init__(self, kinds: Mapping[str, npt.DTypeLike], *, most_rows: int) -> None:
        self._rows = Rows({"axis_ms": np.int64, **kinds})
        self._names = tuple(kinds)
        self._most_rows = most_rows
        self._rising = True
        self.grid_ms = 0
        """Width of the cells of which one sample each is kept; 0: every sample is kept."""
        self.revision = 0
        """Counts the times that rows were dropped: what was computed per row before is void."""

    def __len__(self) -> int:
        return len(self._rows)

    def __getitem__(self, name: str) -> Column:
        """The column so far, shape (n,): a view, good until the next update."""
        return self._rows[name]

    @property
    def axis_ms(self) -> Ints:
        """Times of the rows, shape (n,)."""
        return self._rows["axis_ms"].view(np.int64)

    def update(self, axis_ms: Ints, **columns: npt.ArrayLike) -> None:
        """Take in samples in stream order; arrays of shape (n,)."""
        if not len(axis_ms):
            return
        if self._rising:
            last = self.axis_ms[-1:]
            self._rising = bool((axis_ms[1:] >= axis_ms[:-1]).all()) and not (len(last) and axis_ms[0] < last[0])
        if self.grid_ms:
            kept = self._entering(axis_ms, self.axis_ms[-1:])
            self._rows.append(axis_ms=axis_ms[kept], **{name: np.asarray(columns[name])[kept] for name in self._names})
        else:
            self._rows.append(axis_ms=axis_ms, **columns)
        while len(self._rows) > self._most_rows:
            self._coarsen(self.grid_ms * 2 or FINEST_GRID_MS)

    def merge(self, other: Series) -> None:
        """Take in the rows of ``other``, a later part of the stream; ``other`` stays as it is."""
        if other.grid_ms > self.grid_ms:
            self._coarsen(other.grid_ms)
        self.update(other.axis_ms, **{name: other[name] for name in self._names})

    def within(self, from_ms: int | None, to_ms: int | None) -> Selection:
        """Which rows lie in the half-open stretch of time; None: open on that side."""
        axis_ms = self.axis_ms
        if self._rising:
            first = 0 if from_ms is None else int(np.searchsorted(axis_ms, from_ms, side="left"))
            last = len(axis_ms) if to_ms is None else int(np.searchsorted(axis_ms, to_ms, side="left"))
            return slice(first, max(first, last))
        inside = np.ones(len(axis_ms), dtype=bool)
        if from_ms is not None:
            inside &= axis_ms >= from_ms
        if to_ms is not None:
            inside &= axis_ms < to_ms
        return np.flatnonzero(inside)

    def _coarsen(self, grid_ms: int) -> None:
        self.grid_ms = grid_ms
        self.revision += 1
        if grid_ms < WIDEST_GRID_MS:
            self._rows.keep(self._entering(self.axis_ms, self.axis_ms[:0]))
        else:
            self._rows.keep(slice(-self._most_rows, None))

    def _entering(self, axis_ms: Ints, previous_ms: Ints) -> npt.NDArray[np.bool_]:
        """Which samples are the first of a visit to their cell; ``previous_ms``: the sample before, or none."""
        cell = axis_ms // self.grid_ms
        first = np.ones(len(cell), dtype=bool)
        first[1:] = cell[1:] != cell[:-1]
        if len(previous_ms) and len(cell):
            first[0] = bool(cell[0] != previous_ms[0] // self.grid_ms)
        return first
