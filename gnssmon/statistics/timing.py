"""Timing: how late epochs arrive at the host, how evenly, and whose clock was set.

Strategy. The delay of an epoch is the arrival of its position sentence minus the UTC that the sentence states: what the
receiver needs to compute and send it, what the line and the host add, and the error of the host's clock. The least
delay of a minute is the quietest view of receiver, line and clock; its slope is the drift of the host's clock. A step
of the delay that stays is a clock that was set: the receiver's, where the stated times jumped while arrivals went on
evenly, else the host's.
"""

from __future__ import annotations

from typing import ClassVar, NamedTuple, Self

import numpy as np
import numpy.typing as npt

from gnssmon.epochs.batch import EpochBatch
from gnssmon.estimators import long_run
from gnssmon.estimators.series import Series
from gnssmon.quantities import DEFAULT_CONFIDENCE, NOTHING, Estimate, Quantity, exact
from gnssmon.statistics.estimates import quantile_estimate
from gnssmon.statistics.pictures import TimingPicture
from gnssmon.statistics.subject import EVERYTHING, Site, Span

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]

HERE = "this program's own definition"
MOST_ROWS = 400_000
"""Delays kept one by one, four days at 1 Hz (13 MB); beyond that evenly thinned in time."""
STEP_S = 0.5
"""A change of the delay that stays and that no queue explains."""
BESIDE = 5
"""Epochs on either side whose median delays must differ for a step to have stayed."""
DAY_S = 86_400.0
FEWEST_MINUTES = 10
"""Below this a clock's drift is lost in the scatter of the arrivals."""
MOST_CANDIDATES = 10_000
"""Sudden changes that are looked at; more of them are noise, not clocks."""
_SHIFT = 1 << 38
"""Keeps minutes before 1970 above zero."""
MOST_PAIRED = 400
"""Minutes, evenly chosen, that are paired for the drift: 80 000 pairs."""


def _quantity(name: str, unit: str, meaning: str, source: str = HERE) -> Quantity:
    return Quantity(name=f"timing.{name}", unit=unit, meaning=meaning, source=source)


class _Delays(NamedTuple):
    """Of a stretch of time; arrays of shape (n,)."""

    axis_ms: Ints
    delay_s: Floats
    burst_s: Floats

    @property
    def interval_s(self) -> float:
        """The usual step between epochs."""
        steps = np.diff(self.axis_ms)
        return float(np.median(steps[steps > 0])) / 1000.0 if (steps > 0).any() else np.nan


