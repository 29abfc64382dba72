"""Rows: values that sentences state for epochs, kept until their epoch is complete.

Every group of values (position, velocity, dilution of precision, …) is one set of rows: an epoch number, a rank and
some columns. Rows of epochs that are still open are held back and stand in front of the next block's rows; so an epoch
that is spread over many blocks is put together exactly as if it had come in one. For each epoch the row of highest
rank counts, and among equals the first.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

Column = npt.NDArray[Any]
Ints = npt.NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Rows:
    """Rows in stream order; every column has shape (n,)."""

    columns: Mapping[str, Column]
    """Among them ``epoch`` (int64), and ``rank`` (int8) where epochs choose one row."""

    def __len__(self) -> int:
        return len(self.columns["epoch"])

    @property
    def epoch(self) -> Ints:
        return self.columns["epoch"].astype(np.int64, copy=False)

    def followed_by(self, later: Rows) -> Rows:
        """Return both, ``later`` behind; columns are those of ``later``."""
        if not len(self):
            return later
        if not len(later):
            return self
        return Rows({name: np.concatenate((self.columns[name], column)) for name, column in later.columns.items()})

    def where(self, chosen: npt.NDArray[np.bool_]) -> Rows:
        """Return the rows for which ``chosen`` (n,) holds."""
        return self if chosen.all() else Rows({name: column[chosen] for name, column in self.columns.items()})

    def since(self, number: int) -> Rows:
        """Return a copy of the rows of epoch ``number`` and later ones."""
        kept = np.flatnonzero(self.columns["epoch"] >= number)
        return Rows({name: column[kept] for name, column in self.columns.items()})

    def winners(self, first: int, count: int) -> Ints:
        """Return for each epoch from number ``first`` on the row that counts, -1 for none; shape (count,)."""
        winner = np.full(count, -1, dtype=np.int64)
        rank = self.columns["rank"]
        place = self.epoch - first
        for value in np.unique(rank):
            # Assigned backwards, so that of several rows the first stays; higher ranks come later and overwrite.
            rows = np.flatnonzero(rank == value)[::-1]
            winner[place[rows]] = rows
        return winner

    def chosen(self, name: str, winner: Ints, missing: float, dtype: npt.DTypeLike = np.float64) -> Column:
        """Return column ``name`` of the rows in ``winner``, ``missing`` where that is -1."""
        values = np.full(len(winner), missing, dtype=dtype)
        found = winner >= 0
        values[found] = self.columns[name][winner[found]]
        return values


def together(*parts: Rows) -> Rows:
    """Return the rows of several sentence types as one; columns are those of the first part."""
    return Rows({name: np.concatenate([part.columns[name] for part in parts]) for name in parts[0].columns})
