"""Dilution of precision: as the receiver reports it, and recomputed from where the satellites used stand."""

from __future__ import annotations

from dataclasses import replace
from typing import ClassVar, Self

import numpy as np
import numpy.typing as npt

from gnssmon.constellations.identity import SYSTEM_STEP
from gnssmon.epochs.batch import EpochBatch
from gnssmon.estimators import long_run
from gnssmon.estimators.histogram import quantile
from gnssmon.estimators.series import Series
from gnssmon.estimators.tiles import Tiles
from gnssmon.geodesy.dop import dilution
from gnssmon.quantities import DEFAULT_CONFIDENCE, NOTHING, Estimate, Quantity, exact
from gnssmon.statistics.estimates import quantile_estimate
from gnssmon.statistics.grid import CODES, azimuths_deg, elevations_deg, grid_of, portions
from gnssmon.statistics.subject import EVERYTHING, Site, Span

Floats = npt.NDArray[np.float64]

MOST_ROWS = 100_000
"""Reported values kept one by one for intervals, and recomputed ones (12 days); then evenly thinned in time."""
SLOT_MS = 10_000
"""Recomputed at most once in ten seconds: the geometry does not change faster."""
PER_UNIT = 1000
"""Reported values are counted in thousandths; receivers print two decimals at most."""
LARGEST = 1000.0
"""A reported value beyond this (99.99 often means: none) says no more than this one."""
NAME_STEP = 1 << 24
REPORTED_NAMES = ("hdop", "pdop", "vdop")
RECOMPUTED_NAMES = ("reported", "hdop_common", "pdop_common", "hdop_systems", "pdop_systems")
LANGLEY = "R. B. Langley, Dilution of precision, GPS World, May 1999"
REPORTED = "as the receiver reports it (GSA; HDOP from GGA or GNS)"
TELLING = 0.01
"""The two conventions must lie so much differently far from the reported HDOP, which is printed to 0.01 or 0.1."""
ENOUGH = 0.8
"""Share of an epoch's used satellites whose direction must be known: a missing one changes the geometry."""


