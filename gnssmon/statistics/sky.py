"""The sky: where satellites passed, where they were heard, and how high the horizon stands."""

from __future__ import annotations

import math
from typing import ClassVar, Self

import numpy as np
import numpy.typing as npt

from gnssmon.constellations import identity
from gnssmon.constellations.systems import LETTERS
from gnssmon.epochs.batch import EpochBatch
from gnssmon.estimators.tiles import Tiles
from gnssmon.estimators.uncertainty import share_interval
from gnssmon.geodesy import directions
from gnssmon.quantities import DEFAULT_CONFIDENCE, NOTHING, Estimate, Quantity, exact
from gnssmon.statistics.grid import CODES, grid_of, portions
from gnssmon.statistics.horizon import Horizon, horizon, passes
from gnssmon.statistics.looks import Looks, Rows
from gnssmon.statistics.pictures import (
    CELL_BLOCKED,
    CELL_MIXED,
    CELL_OPEN,
    CELL_UNKNOWN,
    CELL_UNREACHABLE,
    MOST_POINTS,
    SkyPicture,
    Track,
)
from gnssmon.statistics.subject import EVERYTHING, Site, Span

Floats = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]

CELLS = "263 equal-area cells; idea of congruent cells: T. Fuhrmann et al., GPS Solutions 19 (2015)"
HORIZON = "likelihood of a step in the share heard over elevation; this program's own definition"

OPEN, BLOCKED = 0.75, 0.25
"""A cell is open when satellites in it were heard at least so much of the time, blocked when less than this; between
them it is mixed. Common practice, no source."""
HIGH_DEG = 40.0
"""A satellite that is silent even above this is hidden by nothing: it is switched off, or not one of the receiver's."""
DEGREE_MICRO = 1e6
BAND_DEG = 5.0
BANDS = 18
SETTLING_ROWS = 60.0
"""Rows (minutes) after which a satellite's own level counts as much as what is known of satellites in general."""

COVERED = 0.9
"""Share of the reachable cells that a record should have crossed. Common practice, no source."""
FLATTEST, STEEPEST = 0.85, 1.2
"""Bounds of the exponent b in 1 - exp(-(t/a)^b): the cells that satellites stand in at the start make it look flatter
than it goes on (simulated skies of one, two and four systems)."""
SHORTEST_FORECAST_S, LONGEST_FORECAST_S = 1800.0, 2 * 86_400.0

ORBITS = {"G": (26_559_700.0, 55.0), "R": (25_508_000.0, 64.8), "E": (29_599_800.0, 56.0), "C": (27_906_000.0, 55.0)}
"""Nominal orbit radius (m) and inclination (deg): GPS SPS PS, GLONASS ICD, Galileo OS SDD, BeiDou ICD (MEO)."""


