"""C/N0: how strong the signals are, by signal, by satellite, by elevation, over time."""

from __future__ import annotations

from typing import ClassVar, Self

import numpy as np
import numpy.typing as npt

from gnssmon.epochs.batch import EpochBatch
from gnssmon.estimators.histogram import quantile
from gnssmon.estimators.series import Series
from gnssmon.estimators.tiles import Tiles
from gnssmon.quantities import DEFAULT_CONFIDENCE, NOTHING, Estimate, Quantity
from gnssmon.statistics import level_curve
from gnssmon.statistics.estimates import mean_estimate
from gnssmon.statistics.grid import (
    LABELS,
    PER_DB,
    SIGNAL_STEP,
    STRONGEST,
    Grid,
    elevations_deg,
    grid_of,
    labels_of_lines,
    portions,
    strongest_sums,
)
from gnssmon.statistics.level_curve import BAND_DEG, BANDS
from gnssmon.statistics.looks import Looks
from gnssmon.statistics.pictures import LevelPicture
from gnssmon.statistics.subject import EVERYTHING, Site, Span

FAMILY = "cn0.mean_dbhz."
MOST_ROWS = 100_000
"""Epochs kept one by one for intervals, more than a day at 1 Hz; then evenly thinned in time."""
DB_STEP = 64
"""Whole dB-Hz in a histogram; no antenna gives 63, and what is above counts as 63."""
LOUDEST_TENTH = 999
SPREAD_LADDER = ((120, 10), (1440, 60), (14_400, 1440))
"""Histograms have many entries: single minutes for two hours only, then ten minutes, hours, and days."""
LINES_LADDER = ((2880, 10),)
"""No wider than ten minutes, in which a satellite moves by five degrees."""
PER_TENTH = PER_DB // 10

RAW = "unweighted mean over signal reports with C/N0 > 0, in dB-Hz"


