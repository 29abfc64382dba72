"""Quantities epoch by epoch, and their value over a short window that slides: what alarms listen to.

Strategy. The tiles of the subjects answer for whole minutes; an alarm asks for the last ten seconds, every second.
So each quantity that an alarm may name says here what one epoch contributes: a numerator and a denominator whose sums
give the window's value (``RATIO``), or a value whose largest, smallest or median counts. ``Sliding`` keeps the
contributions of the longest window in memory and answers for any number of instants at once. The order of epochs is
all that matters: the same epochs give the same answers however they were cut into batches.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from enum import Enum

import numpy as np
import numpy.typing as npt

from gnssmon.epochs.batch import EpochBatch
from gnssmon.statistics.grid import LABELS, grid_of, label_numbers, portions, strongest_mean
from gnssmon.statistics.subject import Site

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]


class Combine(Enum):
    """How epochs become a window's value."""

    RATIO = "sum of numerators / sum of denominators"
    LARGEST = "largest"
    SMALLEST = "smallest"
    MEDIAN = "median"


@dataclass(frozen=True, slots=True)
class Instant:
    """What one epoch contributes to a quantity."""

    combine: Combine
    contribution: Callable[[EpochBatch, Site], tuple[Floats, Floats]]
    """Numerator and denominator, shape (n,) each. A denominator of 0 says that the epoch has nothing to say."""


def _value(
    column: Callable[[EpochBatch], npt.NDArray[np.generic]],
) -> Callable[[EpochBatch, Site], tuple[Floats, Floats]]:
    def contribution(batch: EpochBatch, site: Site) -> tuple[Floats, Floats]:
        values = column(batch).astype(np.float64)
        known = np.isfinite(values) & batch.counted
        return np.where(known, values, 0.0), known.astype(np.float64)

    return contribution


def _share(*qualities: int) -> Instant:
    return Instant(Combine.RATIO, _value(lambda batch: np.isin(batch.quality, qualities)))


def _used(batch: EpochBatch) -> Floats:
    return np.where((batch.quality > 0) & (batch.satellites_used >= 0), batch.satellites_used.astype(float), np.nan)


def _levels(batch: EpochBatch, label: str | None = None) -> tuple[Floats, Floats]:
    rows = batch.signals
    heard = np.isfinite(rows.cn0_dbhz)
    if label is not None:
        heard &= label_numbers(rows.satellite, rows.signal) == (LABELS.index(label) if label in LABELS else -1)
    epoch = rows.epoch[heard]
    total = np.bincount(epoch, weights=rows.cn0_dbhz[heard].astype(np.float64), minlength=len(batch))
    return total.astype(np.float64), np.bincount(epoch, minlength=len(batch)).astype(np.float64)


def _strongest4(batch: EpochBatch, site: Site) -> tuple[Floats, Floats]:
    """Mean of the four strongest satellites of every epoch that has as many."""
    mean = np.concatenate([np.empty(0), *(strongest_mean(grid_of(part)) for part in portions(batch))])
    return np.nan_to_num(mean), np.isfinite(mean).astype(np.float64)


def _in_view(batch: EpochBatch, site: Site) -> tuple[Floats, Floats]:
    count = np.concatenate([np.empty(0), *(grid_of(part).listed.sum(axis=0) for part in portions(batch))])
    return count, (count > 0).astype(np.float64)


def _epochs(batch: EpochBatch, site: Site) -> tuple[Floats, Floats]:
    return batch.counted.astype(np.float64), np.ones(len(batch))


def _load(batch: EpochBatch, site: Site) -> tuple[Floats, Floats]:
    return batch.size.astype(np.float64), np.ones(len(batch))


PER_WINDOW = ("stream.completeness", "stream.link_load")
"""Sums that are held against the window's length, not against a denominator."""

INSTANTS: dict[str, Instant] = {
    "stream.completeness": Instant(Combine.RATIO, _epochs),
    "stream.link_load": Instant(Combine.RATIO, _load),
    "fix.share_none": _share(0),
    "fix.share_autonomous": _share(1),
    "fix.share_differential": _share(2),
    "fix.share_rtk_float": _share(5),
    "fix.share_rtk_fixed": _share(4),
    "fix.share_estimated": _share(6),
    "satellites.used_mean": Instant(Combine.RATIO, _value(_used)),
    "satellites.used_min": Instant(Combine.SMALLEST, _value(_used)),
    "satellites.in_view_mean": Instant(Combine.RATIO, _in_view),
    "cn0.mean_dbhz": Instant(Combine.RATIO, lambda batch, site: _levels(batch)),
    "cn0.strongest4_mean_dbhz": Instant(Combine.RATIO, _strongest4),
    "dop.pdop_median": Instant(Combine.MEDIAN, _value(lambda batch: batch.pdop)),
    "dop.pdop_max": Instant(Combine.LARGEST, _value(lambda batch: batch.pdop)),
    "dop.hdop_median": Instant(Combine.MEDIAN, _value(lambda batch: batch.hdop)),
    "corrections.age_median_s": Instant(Combine.MEDIAN, _value(lambda batch: batch.correction_age_s)),
    "corrections.age_max_s": Instant(Combine.LARGEST, _value(lambda batch: batch.correction_age_s)),
}
"""Every quantity that an alarm may watch; beside these, each member of ``cn0.mean_dbhz.*``."""

