"""C/N0: how strong the signals are, by signal, by elevation, over time."""

from __future__ import annotations

from typing import ClassVar, Self

import numpy as np
import numpy.typing as npt

from gnssmon.epochs.batch import EpochBatch
from gnssmon.estimators import long_run
from gnssmon.estimators.series import Series
from gnssmon.estimators.tiles import Tiles
from gnssmon.quantities import DEFAULT_CONFIDENCE, NOTHING, Estimate, Quantity
from gnssmon.statistics.grid import LABELS, grid_of, label_numbers, strongest_mean
from gnssmon.statistics.pictures import LevelPicture
from gnssmon.statistics.subject import EVERYTHING, Site, Span

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]

FAMILY = "cn0.mean_dbhz."
BIN_DEG = 5.0
BINS = 18
TENTHS = 1000
"""Levels from 0 to 99.9 dB-Hz in steps of 0.1, finer than receivers print."""
WHOLE = 100
SLOWEST_HOUR = 60
"""Minutes to a row of the finer histograms: quantiles by elevation are drawn over whole hours."""
MOST_ROWS = 1_500_000
CURVE_MINUTES = 10
REFERENCE_BIN = 9
"""45 to 50 degrees: the elevation that the level over time is reduced to."""

RAW = "unweighted mean over signal reports with C/N0 > 0, in dB-Hz"


