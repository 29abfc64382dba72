"""Dilution of precision: as the receiver reports it, and recomputed from where the satellites used stand."""

from __future__ import annotations

from typing import ClassVar, Self

import numpy as np
import numpy.typing as npt

from gnssmon.epochs.batch import EpochBatch
from gnssmon.estimators.series import Series
from gnssmon.geodesy.dop import dilution
from gnssmon.quantities import DEFAULT_CONFIDENCE, NOTHING, Estimate, Quantity, exact
from gnssmon.statistics.grid import CODES, grid_of_chosen
from gnssmon.statistics.subject import EVERYTHING, Site, Span

MOST_ROWS = 1_500_000
"""Reported values kept one by one, two weeks at 1 Hz (36 MB); beyond that evenly thinned in time."""
MOST_RECOMPUTED = 300_000
SLOT_MS = 10_000
"""Recomputed at most once in ten seconds: the geometry does not change faster."""
SYSTEM_STEP = 1024
LANGLEY = "R. B. Langley, Dilution of precision, GPS World, May 1999"
REPORTED = "as the receiver reports it (GSA; HDOP from GGA or GNS)"
ENOUGH = 0.8
"""Share of an epoch's used satellites whose direction must be known: a missing one changes the geometry."""


class Dop:
    """Reported and recomputed values, epoch by epoch."""

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
                "whichever is nearer to the receiver's; whole degrees move it by about 1 %."
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
            meaning="1: the receiver's HDOP fits one clock a system better; 0: one clock for all systems.",
            source="this program's own definition",
        ),
    )

    def __init__(self, site: Site) -> None:
        self._reported = Series(dict.fromkeys(("pdop", "hdop", "vdop"), np.float32), most_rows=MOST_ROWS)
        names = ("hdop", "hdop_common", "pdop_common", "hdop_systems", "pdop_systems")
        self._recomputed = Series(dict.fromkeys(names, np.float32), most_rows=MOST_RECOMPUTED)
        self._slot: int | None = None

    def update(self, batch: EpochBatch) -> None:
        """Take in closed epochs."""
        counted = batch.counted & (batch.quality != 0)
        self._reported.update(
            batch.axis_ms[counted], pdop=batch.pdop[counted], hdop=batch.hdop[counted], vdop=batch.vdop[counted]
        )
        self._recompute(batch)

    def merge(self, other: Self) -> None:
        """Take in what ``other`` knows of a later part of the stream."""
        self._reported.merge(other._reported)
        if other._slot is None:
            return
        # The ten seconds that the border cuts were looked at by both parts: the earlier look counts.
        begin = int(self._slot is not None and int(other._recomputed.axis_ms[0]) // SLOT_MS == self._slot)
        if begin:
            names = ("hdop", "hdop_common", "pdop_common", "hdop_systems", "pdop_systems")
            rest = {name: other._recomputed[name][begin:] for name in names}
            self._recomputed.update(other._recomputed.axis_ms[begin:], **rest)
        else:
            self._recomputed.merge(other._recomputed)
        self._slot = other._slot

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity by name. Medians of what was seen: no interval is given beyond it."""
        answers = {quantity.name: NOTHING for quantity in self.QUANTITIES}
        chosen = self._reported.within(span.from_ms, span.to_ms)
        for name in ("pdop", "hdop", "vdop"):
            values = _finite(self._reported[name].view(np.float32)[chosen])
            if len(values):
                answers[f"dop.{name}_median"] = exact(_short(np.median(values)), len(values))
                if name == "pdop":
                    answers["dop.pdop_max"] = exact(_short(values.max()), len(values))
        chosen = self._recomputed.within(span.from_ms, span.to_ms)
        columns = {
            name: self._recomputed[name].view(np.float32)[chosen].astype(np.float64)
            for name in ("hdop", "hdop_common", "pdop_common", "hdop_systems", "pdop_systems")
        }
        fits = {}
        for kind in ("common", "systems"):
            difference = _finite(np.abs(columns[f"hdop_{kind}"] - columns["hdop"]))
            fits[kind] = float(np.median(difference)) if len(difference) else np.inf
        kind = "systems" if fits["systems"] <= fits["common"] else "common"
        for name in ("hdop", "pdop"):
            values = _finite(columns[f"{name}_{kind}"])
            if len(values):
                answers[f"dop.{name}_recomputed_median"] = exact(float(np.median(values)), len(values))
                answers["dop.clocks_per_system"] = exact(float(kind == "systems"), len(values))
        return answers

    def picture(self, span: Span = EVERYTHING) -> None:
        """Drawn with the fix, minute by minute."""

    def _recompute(self, batch: EpochBatch) -> None:
        count = len(batch)
        if not count or not len(batch.used.epoch) or not len(batch.signals.epoch):
            return
        has = np.zeros(count, dtype=bool)
        has[batch.used.epoch] = True
        listed = np.zeros(count, dtype=bool)
        listed[batch.signals.epoch] = True
        able = np.flatnonzero(has & listed)
        if not len(able):
            return
        slot = batch.axis_ms[able] // SLOT_MS
        first = np.ones(len(able), dtype=bool)
        first[1:] = slot[1:] != slot[:-1]
        first[0] = self._slot is None or slot[0] != self._slot
        self._slot = int(slot[-1])
        chosen = np.zeros(count, dtype=bool)
        chosen[able[first]] = True
        if chosen.any():
            self._add(batch, chosen)

    def _add(self, batch: EpochBatch, chosen: npt.NDArray[np.bool_]) -> None:
        grid = grid_of_chosen(batch, chosen)
        place = np.cumsum(chosen) - 1
        column = np.full(CODES, -1)
        column[grid.satellite] = np.arange(len(grid.satellite))
        rows = np.flatnonzero(chosen[batch.used.epoch])
        epoch, at = place[batch.used.epoch[rows]], column[batch.used.satellite[rows]]
        used = np.zeros(grid.listed.shape, dtype=bool)
        used[epoch[at >= 0], at[at >= 0]] = True
        # Listed twice, a satellite counts once; SBAS of GP and GSA of two signals are no second satellites.
        named = np.bincount(epoch, minlength=len(used))
        placed = used & np.isfinite(grid.azimuth_deg)
        system = grid.satellite // SYSTEM_STEP
        _, clock = np.unique(system, return_inverse=True)
        angles = grid.azimuth_deg.astype(np.float64), grid.elevation_deg.astype(np.float64)
        common = dilution(*angles, placed, np.zeros(len(system), dtype=np.intp))
        apart = dilution(*angles, placed, clock.astype(np.intp))
        known = placed.sum(axis=1) >= ENOUGH * named
        blank = np.where(known, 1.0, np.nan)
        self._recomputed.update(
            batch.axis_ms[chosen],
            hdop=batch.hdop[chosen],
            hdop_common=common.hdop * blank,
            pdop_common=common.pdop * blank,
            hdop_systems=apart.hdop * blank,
            pdop_systems=apart.pdop * blank,
        )


def _finite(values: npt.NDArray[np.floating]) -> npt.NDArray[np.floating]:
    finite: npt.NDArray[np.floating] = values[np.isfinite(values)]
    return finite


def _short(value: np.floating) -> float:
    """Reported values have few decimals; single precision would print more."""
    return round(float(value), 4)
