"""Satellites: used in the fix, listed in view, tracked; and of how many systems."""

from __future__ import annotations

from typing import ClassVar, Self

import numpy as np
import numpy.typing as npt

from gnssmon.constellations.identity import SYSTEM_STEP
from gnssmon.constellations.systems import LETTERS, UNKNOWN
from gnssmon.epochs.batch import EpochBatch
from gnssmon.estimators.series import Series
from gnssmon.estimators.tiles import Tiles
from gnssmon.quantities import DEFAULT_CONFIDENCE, NOTHING, Estimate, Quantity, exact
from gnssmon.statistics.estimates import mean_estimate
from gnssmon.statistics.grid import CODES, grid_of, portions
from gnssmon.statistics.subject import EVERYTHING, Site, Span

HERE = "this program's own definition"
STATED = "GGA and GNS, satellites in use: IEC 61162-1"
MOST_ROWS = 100_000
"""Epochs kept one by one for the intervals of the means, more than a day at 1 Hz; then evenly thinned in time."""
NUMBERS = ("used", "used_listed", "in_view", "tracked")


def _quantity(name: str, meaning: str, source: str) -> Quantity:
    return Quantity(name=f"satellites.{name}", unit="count", meaning=meaning, source=source)


class Satellites:
    """Sums of the numbers of satellites by the minute, and the systems heard."""

    QUANTITIES: ClassVar[tuple[Quantity, ...]] = (
        _quantity("used_mean", "Mean number of satellites used, as stated in the epochs with a fix.", STATED),
        _quantity("used_min", "Smallest number of satellites used in an epoch with a fix.", STATED),
        _quantity(
            "used_listed_mean", "Mean number of different satellites that GSA lists as used.", "GSA: IEC 61162-1"
        ),
        _quantity(
            "in_view_mean",
            "Mean number of different satellites listed in view, over the epochs that list any.",
            "GSV: IEC 61162-1",
        ),
        _quantity(
            "tracked_mean",
            "Mean number of different satellites with a level, over the epochs that list any.",
            "GSV: IEC 61162-1",
        ),
        _quantity(
            "systems",
            "Satellite systems of which a signal was tracked or a satellite used; SBAS together counts as one.",
            HERE,
        ),
    )

    def __init__(self, site: Site) -> None:
        self._sums = Tiles(2)
        """Epochs and satellites by the row of ``NUMBERS``."""
        self._fewest = Tiles(combine=np.minimum)
        """Satellites used, as stated."""
        self._systems = Tiles()
        """Epochs in which a system was heard or used."""
        self._series = Series(dict.fromkeys(NUMBERS, np.int16), most_rows=MOST_ROWS)

    def update(self, batch: EpochBatch) -> None:
        """Take in closed epochs."""
        for part in portions(batch):
            self._take(part)

    def _take(self, batch: EpochBatch) -> None:
        grid = grid_of(batch)
        listed, tracked = grid.listed, grid.tracked
        in_view = listed.sum(axis=0)
        numbers = np.stack(
            [
                np.where(batch.counted & (batch.quality > 0), batch.satellites_used, -1),
                _distinct_used(batch),
                np.where(in_view > 0, in_view, -1),
                np.where(in_view > 0, tracked.sum(axis=0), -1),
            ]
        )
        known = numbers >= 0
        count, total = grid.sums(known), grid.sums(np.where(known, numbers, 0))
        row, run = np.nonzero(count)
        self._sums.add(grid.minute[run], row, count[row, run], total[row, run])
        used = np.flatnonzero(known[0])
        self._fewest.add(batch.minute[used], np.zeros(len(used), dtype=np.intp), numbers[0, used])
        system = np.zeros((len(LETTERS), len(batch)), dtype=bool)
        owner = grid.satellite // SYSTEM_STEP
        for index in np.unique(owner).tolist():
            system[index] = tracked[owner == index].any(axis=0)
        system[batch.used.satellite // SYSTEM_STEP, batch.used.epoch] = True
        heard = grid.sums(system)
        row, run = np.nonzero(heard)
        self._systems.add(grid.minute[run], row, heard[row, run])
        self._series.update(batch.axis_ms, **dict(zip(NUMBERS, numbers, strict=True)))

    def merge(self, other: Self) -> None:
        """Take in what ``other`` knows of a later part of the stream."""
        self._sums.merge(other._sums)
        self._fewest.merge(other._fewest)
        self._systems.merge(other._systems)
        self._series.merge(other._series)

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity by name, over whole minutes."""
        answers = {quantity.name: NOTHING for quantity in self.QUANTITIES}
        chosen = self._series.within(span.from_ms, span.to_ms)
        row, sums = self._sums.total(span.from_ms, span.to_ms)
        for index, (count, total) in zip(row.tolist(), sums.tolist(), strict=True):
            samples = self._series[NUMBERS[index]].view(np.int16)[chosen]
            mean = mean_estimate(samples[samples >= 0], confidence, value=total / count, count=count, least=0.0)
            answers[f"satellites.{NUMBERS[index]}_mean"] = mean
        _, fewest = self._fewest.total(span.from_ms, span.to_ms)
        if len(fewest):
            answers["satellites.used_min"] = exact(float(fewest[0, 0]), answers["satellites.used_mean"].samples)
        system, _ = self._systems.total(span.from_ms, span.to_ms)
        known = int((system != UNKNOWN).sum())
        if known:
            answers["satellites.systems"] = exact(float(known))
        return answers

    def picture(self, span: Span = EVERYTHING) -> None:
        """Drawn with the fix, minute by minute."""


def _distinct_used(batch: EpochBatch) -> npt.NDArray[np.int64]:
    """Different satellites in each epoch's GSA sentences, shape (n,); -1 without any."""
    present = np.zeros(CODES, dtype=bool)
    present[batch.used.satellite] = True
    line = (np.cumsum(present) - 1)[batch.used.satellite]
    matrix = np.zeros((int(present.sum()), len(batch)), dtype=bool)
    matrix[line, batch.used.epoch] = True
    count: npt.NDArray[np.int64] = matrix.sum(axis=0)
    return np.where(count > 0, count, -1)