class SignalLevel:
    """Counts of levels by signal, elevation and minute."""

    QUANTITIES: ClassVar[tuple[Quantity, ...]] = (
        Quantity(name="cn0.mean_dbhz", unit="dB-Hz", meaning="Mean C/N0 of all signals.", source=RAW),
        Quantity(name="cn0.median_dbhz", unit="dB-Hz", meaning="Median C/N0 of all signals.", source=RAW),
        Quantity(
            name="cn0.strongest4_mean_dbhz",
            unit="dB-Hz",
            meaning="Mean over epochs of the four strongest satellites' C/N0, each by its strongest signal.",
            source="common practice, no source",
        ),
        Quantity(
            name=f"{FAMILY}*",
            unit="dB-Hz",
            meaning="Mean C/N0 of one signal: G1, E5a, …; the bare system letter where the stream names no signal.",
            source=RAW,
        ),
    )

    def __init__(self, site: Site) -> None:
        labels = len(LABELS)
        self._levels = Tiles(TENTHS, kind=np.int32)
        self._counts = Tiles(labels * (BINS + 1), kind=np.int32)
        """By label and elevation bin; the last bin is for an elevation not stated."""
        self._sums = Tiles(labels, kind=np.int64)
        """Thousandths of dB-Hz by label."""
        self._curve = Tiles(labels * BINS, grid=CURVE_MINUTES, kind=np.int64)
        self._spread = Tiles(labels * BINS * WHOLE, grid=SLOWEST_HOUR, kind=np.int32)
        self._series = Series({"mean": np.float32, "strongest4": np.float32}, most_rows=MOST_ROWS)
        self._answers: dict[tuple[Span, float], dict[str, Estimate]] = {}

    def update(self, batch: EpochBatch) -> None:
        """Take in closed epochs."""
        rows = batch.signals
        heard = np.flatnonzero(np.isfinite(rows.cn0_dbhz))
        if not len(heard):
            return
        self._answers.clear()
        epoch, satellite, signal = rows.epoch[heard], rows.satellite[heard], rows.signal[heard]
        cn0_dbhz, elevation_deg = rows.cn0_dbhz[heard], rows.elevation_deg[heard]
        minute = batch.minute[epoch]
        label = label_numbers(satellite, signal)
        thousandths = np.rint(cn0_dbhz.astype(np.float64) * 1000.0)
        stated = np.isfinite(elevation_deg)
        elevation_bin = np.full(len(heard), BINS, dtype=np.intp)
        elevation_bin[stated] = np.clip(elevation_deg[stated] // BIN_DEG, 0, BINS - 1)
        self._levels.add(minute, np.clip(np.rint(thousandths / 100.0), 0, TENTHS - 1).astype(np.intp))
        self._counts.add(minute, label * (BINS + 1) + elevation_bin)
        self._sums.add(minute, label, thousandths)
        cell = label[stated] * BINS + elevation_bin[stated]
        self._curve.add(minute[stated], cell, thousandths[stated])
        whole = np.clip(np.rint(cn0_dbhz[stated]), 0, WHOLE - 1).astype(np.intp)
        self._spread.add(minute[stated], cell * WHOLE + whole)
        count = np.bincount(epoch, minlength=len(batch))
        total = np.bincount(epoch, weights=thousandths, minlength=len(batch))
        has = count > 0
        self._series.update(
            batch.axis_ms[has], mean=total[has] / count[has] / 1000.0, strongest4=strongest_mean(grid_of(batch))[has]
        )

    def merge(self, other: Self) -> None:
        """Take in what ``other`` knows of a later part of the stream."""
        self._answers.clear()
        for name in ("_levels", "_counts", "_sums", "_curve", "_spread", "_series"):
            getattr(self, name).merge(getattr(other, name))

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity by name, and one of the family for each signal heard."""
        key = (span, confidence)
        if key not in self._answers:
            self._answers[key] = self._summarise(span, confidence)
        return dict(self._answers[key])

    def picture(self, span: Span = EVERYTHING) -> LevelPicture:
        """Level against elevation, and level over time reduced to one elevation."""
        labels = len(LABELS)
        count = self._counts.total(span.from_ms, span.to_ms).reshape(labels, BINS + 1)
        heard = np.flatnonzero(count.sum(axis=1))
        by_bin = count[heard, :BINS]
        total = self._curve.total(span.from_ms, span.to_ms).reshape(labels, BINS)[heard] / 1000.0
        in_curve = self._bin_counts(span)[heard]
        mean = _ratio(total, in_curve)
        spread = self._spread.total(span.from_ms, span.to_ms).reshape(labels, BINS, WHOLE)[heard]
        minute, level = self._common(span, heard, mean)
        return LevelPicture(
            signals=tuple(LABELS[i] for i in heard),
            elevation_deg=(np.arange(BINS, dtype=np.float64) + 0.5) * BIN_DEG,
            mean_dbhz=mean,
            low_dbhz=_quantile(spread, 0.05),
            high_dbhz=_quantile(spread, 0.95),
            count=by_bin,
            minute=minute,
            level_dbhz=level,
        )

    def _bin_counts(self, span: Span) -> Ints:
        """Levels behind the curve's sums, which are kept in rows of ten minutes."""
        wide_ms = CURVE_MINUTES * 60_000
        low = None if span.from_ms is None else span.from_ms // wide_ms * wide_ms
        high = None if span.to_ms is None else -(-span.to_ms // wide_ms) * wide_ms
        counts = self._counts.total(low, high).reshape(len(LABELS), BINS + 1)
        return counts[:, :BINS]

    def _common(self, span: Span, heard: Ints, curve: Floats) -> tuple[Ints, Floats]:
        """What all satellites of a signal have in common, minute by minute, shape (signals, t).

        A minute's mean level minus the mean of the curve at the elevations at which its satellites stood, put back on
        the curve's value at 45-50 degrees (or its mean): satellites that rise and set do not move it.
        """
        minute, counts = self._counts.within(span.from_ms, span.to_ms)
        _, sums = self._sums.within(span.from_ms, span.to_ms)
        by_bin = counts.reshape(len(minute), len(LABELS), BINS + 1)[:, heard, :]
        stated = by_bin[:, :, :BINS]
        number = by_bin.sum(axis=2)
        mean = _ratio(sums[:, heard] / 1000.0, number)
        expected = _ratio((stated * np.nan_to_num(curve)).sum(axis=2), stated.sum(axis=2))
        overall = _ratio((np.nan_to_num(curve) * stated.sum(axis=0)).sum(axis=1), stated.sum(axis=(0, 2)))
        base = curve[:, REFERENCE_BIN] if len(heard) else np.empty(0)
        base = np.where(np.isfinite(base), base, overall)
        reduced = mean - expected + base
        return minute, np.where(np.isfinite(reduced), reduced, mean).T

    def _summarise(self, span: Span, confidence: float) -> dict[str, Estimate]:
        answers = {quantity.name: NOTHING for quantity in self.QUANTITIES if not quantity.name.endswith("*")}
        counts = self._counts.total(span.from_ms, span.to_ms).reshape(len(LABELS), BINS + 1).sum(axis=1)
        if not counts.sum():
            return answers
        sums = self._sums.total(span.from_ms, span.to_ms)
        levels = self._levels.total(span.from_ms, span.to_ms)
        chosen = self._series.within(span.from_ms, span.to_ms)
        epoch_means = self._series["mean"].view(np.float32)[chosen]
        total = int(counts.sum())
        answers["cn0.mean_dbhz"] = _with_interval(float(sums.sum()) / total / 1000.0, epoch_means, confidence, total)
        median = float(_quantile(levels[None, :], 0.5)[0]) / 10.0
        answers["cn0.median_dbhz"] = _with_interval(median, epoch_means, confidence, total)
        strongest = self._series["strongest4"].view(np.float32)[chosen]
        strongest = strongest[np.isfinite(strongest)]
        if len(strongest):
            mean = float(strongest.mean(dtype=np.float64))
            answers["cn0.strongest4_mean_dbhz"] = _with_interval(mean, strongest, confidence, len(strongest))
        _, minute_sums = self._sums.within(span.from_ms, span.to_ms)
        _, minute_counts = self._counts.within(span.from_ms, span.to_ms)
        by_label = minute_counts.reshape(len(minute_counts), len(LABELS), BINS + 1).sum(axis=2)
        for i in np.flatnonzero(counts).tolist():
            present = by_label[:, i] > 0
            minutes = minute_sums[present, i] / by_label[present, i] / 1000.0
            mean = float(sums[i]) / int(counts[i]) / 1000.0
            answers[FAMILY + LABELS[i]] = _with_interval(mean, minutes, confidence, int(counts[i]))
        return answers


def _with_interval(value: float, samples: npt.NDArray[np.generic], confidence: float, count: int) -> Estimate:
    """The value with the interval of the mean of evenly spaced samples of the same thing."""
    numbers = samples.astype(np.float64)
    error = long_run.mean_error(numbers)
    if error is None:
        still = len(numbers) >= long_run.FEWEST_SAMPLES and float(np.ptp(numbers)) == 0.0
        return Estimate(value, (value, value) if still else None, confidence, count)
    half = error.half_width(confidence)
    return Estimate(value, (value - half, value + half), confidence, count)


def _ratio(top: Floats, bottom: npt.NDArray[np.integer]) -> Floats:
    """Division that gives NaN where the bottom is 0."""
    result = np.full(np.broadcast_shapes(top.shape, bottom.shape), np.nan)
    np.divide(top, bottom, out=result, where=bottom > 0)
    return result


def _quantile(histogram: Ints, share: float) -> Floats:
    """Quantile of counts along the last axis, in bins, linear between order statistics (type 7); NaN where empty."""
    total = histogram.sum(axis=-1)
    heap = np.cumsum(histogram, axis=-1)
    rank = np.maximum(total - 1, 0) * share
    low, high = np.floor(rank), np.ceil(rank)
    value = [np.argmax(heap > r[..., None], axis=-1).astype(np.float64) for r in (low, high)]
    result = value[0] + (value[1] - value[0]) * (rank - low)
    return np.where(total > 0, result, np.nan)
