"""Satellites: used in the fix, listed in view, tracked; and of how many systems."""

from __future__ import annotations

from typing import ClassVar, Self

import numpy as np
import numpy.typing as npt

from gnssmon.epochs.batch import EpochBatch
from gnssmon.estimators import long_run
from gnssmon.estimators.series import Series
from gnssmon.quantities import DEFAULT_CONFIDENCE, NOTHING, Estimate, Quantity, exact
from gnssmon.statistics.grid import CODES, grid_of
from gnssmon.statistics.minutes import Minutes
from gnssmon.statistics.subject import EVERYTHING, Site, Span

HERE = "this program's own definition"
MOST_ROWS = 1_500_000
"""Epochs kept one by one, two weeks at 1 Hz (18 MB); beyond that evenly thinned in time."""
SYSTEMS = 8
UNKNOWN_SYSTEM = SYSTEMS - 1


class Satellites:
    """Numbers of satellites, epoch by epoch."""

    QUANTITIES: ClassVar[tuple[Quantity, ...]] = (
        Quantity(
            name="satellites.used_mean",
            unit="count",
            meaning="Mean number of satellites used, as the position sentence of epochs with a fix states it.",
            source="GGA and GNS, satellites in use: IEC 61162-1",
        ),
        Quantity(
            name="satellites.used_min",
            unit="count",
            meaning="Smallest number of satellites used in an epoch with a fix.",
            source="GGA and GNS, satellites in use: IEC 61162-1",
        ),
        Quantity(
            name="satellites.used_listed_mean",
            unit="count",
            meaning="Mean number of different satellites that GSA lists as used, over epochs that list any.",
            source="GSA: IEC 61162-1",
        ),
        Quantity(
            name="satellites.in_view_mean",
            unit="count",
            meaning="Mean number of different satellites listed in view, over epochs with satellite sentences.",
            source="GSV: IEC 61162-1",
        ),
        Quantity(
            name="satellites.tracked_mean",
            unit="count",
            meaning="Mean number of different satellites with a level, over epochs with satellite sentences.",
            source="GSV: IEC 61162-1",
        ),
        Quantity(
            name="satellites.systems",
            unit="count",
            meaning="Satellite systems of which a signal was tracked or a satellite used (SBAS counts as one).",
            source=HERE,
        ),
    )

    def __init__(self, site: Site) -> None:
        kinds = dict.fromkeys(("used", "listed_used", "in_view", "tracked"), np.int16)
        self._series = Series(kinds, most_rows=MOST_ROWS)
        self._minutes = Minutes(sums=tuple(f"system_{i}" for i in range(SYSTEMS)))

    def update(self, batch: EpochBatch) -> None:
        """Take in closed epochs."""
        count = len(batch)
        if not count:
            return
        grid = grid_of(batch)
        tracked = grid.tracked
        used = np.where(batch.counted & (batch.quality > 0), batch.satellites_used, -1)
        listed = _distinct_used(batch)
        has_rows = grid.listed.any(axis=1)
        self._series.update(
            batch.axis_ms,
            used=used,
            listed_used=np.where(listed > 0, listed, -1),
            in_view=np.where(has_rows, grid.listed.sum(axis=1), -1),
            tracked=np.where(has_rows, tracked.sum(axis=1), -1),
        )
        system = np.zeros((count, SYSTEMS), dtype=bool)
        for index in np.unique(grid.satellite // 1024).tolist():
            system[:, index] = tracked[:, grid.satellite // 1024 == index].any(axis=1)
        system[batch.used.epoch, batch.used.satellite // 1024] = True
        self._minutes.update(batch.minute, sums={f"system_{i}": system[:, i] for i in range(SYSTEMS)})

    def merge(self, other: Self) -> None:
        """Take in what ``other`` knows of a later part of the stream."""
        self._series.merge(other._series)
        self._minutes.merge(other._minutes)

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity by name."""
        answers = {quantity.name: NOTHING for quantity in self.QUANTITIES}
        chosen = self._series.within(span.from_ms, span.to_ms)
        columns = {
            "used_mean": "used",
            "used_listed_mean": "listed_used",
            "in_view_mean": "in_view",
            "tracked_mean": "tracked",
        }
        for name, column in columns.items():
            values = self._series[column].view(np.int16)[chosen]
            values = values[values >= 0]
            if len(values):
                answers[f"satellites.{name}"] = mean_estimate(values, confidence)
                if name == "used_mean":
                    answers["satellites.used_min"] = exact(float(values.min()), len(values))
        minute, systems = self._minutes.within(span)
        if len(minute) and any(answers[f"satellites.{name}"].value is not None for name in columns):
            heard = sum(float(systems[f"system_{i}"].sum()) > 0 for i in range(UNKNOWN_SYSTEM))
            answers["satellites.systems"] = exact(float(heard), len(minute)) if heard else NOTHING
        return answers

    def picture(self, span: Span = EVERYTHING) -> None:
        """Drawn with the fix, minute by minute."""


def mean_estimate(values: npt.NDArray[np.generic], confidence: float) -> Estimate:
    """Mean of evenly spaced samples with an interval that respects their correlation; none where too few."""
    numbers = values.astype(np.float64)
    mean = float(numbers.mean())
    error = long_run.mean_error(numbers)
    if error is None:
        same = len(numbers) >= long_run.FEWEST_SAMPLES and float(np.ptp(numbers)) == 0.0
        return Estimate(mean, (mean, mean) if same else None, confidence, len(numbers))
    half = error.half_width(confidence)
    return Estimate(mean, (mean - half, mean + half), confidence, len(numbers))


def _distinct_used(batch: EpochBatch) -> npt.NDArray[np.int64]:
    """Different satellites in each epoch's GSA sentences, shape (n,)."""
    present = np.zeros(CODES, dtype=bool)
    present[batch.used.satellite] = True
    column = (np.cumsum(present) - 1)[batch.used.satellite]
    matrix = np.zeros((len(batch), int(present.sum())), dtype=bool)
    matrix[batch.used.epoch, column] = True
    total: npt.NDArray[np.int64] = matrix.sum(axis=1)
    return total