class Sky:
    """Directions of the satellites, minute by minute."""

    QUANTITIES: ClassVar[tuple[Quantity, ...]] = (
        Quantity(
            name="sky.coverage_share",
            unit="share",
            meaning="Share of sky cells above the mask that any satellite crossed.",
            source=CELLS,
        ),
        Quantity(
            name="sky.coverage_reachable_share",
            unit="share",
            meaning="The same, of the cells that satellites of the systems seen can ever cross from this latitude.",
            source=CELLS,
        ),
        Quantity(
            name="sky.coverage_needed_s",
            unit="s",
            meaning=(
                "Estimated further time until 90 % of the reachable cells above the mask are crossed; 0 when they are. "
                "None within the first half hour, and where two more days would not do."
            ),
            source="1 - exp(-(t/a)^b) through the coverage at half the time and now; this program's own definition",
        ),
        Quantity(
            name="sky.obstructed_share",
            unit="share",
            meaning=(
                "Share of the crossed cells above the mask in which satellites were silent for most of the time. "
                "No interval where the receiver lists no silent satellite at all: it might hide them."
            ),
            source=CELLS,
        ),
        Quantity(
            name="sky.mask_deg",
            unit="deg",
            meaning="Estimated horizon per 10 degrees of azimuth from north, 36 numbers; null where unseen.",
            source=HORIZON,
        ),
    )

    def __init__(self, site: Site) -> None:
        self._site = site
        self._looks = Looks()
        self._latitude = Tiles(2)
        """Fixes and sum of their latitudes, millionths of a degree."""
        self._read: tuple[Span, Rows, Horizon] | None = None

    def update(self, batch: EpochBatch) -> None:
        """Take in closed epochs."""
        self._read = None
        for part in portions(batch):
            self._take(part)

    def _take(self, batch: EpochBatch) -> None:
        grid = grid_of(batch)
        self._looks.update(grid)
        fixed = batch.fixed_position
        latitude = np.rint(np.where(fixed, batch.latitude_deg, 0.0) * DEGREE_MICRO)
        count, total = grid.sums(np.stack([fixed, latitude]))
        run = np.flatnonzero(count)
        self._latitude.add(grid.minute[run], np.zeros(len(run), dtype=np.intp), count[run], total[run])

    def merge(self, other: Self) -> None:
        """Take in what ``other`` knows of a later part of the stream."""
        self._read = None
        self._looks.merge(other._looks)
        self._latitude.merge(other._latitude)

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity by name, over whole minutes."""
        answers = {quantity.name: NOTHING for quantity in self.QUANTITIES}
        rows, line = self._within(span)
        if not len(rows):
            return answers
        state, seen = self._cells(rows)
        _, middle_deg = directions.cell_centres()
        above = middle_deg >= self._site.mask_deg
        crossed = above & seen
        answers["sky.coverage_share"] = exact(float(crossed.sum() / above.sum()), int(above.sum()))
        reachable = above & (state != CELL_UNREACHABLE)
        if reachable.any():
            share = float((crossed & reachable).sum() / reachable.sum())
            answers["sky.coverage_reachable_share"] = exact(share, int(reachable.sum()))
            needed_s = _needed_s(rows, reachable, share)
            if needed_s is not None:
                answers["sky.coverage_needed_s"] = Estimate(needed_s, samples=int(reachable.sum()))
        if crossed.any():
            share = float((crossed & (state == CELL_BLOCKED)).sum() / crossed.sum())
            # Cells are not independent witnesses; passes nearly are.
            witnesses = min(int(crossed.sum()), int(passes(rows).max()) + 1)
            silence_is_told = bool((rows.tracked < rows.listed).any())
            interval = share_interval(share, witnesses, confidence) if silence_is_told else None
            answers["sky.obstructed_share"] = Estimate(share, interval, confidence, int(crossed.sum()), witnesses)
        if np.isfinite(line.median).any():
            values = tuple(float(value) if np.isfinite(value) else None for value in line.median)
            answers["sky.mask_deg"] = Estimate(values, samples=len(rows))
        return answers

    def picture(self, span: Span = EVERYTHING) -> SkyPicture:
        """Cells with their state, horizon, tracks."""
        rows, line = self._within(span)
        state, _ = self._cells(rows)
        azimuth_from, azimuth_to, elevation_from, elevation_to = directions.cell_edges()
        return SkyPicture(
            azimuth_from_deg=azimuth_from,
            azimuth_to_deg=azimuth_to,
            elevation_from_deg=elevation_from,
            elevation_to_deg=elevation_to,
            state=state,
            residual_db=_residuals(rows),
            horizon_deg=line.median,
            horizon_low_deg=line.low,
            horizon_high_deg=line.high,
            tracks=_tracks(rows),
            mask_deg=self._site.mask_deg,
        )

    def _within(self, span: Span) -> tuple[Rows, Horizon]:
        if self._read is None or self._read[0] != span:
            rows = self._looks.within(span)
            rows = rows.part(~_never_heard(rows))
            self._read = span, rows, horizon(rows)
        return self._read[1:]

    def _cells(self, rows: Rows) -> tuple[npt.NDArray[np.uint8], Flags]:
        """State of each cell, and whether any satellite crossed it."""
        cell = directions.cell_of(rows.azimuth_deg, rows.elevation_deg)
        listed = np.bincount(cell, weights=rows.listed, minlength=directions.CELLS)
        tracked = np.bincount(cell, weights=rows.tracked, minlength=directions.CELLS)
        seen = listed > 0
        share = np.divide(tracked, listed, out=np.zeros(directions.CELLS), where=seen)
        state = np.full(directions.CELLS, CELL_UNKNOWN, dtype=np.uint8)
        state[seen] = CELL_MIXED
        state[seen & (share >= OPEN)] = CELL_OPEN
        state[seen & (share < BLOCKED)] = CELL_BLOCKED
        _, latitude = self._latitude.total()
        if len(latitude):
            latitude_deg = float(latitude[0, 1] / latitude[0, 0] / DEGREE_MICRO)
            reach = np.zeros(directions.CELLS, dtype=bool)
            for system in np.unique(rows.satellite // identity.SYSTEM_STEP).tolist():
                if LETTERS[system] in ORBITS:
                    reach |= directions.reachable(latitude_deg, *ORBITS[LETTERS[system]])
            if reach.any():
                state[~seen & ~reach] = CELL_UNREACHABLE
        return state, seen


def _never_heard(rows: Rows) -> Flags:
    """Rows of satellites that stood high in the sky and were never heard: they say nothing about the site."""
    heard = np.bincount(rows.satellite, weights=rows.tracked, minlength=CODES)
    high = np.bincount(rows.satellite, weights=rows.elevation_deg >= HIGH_DEG, minlength=CODES)
    silent: Flags = ((heard == 0) & (high > 0))[rows.satellite]
    return silent


def _needed_s(rows: Rows, reachable: Flags, share: float) -> float | None:
    """Further time until ``COVERED`` of the reachable cells are crossed; None: cannot be told."""
    if share >= COVERED:
        return 0.0
    first = int(rows.minute[0])
    lasted_s = float(rows.minute[-1] + 1 - first) * 60.0
    if lasted_s < SHORTEST_FORECAST_S:
        return None
    cell = directions.cell_of(rows.azimuth_deg, rows.elevation_deg)
    early = np.zeros(directions.CELLS, dtype=bool)
    early[cell[(rows.minute - first) * 60.0 < lasted_s / 2.0]] = True
    before = float((early & reachable).sum() / reachable.sum())
    if not 0.0 < before < share:
        return None
    missing = math.log1p(-share)
    steepness = min(max(math.log(missing / math.log1p(-before)) / math.log(2.0), FLATTEST), STEEPEST)
    total_s = lasted_s * (math.log1p(-COVERED) / missing) ** (1.0 / steepness)
    return total_s - lasted_s if total_s - lasted_s <= LONGEST_FORECAST_S else None


def _residuals(rows: Rows) -> Floats:
    """Mean level against that of satellites at the same elevation, per cell, dB; NaN unknown.

    A satellite that is strong or weak wherever it stands is first brought to the others' level.
    """
    result = np.full(directions.CELLS, np.nan)
    heard = rows.part(np.isfinite(rows.level_dbhz))
    if not len(heard):
        return result
    band = np.clip(heard.elevation_deg // BAND_DEG, 0, BANDS - 1).astype(np.intp)
    number = np.bincount(heard.satellite, minlength=CODES)
    own_db = np.zeros(CODES)
    for _ in range(3):
        level = heard.level_dbhz - own_db[heard.satellite]
        curve = np.bincount(band, weights=level, minlength=BANDS) / np.maximum(np.bincount(band, minlength=BANDS), 1)
        own_db = np.bincount(heard.satellite, weights=heard.level_dbhz - curve[band], minlength=CODES) / (
            number + SETTLING_ROWS
        )
    residual = heard.level_dbhz - curve[band] - own_db[heard.satellite]
    cell = directions.cell_of(heard.azimuth_deg, heard.elevation_deg)
    count = np.bincount(cell, minlength=directions.CELLS)
    np.divide(np.bincount(cell, weights=residual, minlength=directions.CELLS), count, out=result, where=count > 0)
    return result


def _tracks(rows: Rows) -> tuple[Track, ...]:
    """Each satellite's way over the sky, thinned evenly to MOST_POINTS in all."""
    if not len(rows):
        return ()
    rows = rows.part(rows.minute % max(1, -(-len(rows) // MOST_POINTS)) == 0) if len(rows) > MOST_POINTS else rows
    order = np.argsort(rows.satellite, kind="stable")
    codes, first = np.unique(rows.satellite[order], return_index=True)
    return tuple(
        Track(
            satellite=identity.label(code),
            azimuth_deg=rows.azimuth_deg[part],
            elevation_deg=rows.elevation_deg[part],
            tracked=rows.tracked[part] > 0,
        )
        for code, part in zip(codes.tolist(), np.split(order, first[1:]), strict=True)
    )