class Timing:
    """Delay between the UTC of a fix and the arrival of its sentence, where arrivals are known."""

    QUANTITIES: ClassVar[tuple[Quantity, ...]] = (
        _quantity("delay_median_s", "s", "Median of arrival minus UTC of the fix; holds the host clock's error."),
        _quantity(
            "delay_95_s", "s", "95 % of the epochs arrive with at most this delay; holds the host clock's error."
        ),
        _quantity(
            "delay_over_floor_95_s",
            "s",
            "95 % of the epochs arrive at most so much later than the quickest of their minute.",
        ),
        _quantity("jitter_s", "s", "Spread of the delay: half the distance between its 16 % and 84 % quantiles."),
        _quantity(
            "drift_ppm",
            "ppm",
            "Drift of the host's clock against UTC, from the least delay of each minute.",
            "median of the slopes between all pairs: P. K. Sen, J. Am. Stat. Assoc. 63 (1968)",
        ),
        _quantity("host_clock_steps", "count", "How often the host's clock was set by more than half a second."),
        _quantity(
            "receiver_clock_steps",
            "count",
            "How often the receiver's time jumped by more than half a second while sentences went on arriving evenly.",
        ),
        _quantity("burst_median_s", "s", "Median time from the arrival of an epoch's first sentence to its last."),
        _quantity(
            "burst_share",
            "share",
            "Median burst / interval of the epochs: near 1 the line has no pause left between epochs.",
        ),
    )

    def __init__(self, site: Site) -> None:
        self._series = Series({"delay_s": np.float64, "burst_s": np.float32}, most_rows=MOST_ROWS)

    def update(self, batch: EpochBatch) -> None:
        """Take in closed epochs."""
        known = np.flatnonzero(batch.counted & np.isfinite(batch.position_received_s))
        if not len(known):
            return
        arrived_s, utc_ms, axis_ms = batch.position_received_s[known], batch.utc_ms[known], batch.axis_ms[known]
        # Without a date the stated time of day is taken for the one nearest to the arrival.
        time_of_day_s = np.mod(arrived_s - axis_ms / 1000.0 + DAY_S / 2.0, DAY_S) - DAY_S / 2.0
        self._series.update(
            axis_ms,
            delay_s=np.where(utc_ms >= 0, arrived_s - utc_ms / 1000.0, time_of_day_s),
            burst_s=batch.completed_s[known] - batch.received_s[known],
        )

    def merge(self, other: Self) -> None:
        """Take in what ``other`` knows of a later part of the stream."""
        self._series.merge(other._series)

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity by name; nothing where no arrival is known."""
        answers = {quantity.name: NOTHING for quantity in self.QUANTITIES}
        delays = self._within(span)
        count = len(delays.delay_s)
        if not count:
            return answers
        answers["timing.delay_median_s"] = quantile_estimate(delays.delay_s, 0.5, confidence)
        answers["timing.delay_95_s"] = quantile_estimate(delays.delay_s, 0.95, confidence)
        low, high = np.quantile(delays.delay_s, (0.16, 0.84)).tolist()
        answers["timing.jitter_s"] = exact((high - low) / 2.0, count)
        minute, floor = _floor(delays)
        over = delays.delay_s - floor[np.searchsorted(minute, delays.axis_ms // 60_000)]
        answers["timing.delay_over_floor_95_s"] = exact(float(np.quantile(over, 0.95)), count)
        host, receiver = _steps(delays)
        answers["timing.host_clock_steps"] = exact(float(len(host)), count)
        answers["timing.receiver_clock_steps"] = exact(float(len(receiver)), count)
        answers["timing.drift_ppm"] = _drift(delays, np.sort([*host, *receiver]), confidence)
        bursts = delays.burst_s[np.isfinite(delays.burst_s)]
        if len(bursts):
            answers["timing.burst_median_s"] = quantile_estimate(bursts, 0.5, confidence)
            if delays.interval_s > 0.0:
                answers["timing.burst_share"] = exact(float(np.median(bursts)) / delays.interval_s, len(bursts))
        return answers

    def picture(self, span: Span = EVERYTHING) -> TimingPicture:
        """Median and 95 % delay minute by minute."""
        delays = self._within(span)
        minute = delays.axis_ms // 60_000
        order = np.lexsort((delays.delay_s, minute))
        minute, ordered = minute[order], delays.delay_s[order]
        first = np.flatnonzero(np.diff(minute, prepend=minute[:1] - 1))
        count = np.diff(first, append=len(minute))
        median_s, late_s = (_ordered_quantiles(ordered, first, count, share) for share in (0.5, 0.95))
        return TimingPicture(minute=minute[first], delay_median_s=median_s, delay_95_s=late_s)

    def _within(self, span: Span) -> _Delays:
        chosen = self._series.within(span.from_ms, span.to_ms)
        return _Delays(
            self._series.axis_ms[chosen],
            self._series["delay_s"].view(np.float64)[chosen],
            self._series["burst_s"].view(np.float32)[chosen].astype(np.float64),
        )


def _ordered_quantiles(
    ordered: Floats, first: npt.NDArray[np.intp], count: npt.NDArray[np.intp], share: float
) -> Floats:
    """Quantile of each group of rising values, between neighbours in proportion."""
    place = (count - 1) * share
    low = place.astype(np.intp)
    high = np.minimum(low + 1, count - 1)
    return np.asarray(ordered[first + low] + (ordered[first + high] - ordered[first + low]) * (place - low))


def _floor(delays: _Delays) -> tuple[Ints, Floats]:
    """Minutes, rising and each once, and the least delay in each."""
    minute, which = np.unique(delays.axis_ms // 60_000, return_inverse=True)
    least = np.full(len(minute), np.inf)
    np.minimum.at(least, which, delays.delay_s)
    return minute, least


def _steps(delays: _Delays) -> tuple[list[int], list[int]]:
    """Epochs at which the host's clock was found set, and the receiver's."""
    delay_s, usual_s = delays.delay_s, delays.interval_s
    host: list[int] = []
    receiver: list[int] = []
    last = -BESIDE
    for at in (np.flatnonzero(np.abs(np.diff(delay_s)) > STEP_S) + 1)[:MOST_CANDIDATES].tolist():
        before, behind = delay_s[max(0, at - BESIDE) : at], delay_s[at : at + BESIDE]
        step_s = abs(float(np.median(behind) - np.median(before)))
        if at - last < BESIDE or step_s <= STEP_S or max(np.ptp(before), np.ptp(behind)) >= step_s:
            continue
        last = at
        stated_s = float(delays.axis_ms[at] - delays.axis_ms[at - 1]) / 1000.0
        arrived_s = stated_s + float(delay_s[at] - delay_s[at - 1])
        (receiver if abs(stated_s - usual_s) > abs(arrived_s - usual_s) else host).append(at)
    return host, receiver


def _drift(delays: _Delays, steps: npt.NDArray[np.integer], confidence: float) -> Estimate:
    """Slope of the least delays between the steps, parts in a million."""
    stretch = np.searchsorted(steps, np.arange(len(delays.delay_s)), side="right")
    key, which = np.unique(stretch << 40 | delays.axis_ms // 60_000 + _SHIFT, return_inverse=True)
    floor_s = np.full(len(key), np.inf)
    np.minimum.at(floor_s, which, delays.delay_s)
    stretch, minute = key >> 40, (key & ((1 << 40) - 1)) - _SHIFT
    if len(key) < FEWEST_MINUTES:
        return NOTHING
    chosen = np.unique(np.linspace(0, len(key) - 1, min(len(key), MOST_PAIRED)).round().astype(np.intp))
    one, other = np.triu_indices(len(chosen), 1)
    one, other = chosen[one], chosen[other]
    paired = stretch[one] == stretch[other]
    if paired.sum() < FEWEST_MINUTES:
        return NOTHING
    one, other = one[paired], other[paired]
    slope = float(np.median((floor_s[other] - floor_s[one]) / ((minute[other] - minute[one]) * 60.0)))
    mean_s = np.bincount(stretch, weights=floor_s) / np.maximum(np.bincount(stretch), 1)
    _, error = long_run.slope_error(floor_s - mean_s[stretch])
    interval = None
    if error is not None:
        half = error.half_width(confidence) / (len(key) * 60.0)
        interval = (slope - half) * 1e6, (slope + half) * 1e6
    return Estimate(slope * 1e6, interval, confidence, len(key))
