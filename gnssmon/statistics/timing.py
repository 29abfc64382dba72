"""Timing: how late epochs arrive at the host, and how evenly."""

from __future__ import annotations

from typing import ClassVar, Self

import numpy as np

from gnssmon.epochs.batch import EpochBatch
from gnssmon.estimators.series import Series
from gnssmon.quantities import DEFAULT_CONFIDENCE, NOTHING, Estimate, Quantity, exact
from gnssmon.statistics.pictures import TimingPicture
from gnssmon.statistics.subject import EVERYTHING, Site, Span

HERE = "this program's own definition"
MOST_ROWS = 1_000_000
"""Delays kept one by one, eleven days at 1 Hz (16 MB); beyond that evenly thinned in time."""
HOST_STEP_S = 0.5
"""A change of delay from one epoch to the next that no queue explains in so short a time: a clock was set."""


def _quantity(name: str, unit: str, meaning: str) -> Quantity:
    return Quantity(name=f"timing.{name}", unit=unit, meaning=meaning, source=HERE)


class Timing:
    """Delay between the UTC of a fix and the arrival of its sentence, where arrivals are known."""

    QUANTITIES: ClassVar[tuple[Quantity, ...]] = (
        _quantity("delay_median_s", "s", "Median of arrival time minus the UTC of the fix (host clock included)."),
        _quantity("delay_95_s", "s", "95 % of the epochs arrive with at most this delay."),
        _quantity("jitter_s", "s", "Spread of the delay: half the distance between its 16 % and 84 % quantiles."),
        _quantity("clock_steps", "count", "Sudden changes of the delay by more than half a second between epochs."),
    )

    def __init__(self, site: Site) -> None:
        self._series = Series({"delay_s": np.float64}, most_rows=MOST_ROWS)

    def update(self, batch: EpochBatch) -> None:
        """Take in closed epochs."""
        known = batch.counted & np.isfinite(batch.position_received_s) & (batch.utc_ms >= 0)
        if known.any():
            delay_s = batch.position_received_s[known] - batch.utc_ms[known] / 1000.0
            self._series.update(batch.axis_ms[known], delay_s=delay_s)

    def merge(self, other: Self) -> None:
        """Take in what ``other`` knows of a later part of the stream."""
        self._series.merge(other._series)

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity by name; nothing where no arrival is known."""
        answers = {quantity.name: NOTHING for quantity in self.QUANTITIES}
        delay_s = self._series["delay_s"].view(np.float64)[self._series.within(span.from_ms, span.to_ms)]
        if not len(delay_s):
            return answers
        low, median, high, late = (float(q) for q in np.quantile(delay_s, (0.16, 0.5, 0.84, 0.95)))
        steps = int((np.abs(np.diff(delay_s)) > HOST_STEP_S).sum())
        found = {"delay_median_s": median, "delay_95_s": late, "jitter_s": (high - low) / 2.0, "clock_steps": steps}
        return answers | {f"timing.{name}": exact(float(value), len(delay_s)) for name, value in found.items()}

    def picture(self, span: Span = EVERYTHING) -> TimingPicture:
        """Median and 95 % delay minute by minute."""
        chosen = self._series.within(span.from_ms, span.to_ms)
        minute = self._series.axis_ms[chosen] // 60_000
        delay_s = self._series["delay_s"].view(np.float64)[chosen]
        if not len(minute):
            nothing = np.empty(0)
            return TimingPicture(minute=minute, delay_median_s=nothing, delay_95_s=nothing)
        order = np.argsort(minute, kind="stable")
        keys, first = np.unique(minute[order], return_index=True)
        parts = np.split(delay_s[order], first[1:])
        quantiles = np.array([np.quantile(part, (0.5, 0.95)) for part in parts])
        return TimingPicture(minute=keys, delay_median_s=quantiles[:, 0], delay_95_s=quantiles[:, 1])
