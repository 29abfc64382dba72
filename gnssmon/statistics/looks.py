"""Where each satellite stood, minute by minute: one row a satellite and minute, from which the sky is drawn.

Elevations are added as they are, azimuths as vectors, so that rows merge exactly and a mean has no trouble at north.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Self

import numpy as np
import numpy.typing as npt

from gnssmon.estimators.tiles import Tiles
from gnssmon.statistics.grid import AZIMUTH_STEP, PER_DB, ZERO_ELEVATION, Grid
from gnssmon.statistics.subject import Span

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]

LADDER = ((2880, 10),)
"""Rows of ten minutes after two days: a satellite moves five degrees in that time, no wider row has a direction."""
MOST_ROWS = 500_000
"""Of satellites by minutes or ten minutes: 28 MB, two months of 50 satellites."""
UNIT = 1e7
"""Parts of the unit vector that are counted."""
DECIMALS = 2
"""Of a mean azimuth: whole degrees come back whole, and do not fall into the sector beside theirs."""

_TENTHS = np.radians(np.arange(AZIMUTH_STEP) / 10.0)
_EAST, _NORTH = np.rint(np.sin(_TENTHS) * UNIT).astype(np.int64), np.rint(np.cos(_TENTHS) * UNIT).astype(np.int64)


@dataclass(frozen=True, slots=True)
class Rows:
    """One row a satellite and minute (or ten), by rising minute and satellite; arrays of shape (k,)."""

    minute: Ints
    satellite: Ints
    azimuth_deg: Floats
    elevation_deg: Floats
    listed: Ints
    """Epochs that list the satellite with a direction, and of these those with a level."""
    tracked: Ints
    level_dbhz: Floats
    """Mean of the satellite's strongest signal; NaN not tracked."""

    def __len__(self) -> int:
        return len(self.minute)

    def part(self, chosen: npt.NDArray[np.bool_]) -> Rows:
        """The chosen rows."""
        return self if chosen.all() else Rows(*(getattr(self, field.name)[chosen] for field in fields(self)))


class Looks:
    """Sums by minute and satellite."""

    def __init__(self) -> None:
        self._tiles = Tiles(6, ladder=LADDER, most=MOST_ROWS)

    def update(self, grid: Grid) -> None:
        """Take in a batch's satellites."""
        direction = grid.direction
        known = direction >= 0
        listed = grid.sums(known)
        satellite, run = np.nonzero(listed)
        if not len(satellite):
            return
        place = np.where(known, direction, AZIMUTH_STEP * ZERO_ELEVATION)
        height, azimuth = place // AZIMUTH_STEP - ZERO_ELEVATION, place % AZIMUTH_STEP
        level = np.where(known, grid.best, 0)
        sums = [
            listed,
            grid.sums(level > 0),
            grid.sums(_EAST[azimuth] * known),
            grid.sums(_NORTH[azimuth] * known),
            grid.sums(height),
            grid.sums(level),
        ]
        self._tiles.add(grid.minute[run], grid.satellite[satellite], *(total[satellite, run] for total in sums))

    def merge(self, other: Self) -> None:
        """Take in the rows of a later part of the stream."""
        self._tiles.merge(other._tiles)

    def within(self, span: Span) -> Rows:
        """The rows that touch the span."""
        minute, satellite, values = self._tiles.select(span.from_ms, span.to_ms)
        listed, tracked, east, north, height, level = values.T
        level_dbhz = np.full(len(minute), np.nan)
        np.divide(level / PER_DB, tracked, out=level_dbhz, where=tracked > 0)
        return Rows(
            minute=minute,
            satellite=satellite,
            azimuth_deg=np.round(np.degrees(np.arctan2(east, north)), DECIMALS) % 360.0,
            elevation_deg=height / 10.0 / listed,
            listed=listed,
            tracked=tracked,
            level_dbhz=level_dbhz,
        )
