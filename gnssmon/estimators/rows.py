"""Rows: named columns of equal length that grow at the end."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import numpy.typing as npt

Column = npt.NDArray[np.generic]

FIRST_CAPACITY = 256


class Rows:
    """Columns that grow together, at the cost of a copy now and then (each time half as much room again)."""

    def __init__(self, kinds: Mapping[str, npt.DTypeLike]) -> None:
        self._columns: dict[str, Column] = {name: np.empty(0, dtype=kind) for name, kind in kinds.items()}
        self._used = 0

    def __len__(self) -> int:
        return self._used

    def __getitem__(self, name: str) -> Column:
        """The column so far, shape (n,): a view, good until the next ``append``."""
        return self._columns[name][: self._used]

    def append(self, **columns: npt.ArrayLike) -> None:
        """Add rows; every column, all of one length."""
        added = {name: np.asarray(column) for name, column in columns.items()}
        count = len(next(iter(added.values())))
        end = self._used + count
        for name, column in self._columns.items():
            if end > len(column):
                roomier = np.empty(max(FIRST_CAPACITY, end, len(column) * 3 // 2), dtype=column.dtype)
                roomier[: self._used] = column[: self._used]
                self._columns[name] = column = roomier
            column[self._used : end] = added[name]
        self._used = end

    def keep(self, which: slice | npt.NDArray[np.bool_] | npt.NDArray[np.intp]) -> None:
        """Drop all rows but these."""
        self._columns = {name: column[: self._used][which].copy() for name, column in self._columns.items()}
        self._used = len(next(iter(self._columns.values())))