LEVEL_FAMILY = "cn0.mean_dbhz."


def find(name: str) -> Instant | None:
    """The contribution behind a quantity's name; None: an alarm cannot watch it."""
    if name in INSTANTS:
        return INSTANTS[name]
    if name.startswith(LEVEL_FAMILY):
        label = name.removeprefix(LEVEL_FAMILY)
        return Instant(Combine.RATIO, lambda batch, site: _levels(batch, label))
    return None


_FUNCTIONS: dict[Combine, Callable[..., Floats]] = {
    Combine.LARGEST: np.nanmax,
    Combine.SMALLEST: np.nanmin,
    Combine.MEDIAN: np.nanmedian,
}

SHORTEST_STEP_MS = 10
"""Steps below this are repeats or a clock being set, not a rate: 50 Hz is the fastest stream."""


class Sliding:
    """One quantity over a window of ``window_s`` seconds, at any instant of the time axis.

    Holds the contributions of the last window only.
    """

    def __init__(self, name: str, window_s: float, site: Site) -> None:
        instant = find(name)
        if instant is None:
            raise KeyError(name)
        self._name, self._instant, self._site = name, instant, site
        self._window_ms = round(window_s * 1000)
        self._axis_ms = np.empty(0, dtype=np.int64)
        self._top = np.empty(0)
        self._bottom = np.empty(0)
        self._step_ms = np.empty(0)
        self._shortest_ms = np.inf

    def update(self, batch: EpochBatch) -> None:
        """Take in closed epochs."""
        if not len(batch):
            return
        top, bottom = self._instant.contribution(batch, self._site)
        previous = self._axis_ms[-1:] if len(self._axis_ms) else batch.axis_ms[:1]
        steps = np.diff(batch.axis_ms, prepend=previous).astype(np.float64)
        steps[steps < SHORTEST_STEP_MS] = np.inf
        shortest = np.minimum.accumulate(np.minimum(steps, self._shortest_ms))
        self._shortest_ms = float(shortest[-1])
        self._axis_ms = np.concatenate([self._axis_ms, batch.axis_ms])
        self._top = np.concatenate([self._top, top])
        self._bottom = np.concatenate([self._bottom, bottom])
        self._step_ms = np.concatenate([self._step_ms, shortest])

    def at(self, instants_ms: Ints) -> Floats:
        """The quantity over (t - window, t] for each t, shape as given, rising; NaN where nothing is known.

        Epochs older than the last answer's window are forgotten.
        """
        # A time axis that stepped back is not sorted: the latest stretch counts.
        axis_ms = np.maximum.accumulate(self._axis_ms)
        low = np.searchsorted(axis_ms, instants_ms - self._window_ms, side="right")
        high = np.searchsorted(axis_ms, instants_ms, side="right")
        # Rounded: the sums begin where the last window began, and their last bits must not tell of that.
        values = np.round(self._combined(low, high), 9)
        if len(instants_ms) and low[-1] > 0:
            keep = slice(int(min(low[-1], len(axis_ms) - 1)), None)
            self._axis_ms, self._top = self._axis_ms[keep].copy(), self._top[keep].copy()
            self._bottom, self._step_ms = self._bottom[keep].copy(), self._step_ms[keep].copy()
        return values

    def _combined(self, low: npt.NDArray[np.intp], high: npt.NDArray[np.intp]) -> Floats:
        if self._instant.combine is Combine.RATIO:
            top = np.concatenate([[0.0], np.cumsum(self._top)])
            bottom = np.concatenate([[0.0], np.cumsum(self._bottom)])
            total, weight = top[high] - top[low], bottom[high] - bottom[low]
            if self._name in PER_WINDOW:
                return self._against_window(total, high)
            ratio = np.full(len(low), np.nan)
            np.divide(total, weight, out=ratio, where=weight > 0)
            return ratio
        function = _FUNCTIONS[self._instant.combine]
        known = np.where(self._bottom > 0, self._top, np.nan)
        values = np.full(len(low), np.nan)
        length = high - low
        # Windows of a steady stream hold equally many epochs: those of one length are a matrix.
        for one in np.unique(length[length > 0]).tolist():
            rows = np.flatnonzero(length == one)
            window = known[low[rows][:, None] + np.arange(one)]
            some = np.isfinite(window).any(axis=1)
            values[rows[some]] = function(window[some], axis=1)
        return values

    def _against_window(self, total: Floats, high: npt.NDArray[np.intp]) -> Floats:
        window_s = self._window_ms / 1000.0
        if self._name == "stream.link_load":
            return total * 10.0 / (window_s * self._site.baud) if self._site.baud else np.full(len(total), np.nan)
        if not len(self._step_ms):
            return np.full(len(total), np.nan)
        step_ms = self._step_ms[np.maximum(high - 1, 0)]
        # A window shorter than the stream's own step may hold nothing while nothing is missing.
        due = np.where(step_ms <= self._window_ms, np.floor(self._window_ms / step_ms), np.nan)
        return np.minimum(total / due, 1.0)