class Dop:
    """Counts of the reported values by the minute; recomputed values one by one."""

    QUANTITIES: ClassVar[tuple[Quantity, ...]] = (
        Quantity(name="dop.pdop_median", unit="1", meaning="Median of the reported PDOP.", source=REPORTED),
        Quantity(name="dop.pdop_max", unit="1", meaning="Largest reported PDOP.", source=REPORTED),
        Quantity(name="dop.hdop_median", unit="1", meaning="Median of the reported HDOP.", source=REPORTED),
        Quantity(name="dop.vdop_median", unit="1", meaning="Median of the reported VDOP.", source=REPORTED),
        Quantity(
            name="dop.hdop_recomputed_median",
            unit="1",
            meaning=(
                "Median HDOP from azimuth and elevation of the satellites used, one clock a system or one for all, "
                "whichever is nearer to the receiver's; whole degrees move it by 0.1 to 0.5 %, at most 3 %."
            ),
            source=LANGLEY,
        ),
        Quantity(
            name="dop.pdop_recomputed_median",
            unit="1",
            meaning="Median PDOP from azimuth and elevation of the satellites used, clocks as for the HDOP.",
            source=LANGLEY,
        ),
        Quantity(
            name="dop.clocks_per_system",
            unit="1",
            meaning=(
                "1: the receiver's HDOP fits one clock a system better; 0: one clock for all systems. None where both "
                "fit about as well, which is usual: they differ by 1 %."
            ),
            source="this program's own definition",
        ),
    )

    def __init__(self, site: Site) -> None:
        self._counts = Tiles()
        """Epochs by name and value."""
        self._reported = Series(dict.fromkeys(REPORTED_NAMES, np.float32), most_rows=MOST_ROWS)
        self._recomputed = Series(dict.fromkeys(RECOMPUTED_NAMES, np.float32), most_rows=MOST_ROWS)
        self._slot: int | None = None

    def update(self, batch: EpochBatch) -> None:
        """Take in closed epochs."""
        if not len(batch):
            return
        for part in portions(batch):
            self._recompute(part)
        counted = np.flatnonzero(batch.counted & (batch.quality != 0))
        values = {name: getattr(batch, name)[counted] for name in REPORTED_NAMES}
        minute = batch.minute[counted]
        for index, name in enumerate(REPORTED_NAMES):
            known = np.flatnonzero(values[name] > 0.0)
            whole = np.rint(np.minimum(values[name][known], LARGEST) * PER_UNIT).astype(np.int64)
            self._counts.add(minute[known], whole + index * NAME_STEP)
        self._reported.update(batch.axis_ms[counted], **values)

    def merge(self, other: Self) -> None:
        """Take in what ``other`` knows of a later part of the stream."""
        self._counts.merge(other._counts)
        self._reported.merge(other._reported)
        if other._slot is None:
            return
        later = other._recomputed
        # The other began with its first epoch; here that may be the second of a slot.
        again = int(len(later) > 0 and self._slot == later.axis_ms[0] // SLOT_MS)
        self._recomputed.update(later.axis_ms[again:], **{name: later[name][again:] for name in RECOMPUTED_NAMES})
        self._slot = other._slot

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity by name."""
        answers = {quantity.name: NOTHING for quantity in self.QUANTITIES}
        chosen = self._reported.within(span.from_ms, span.to_ms)
        column, counts = self._counts.total(span.from_ms, span.to_ms)
        for index, name in enumerate(REPORTED_NAMES):
            own = column // NAME_STEP == index
            if not own.any():
                continue
            value, count = column[own] % NAME_STEP / PER_UNIT, counts[own, 0]
            samples = self._reported[name].view(np.float32)[chosen].astype(np.float64)
            samples = np.round(samples[samples > 0.0], 3)
            median = quantile_estimate(samples, 0.5, confidence, value=quantile(value, count, 0.5))
            answers[f"dop.{name}_median"] = _at_least_in_range(median, samples)
            if name == "pdop":
                answers["dop.pdop_max"] = exact(float(value[-1]), int(count.sum()))
        chosen = self._recomputed.within(span.from_ms, span.to_ms)
        columns = {
            name: self._recomputed[name].view(np.float32)[chosen].astype(np.float64) for name in RECOMPUTED_NAMES
        }
        distance = {clocks: _distance(columns, clocks) for clocks in ("common", "systems")}
        clocks = min(distance, key=lambda kind: distance[kind])
        if abs(distance["systems"] - distance["common"]) > TELLING:
            answers["dop.clocks_per_system"] = exact(float(clocks == "systems"), len(columns["reported"]))
        for name in ("hdop", "pdop"):
            values = columns[f"{name}_{clocks}"]
            values = values[np.isfinite(values)]
            if len(values):
                median = quantile_estimate(values, 0.5, confidence)
                answers[f"dop.{name}_recomputed_median"] = _at_least_in_range(median, values)
        return answers

    def picture(self, span: Span = EVERYTHING) -> None:
        """Drawn with the fix, minute by minute."""

    def _recompute(self, batch: EpochBatch) -> None:
        """Choose the first epoch of each slot that tells which satellites were used and where they stand."""
        able = np.zeros((2, len(batch)), dtype=bool)
        able[0, batch.used.epoch] = True
        able[1, batch.signals.epoch] = True
        epochs = np.flatnonzero(able.all(axis=0))
        if not len(epochs):
            return
        slot = batch.axis_ms[epochs] // SLOT_MS
        first = np.diff(slot, prepend=slot[0] - 1 if self._slot is None else self._slot) != 0
        self._slot = int(slot[-1])
        if first.any():
            self._add(batch, epochs[first])

    def _add(self, batch: EpochBatch, chosen: npt.NDArray[np.intp]) -> None:
        grid = grid_of(batch)
        place = np.full(len(batch), -1)
        place[chosen] = np.arange(len(chosen))
        row = np.flatnonzero(place[batch.used.epoch] >= 0)
        epoch, satellite = place[batch.used.epoch[row]], batch.used.satellite[row]
        number = np.bincount(np.unique(epoch * CODES + satellite) // CODES, minlength=len(chosen))
        line = np.full(CODES, -1)
        line[grid.satellite] = np.arange(len(grid.satellite))
        at = line[satellite]
        direction = grid.direction[:, chosen].T
        used = np.zeros(direction.shape, dtype=bool)
        used[epoch[at >= 0], at[at >= 0]] = True
        used &= direction >= 0
        _, clock = np.unique(grid.satellite // SYSTEM_STEP, return_inverse=True)
        angles = azimuths_deg(direction), elevations_deg(direction)
        common = dilution(*angles, used, np.zeros(len(clock), dtype=np.intp))
        systems = dilution(*angles, used, clock)
        blank = np.where(used.sum(axis=1) >= ENOUGH * number, 1.0, np.nan)
        self._recomputed.update(
            batch.axis_ms[chosen],
            reported=batch.hdop[chosen],
            hdop_common=common.hdop * blank,
            pdop_common=common.pdop * blank,
            hdop_systems=systems.hdop * blank,
            pdop_systems=systems.pdop * blank,
        )


def _at_least_in_range(median: Estimate, samples: Floats) -> Estimate:
    """The estimate, with the range seen and as much again on either side where samples move too slowly to say more.

    Common practice, no source: a geometry follows the satellites' paths, and does not leave its range by chance.
    """
    if median.interval is not None or len(samples) < long_run.FEWEST_SAMPLES:
        return median
    low, high = float(samples.min()), float(samples.max())
    return replace(median, interval=(max(2.0 * low - high, 0.0), 2.0 * high - low))


def _distance(columns: dict[str, Floats], clocks: str) -> float:
    """How far the recomputed HDOP lies from the reported one, typically; infinite where neither is known."""
    difference = np.abs(columns[f"hdop_{clocks}"] - columns["reported"])
    difference = difference[np.isfinite(difference)]
    return float(np.median(difference)) if len(difference) else np.inf
