"""Looks at the sky: where each satellite stood, minute by minute, and whether it was heard.

Strategy. Once in ten seconds the satellites' directions are looked at; a minute's looks at one satellite become one
row: direction at the first look, how often listed, how often heard, its level. A row per satellite and minute is little
(2 MB a day with 60 satellites). The looks of the first and of the last minute are kept one by one, because a part of
the stream before or behind may bring more of the same minute, and more of the same ten seconds.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Self

import numpy as np
import numpy.typing as npt

from gnssmon.epochs.batch import EpochBatch
from gnssmon.estimators.rows import Rows
from gnssmon.statistics.grid import CODES, grid_of_chosen
from gnssmon.statistics.subject import Span

Ints = npt.NDArray[np.int64]
Column = npt.NDArray[np.generic]

SLOT_MS = 10_000
MOST_ROWS = 2_000_000
"""Satellite-minutes kept, three weeks of 60 satellites (44 MB); after that the oldest go."""
KINDS: dict[str, npt.DTypeLike] = {
    "minute": np.int64,
    "satellite": np.int16,
    "elevation_deg": np.int8,
    "azimuth_deg": np.int16,
    "listed": np.uint8,
    "tracked": np.uint8,
    "cn0_dbhz": np.float32,
}
"""Columns of the rows; ``cn0_dbhz`` is the mean of the strongest signal's level, NaN not heard."""


@dataclass(frozen=True, slots=True)
class _Look:
    """Directions seen at some instants, in order of time; arrays of shape (k,)."""

    slot: Ints
    minute: Ints
    satellite: Ints
    elevation_deg: npt.NDArray[np.float32]
    azimuth_deg: npt.NDArray[np.float32]
    cn0_dbhz: npt.NDArray[np.float32]

    def __len__(self) -> int:
        return len(self.slot)

    def where(self, chosen: npt.NDArray[np.bool_]) -> _Look:
        return _Look(*(getattr(self, field.name)[chosen] for field in fields(self)))

    def behind(self, other: _Look) -> _Look:
        """Both, this one last."""
        pairs = ((getattr(other, field.name), getattr(self, field.name)) for field in fields(self))
        return _Look(*(np.concatenate(pair) for pair in pairs))

    def rows(self) -> dict[str, Column]:
        """One row per satellite and minute, in order of time."""
        keys, first, which = np.unique(self.minute * CODES + self.satellite, return_index=True, return_inverse=True)
        heard = np.isfinite(self.cn0_dbhz)
        tracked = np.bincount(which, weights=heard)
        level = np.bincount(which, weights=np.where(heard, self.cn0_dbhz, 0.0).astype(np.float64))
        mean = np.full(len(keys), np.nan)
        np.divide(level, tracked, out=mean, where=tracked > 0)
        return {
            "minute": keys // CODES,
            "satellite": keys % CODES,
            "elevation_deg": self.elevation_deg[first],
            "azimuth_deg": self.azimuth_deg[first],
            "listed": np.minimum(np.bincount(which), 255),
            "tracked": np.minimum(tracked, 255),
            "cn0_dbhz": mean,
        }


_NO_NUMBERS = np.empty(0, dtype=np.int64)
_NO_VALUES = np.empty(0, dtype=np.float32)
_NONE = _Look(_NO_NUMBERS, _NO_NUMBERS, _NO_NUMBERS, _NO_VALUES, _NO_VALUES, _NO_VALUES)


class Looks:
    """Every look so far, of one stream."""

    def __init__(self) -> None:
        self._rows = Rows(KINDS)
        self._first = _NONE
        """All looks of the first minute."""
        self._left = False
        """A later minute than the first was seen."""
        self._last = _NONE
        """The looks of the minute that goes on, if it is not the first."""
        self._slot: int | None = None

    def update(self, batch: EpochBatch) -> None:
        """Look at the first epoch of each ten seconds that lists satellites."""
        if not len(batch.signals.epoch):
            return
        listed = np.zeros(len(batch), dtype=bool)
        listed[batch.signals.epoch] = True
        able = np.flatnonzero(listed)
        slot = batch.axis_ms[able] // SLOT_MS
        begins = np.diff(slot, prepend=slot[0] - 1 if self._slot is None else self._slot) != 0
        self._slot = int(slot[-1])
        if not begins.any():
            return
        chosen = np.zeros(len(batch), dtype=bool)
        chosen[able[begins]] = True
        grid = grid_of_chosen(batch, chosen)
        epoch, column = np.nonzero(np.isfinite(grid.elevation_deg))
        self._take(
            _Look(
                slot[begins][epoch],
                batch.minute[chosen][epoch],
                grid.satellite[column].astype(np.int64),
                np.rint(grid.elevation_deg[epoch, column]),
                np.mod(np.rint(grid.azimuth_deg[epoch, column]), np.float32(360.0)),
                grid.cn0_dbhz[epoch, column],
            )
        )

    def merge(self, other: Self) -> None:
        """Take in the looks at a later part of the stream; what both looked at in the same ten seconds counts once."""
        if other._slot is None:
            return
        head = other._first
        if self._slot is not None and len(head) and head.slot[0] == self._slot:
            same = np.cumsum(np.diff(head.slot, prepend=head.slot[0]) != 0) == 0
            head = head.where(~same)
        self._take(head)
        if other._left:
            self._left = True
            self._close(None)
            self._rows.append(**{name: other._rows[name] for name in KINDS})
            self._last = other._last
            self._forget()
        self._slot = other._slot

    def within(self, span: Span) -> dict[str, Column]:
        """Rows of the minutes that touch the span, in order of time; columns as in ``KINDS``."""
        fresh = [look.rows() for look in (self._first, self._last)]
        rows: dict[str, Column] = {
            name: np.concatenate([fresh[0][name].astype(kind), self._rows[name], fresh[1][name].astype(kind)])
            for name, kind in KINDS.items()
        }
        minute = rows["minute"].view(np.int64)
        inside = np.ones(len(minute), dtype=bool)
        if span.from_ms is not None:
            inside &= (minute + 1) * 60_000 > span.from_ms
        if span.to_ms is not None:
            inside &= minute * 60_000 < span.to_ms
        return rows if inside.all() else {name: column[inside] for name, column in rows.items()}

    def _take(self, look: _Look) -> None:
        if not len(look):
            return
        if not self._left:
            minute = int(self._first.minute[0]) if len(self._first) else int(look.minute[0])
            others = np.flatnonzero(look.minute != minute)
            head = np.arange(len(look)) < (int(others[0]) if len(others) else len(look))
            self._first = look.where(head).behind(self._first)
            look = look.where(~head)
            if not len(look):
                return
            self._left = True
        self._last = look.behind(self._last)
        self._close(int(look.minute[-1]))

    def _close(self, going_on: int | None) -> None:
        """Turn the looks at finished minutes into rows; ``going_on``: the minute that may still get more."""
        done = np.ones(len(self._last), dtype=bool) if going_on is None else self._last.minute != going_on
        if done.any():
            self._rows.append(**self._last.where(done).rows())
            self._last = self._last.where(~done)
            self._forget()

    def _forget(self) -> None:
        if len(self._rows) > 2 * MOST_ROWS:
            self._rows.keep(slice(-MOST_ROWS, None))