class SignalLevel:
    """Sums and histograms of the levels by signal, satellite and minute."""

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
        self._lines = Tiles(2, ladder=LINES_LADDER)
        """Levels and their sum (hundredths) by satellite and signal."""
        self._spread = Tiles(ladder=SPREAD_LADDER)
        """Levels by signal, elevation band and whole dB-Hz."""
        self._tenths = Tiles()
        """Levels of all signals by tenth of a dB-Hz."""
        self._strongest = Tiles(2)
        """Epochs with four satellites and more, and the sum of the four strongest levels (hundredths)."""
        self._looks = Looks()
        self._series = Series({"mean": np.float32, "strongest4": np.float32}, most_rows=MOST_ROWS)
        self._answers: dict[tuple[Span, float], dict[str, Estimate]] = {}

    def update(self, batch: EpochBatch) -> None:
        """Take in closed epochs."""
        if not len(batch.signals.epoch):
            return
        self._answers.clear()
        for part in portions(batch):
            self._take(part)

    def _take(self, batch: EpochBatch) -> None:
        grid = grid_of(batch)
        self._looks.update(grid)
        self._count(grid)
        heard = (grid.level > 0).sum(axis=0)
        total = grid.level.sum(axis=0, dtype=np.int64)
        four = strongest_sums(grid)
        enough = grid.tracked.sum(axis=0) >= STRONGEST
        count, sums = grid.sums(np.stack([enough, np.where(enough, four, 0)]))
        run = np.flatnonzero(count)
        self._strongest.add(grid.minute[run], np.zeros(len(run), dtype=np.intp), count[run], sums[run])
        has = heard > 0
        self._series.update(
            batch.axis_ms[has],
            mean=total[has] / heard[has] / PER_DB,
            strongest4=np.where(enough, four / (STRONGEST * PER_DB), np.nan)[has],
        )

    def merge(self, other: Self) -> None:
        """Take in what ``other`` knows of a later part of the stream."""
        self._answers.clear()
        self._lines.merge(other._lines)
        self._spread.merge(other._spread)
        self._tenths.merge(other._tenths)
        self._strongest.merge(other._strongest)
        self._looks.merge(other._looks)
        self._series.merge(other._series)

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity by name, over whole minutes, and one of the family for each signal heard."""
        key = (span, confidence)
        if key not in self._answers:
            if len(self._answers) > 8:
                self._answers.clear()
            self._answers[key] = self._summarise(span, confidence)
        return dict(self._answers[key])

    def picture(self, span: Span = EVERYTHING) -> LevelPicture:
        """Level against elevation, satellite by satellite, and over time reduced to one elevation."""
        column, counts = self._spread.total(span.from_ms, span.to_ms)
        spread = np.zeros(len(LABELS) * (BANDS + 1) * DB_STEP, dtype=np.int64)
        spread[column] = counts[:, 0]
        return level_curve.picture(
            self._lines.select(span.from_ms, span.to_ms),
            spread.reshape(len(LABELS), BANDS + 1, DB_STEP)[:, :BANDS],
            self._looks.within(span),
        )

    def _count(self, grid: Grid) -> None:
        """Count every level by signal, elevation, minute and whole dB; sums by line and minute; tenths over all."""
        runs = len(grid.run)
        heard = grid.sums(grid.level > 0)
        line, at = np.nonzero(heard)
        self._lines.add(grid.minute[at], grid.line[line], heard[line, at], grid.sums(grid.level)[line, at])
        run = np.repeat(np.arange(runs), np.diff(grid.run, append=grid.epochs))
        labels, label = np.unique(labels_of_lines(grid.line), return_inverse=True)
        owner = np.searchsorted(grid.satellite, grid.line // SIGNAL_STEP)
        band = np.minimum((elevations_deg(grid.direction) / BAND_DEG).astype(np.int64), BANDS - 1)
        band = np.where(grid.direction >= 0, np.maximum(band, 0), BANDS)
        whole = (grid.level + np.int16(PER_DB // 2)) // np.int16(PER_DB)
        np.minimum(whole, np.int16(DB_STEP - 1), out=whole)
        cell = band[owner]
        cell += (label * (BANDS + 1))[:, None]
        cell += run * (len(labels) * (BANDS + 1))
        cell *= DB_STEP
        cell += whole
        counts = np.bincount(cell.ravel(), minlength=runs * len(labels) * (BANDS + 1) * DB_STEP)
        # Level 0 means: not heard. Nothing is heard at less than half a dB-Hz.
        counts[::DB_STEP] = 0
        filled = np.flatnonzero(counts)
        place, level = np.divmod(filled, DB_STEP)
        at, place = np.divmod(place, len(labels) * (BANDS + 1))
        which, band = np.divmod(place, BANDS + 1)
        self._spread.add(grid.minute[at], (labels[which] * (BANDS + 1) + band) * DB_STEP + level, counts[filled])
        self._count_tenths(grid, run)

    def _count_tenths(self, grid: Grid, run: npt.NDArray[np.intp]) -> None:
        step = LOUDEST_TENTH + 1
        tenth = np.minimum((grid.level + np.int16(PER_TENTH // 2)) // np.int16(PER_TENTH), LOUDEST_TENTH)
        counts = np.bincount((tenth + run * step).ravel(), minlength=len(grid.run) * step)
        counts[::step] = 0
        filled = np.flatnonzero(counts)
        at, tenth = np.divmod(filled, step)
        self._tenths.add(grid.minute[at], tenth, counts[filled])

    def _summarise(self, span: Span, confidence: float) -> dict[str, Estimate]:
        answers = {quantity.name: NOTHING for quantity in self.QUANTITIES if not quantity.name.endswith("*")}
        minute, line, values = self._lines.select(span.from_ms, span.to_ms)
        if not len(minute):
            return answers
        chosen = self._series.within(span.from_ms, span.to_ms)
        samples = self._series["mean"].view(np.float32)[chosen]
        count, total = values.sum(axis=0).tolist()
        answers["cn0.mean_dbhz"] = mean_estimate(samples, confidence, value=total / count / PER_DB, count=count)
        tenth, counts = self._tenths.total(span.from_ms, span.to_ms)
        median = quantile(tenth / 10.0, counts[:, 0], 0.5)
        # Levels of the same satellites rise and fall together: a median is as uncertain as the mean.
        answers["cn0.median_dbhz"] = mean_estimate(samples, confidence, value=median, count=count)
        _, strongest = self._strongest.total(span.from_ms, span.to_ms)
        if len(strongest):
            epochs, total = strongest[0].tolist()
            samples = self._series["strongest4"].view(np.float32)[chosen]
            answers["cn0.strongest4_mean_dbhz"] = mean_estimate(
                samples[np.isfinite(samples)], confidence, value=total / epochs / (STRONGEST * PER_DB), count=epochs
            )
        label = labels_of_lines(line)
        minutes, which = np.unique(minute, return_inverse=True)
        cell = label * len(minutes) + which
        by_minute = [
            np.bincount(cell, weights=measure, minlength=len(LABELS) * len(minutes)).reshape(len(LABELS), -1)
            for measure in values.T
        ]
        for i in np.unique(label).tolist():
            heard, sums = (measure[i] for measure in by_minute)
            present = heard > 0
            mean = float(sums.sum() / heard.sum() / PER_DB)
            answers[FAMILY + LABELS[i]] = mean_estimate(
                sums[present] / heard[present] / PER_DB, confidence, value=mean, count=int(heard.sum())
            )
        return answers
