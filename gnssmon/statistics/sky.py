"""The sky: where satellites passed, where they were heard, and how high the horizon stands.

Strategy. ``looks`` keeps a row per satellite and minute; everything else, cells, horizon, tracks, is computed from the
rows of a window.
"""

from __future__ import annotations

from typing import ClassVar, Self

import numpy as np
import numpy.typing as npt

from gnssmon.constellations import identity
from gnssmon.epochs.batch import EpochBatch
from gnssmon.geodesy import directions
from gnssmon.quantities import DEFAULT_CONFIDENCE, NOTHING, Estimate, Quantity, exact
from gnssmon.statistics.grid import CODES
from gnssmon.statistics.looks import Looks
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
Ints = npt.NDArray[np.int64]

SECTORS = 36
CELLS_ABOVE = "equal-area cells: T. Fuhrmann et al., GPS Solutions 19 (2015)"
HORIZON = "likelihood of a step in the share of tracked passes over elevation; this program's own definition"

LOWEST_HORIZON, HIGHEST_HORIZON = 0, 80
TRACKED_BELOW, TRACKED_ABOVE = 0.05, 0.90
"""Share of the time that a satellite is heard below and above the horizon; start values, common practice, no source."""
NEIGHBOURS = 0.5
"""Weight of a degree: neighbouring ones tell much the same."""
PASS_MINUTES = 15
"""Rows of one satellite further apart than this belong to different passes."""
HALF = 0.5
HIGH_DEG = 40.0
"""A satellite above this is hidden by hardly anything."""
FEWEST_DEGREES = 5
"""Elevations that must have been looked at in a sector before a horizon is given."""

ORBITS = {"G": (26_559_700.0, 55.0), "R": (25_508_000.0, 64.8), "E": (29_599_800.0, 56.0), "C": (27_906_000.0, 55.0)}
"""Nominal orbit radius (m) and inclination (deg): GPS SPS PS, GLONASS ICD, Galileo OS SDD, BeiDou ICD (MEO)."""


class Sky:
    """Directions of the satellites, minute by minute."""

    QUANTITIES: ClassVar[tuple[Quantity, ...]] = (
        Quantity(
            name="sky.coverage_share",
            unit="share",
            meaning="Share of sky cells above the mask that any satellite crossed.",
            source=CELLS_ABOVE,
        ),
        Quantity(
            name="sky.coverage_reachable_share",
            unit="share",
            meaning="The same, of the cells that satellites of the systems heard can ever cross from this latitude.",
            source=CELLS_ABOVE,
        ),
        Quantity(
            name="sky.obstructed_share",
            unit="share",
            meaning="Share of the crossed cells above the mask in which satellites mostly had no signal.",
            source=CELLS_ABOVE,
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
        self._latitude_deg = np.nan

    def update(self, batch: EpochBatch) -> None:
        """Take in closed epochs."""
        where = np.flatnonzero(batch.fixed_position)
        if len(where):
            self._latitude_deg = float(batch.latitude_deg[where[-1]])
        self._looks.update(batch)

    def merge(self, other: Self) -> None:
        """Take in what ``other`` knows of a later part of the stream."""
        if np.isfinite(other._latitude_deg):
            self._latitude_deg = other._latitude_deg
        self._looks.merge(other._looks)

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity by name; shares are facts of what was seen."""
        answers = {quantity.name: NOTHING for quantity in self.QUANTITIES}
        rows = self._within(span)
        if not len(rows["minute"]):
            return answers
        state, seen = self._cells(rows)
        _, middle = directions.cell_centres()
        above = middle >= self._site.mask_deg
        crossed = above & seen
        answers["sky.coverage_share"] = exact(float(crossed.sum() / above.sum()), int(above.sum()))
        reachable = above & (state != CELL_UNREACHABLE)
        if reachable.any():
            share = float((crossed & reachable).sum() / reachable.sum())
            answers["sky.coverage_reachable_share"] = exact(share, int(reachable.sum()))
        if crossed.any():
            blocked = crossed & (state == CELL_BLOCKED)
            answers["sky.obstructed_share"] = exact(float(blocked.sum() / crossed.sum()), int(crossed.sum()))
        horizon, _, _ = self._horizon(rows)
        if np.isfinite(horizon).any():
            values = tuple(float(h) if np.isfinite(h) else None for h in horizon)
            answers["sky.mask_deg"] = Estimate(values, samples=len(rows["minute"]))
        return answers

    def picture(self, span: Span = EVERYTHING) -> SkyPicture:
        """Cells with their state, horizon, tracks."""
        rows = self._within(span)
        state, _ = self._cells(rows)
        horizon, low, high = self._horizon(rows)
        edges = directions.cell_edges()
        return SkyPicture(
            azimuth_from_deg=edges[0],
            azimuth_to_deg=edges[1],
            elevation_from_deg=edges[2],
            elevation_to_deg=edges[3],
            state=state,
            residual_db=_residuals(rows),
            horizon_deg=horizon,
            horizon_low_deg=low,
            horizon_high_deg=high,
            tracks=_tracks(rows),
            mask_deg=self._site.mask_deg,
        )

    def _within(self, span: Span) -> dict[str, npt.NDArray[np.generic]]:
        rows = self._looks.within(span)
        silent = _never_heard(rows)
        return {name: column[~silent] for name, column in rows.items()} if silent.any() else rows

    def _cells(self, rows: dict[str, npt.NDArray[np.generic]]) -> tuple[npt.NDArray[np.uint8], npt.NDArray[np.bool_]]:
        """State of each cell, and whether any satellite crossed it."""
        cell = directions.cell_of(rows["azimuth_deg"].astype(np.float64), rows["elevation_deg"].astype(np.float64))
        listed = np.bincount(cell, weights=rows["listed"].astype(np.float64), minlength=directions.CELLS)
        tracked = np.bincount(cell, weights=rows["tracked"].astype(np.float64), minlength=directions.CELLS)
        seen = listed > 0
        share = np.divide(tracked, listed, out=np.zeros(directions.CELLS), where=seen)
        state = np.full(directions.CELLS, CELL_UNKNOWN, dtype=np.uint8)
        state[seen] = CELL_MIXED
        state[seen & (share >= 1.0 - HALF / 2)] = CELL_OPEN
        state[seen & (share < HALF / 2)] = CELL_BLOCKED
        if np.isfinite(self._latitude_deg):
            reach = np.zeros(directions.CELLS, dtype=bool)
            heard = {identity.label(code)[0] for code in np.unique(rows["satellite"].astype(np.int64)).tolist()}
            for letter in heard & ORBITS.keys():
                reach |= directions.reachable(self._latitude_deg, *ORBITS[letter])
            state[~seen & ~reach] = CELL_UNREACHABLE
        return state, seen

    def _horizon(self, rows: dict[str, npt.NDArray[np.generic]]) -> tuple[Floats, Floats, Floats]:
        """Median and 5 % to 95 % of the horizon's posterior per sector of 10 degrees, shape (36,); NaN unseen."""
        result = np.full((3, SECTORS), np.nan)
        if not len(rows["minute"]):
            return result[0], result[1], result[2]
        elevation = np.clip(rows["elevation_deg"].astype(np.int64), 0, 90)
        sector = rows["azimuth_deg"].astype(np.int64) // (360 // SECTORS)
        passes = rows["minute"].view(np.int64) // PASS_MINUTES
        # One unit: a satellite's pass through one degree of elevation in a sector.
        unit = ((passes * CODES + rows["satellite"].astype(np.int64)) * SECTORS + sector) * 91 + elevation
        keys, which = np.unique(unit, return_inverse=True)
        listed = np.bincount(which, weights=rows["listed"].astype(np.float64))
        tracked = np.bincount(which, weights=rows["tracked"].astype(np.float64))
        share = tracked / np.maximum(listed, 1.0)
        degree, place = keys % 91, keys // 91 % SECTORS
        heard = np.zeros((SECTORS, 91))
        missed = np.zeros((SECTORS, 91))
        np.add.at(heard, (place, degree), share)
        np.add.at(missed, (place, degree), 1.0 - share)
        candidates = np.arange(LOWEST_HORIZON, HIGHEST_HORIZON + 1)
        above = np.arange(91)[None, :] >= candidates[:, None]
        gain = heard * np.log(TRACKED_ABOVE) + missed * np.log(1.0 - TRACKED_ABOVE)
        loss = heard * np.log(TRACKED_BELOW) + missed * np.log(1.0 - TRACKED_BELOW)
        likelihood = NEIGHBOURS * (gain @ above.T + loss @ ~above.T)
        weight = np.exp(likelihood - likelihood.max(axis=1, keepdims=True))
        heap = np.cumsum(weight / weight.sum(axis=1, keepdims=True), axis=1)
        enough = ((heard + missed) > 0).sum(axis=1) >= FEWEST_DEGREES
        for i, share_below in enumerate((0.5, 0.05, 0.95)):
            result[i, enough] = candidates[(heap[enough] >= share_below).argmax(axis=1)]
        return result[0], result[1], result[2]


def _never_heard(rows: dict[str, npt.NDArray[np.generic]]) -> npt.NDArray[np.bool_]:
    """Rows of satellites that stood high in the sky and were never heard at all: switched off, unhealthy, or not
    received by this receiver. They say nothing about the site."""
    satellite = rows["satellite"].astype(np.int64)
    heard = np.bincount(satellite, weights=rows["tracked"].astype(np.float64), minlength=CODES)
    highest = np.full(CODES, -90.0)
    np.maximum.at(highest, satellite, rows["elevation_deg"].astype(np.float64))
    silent: npt.NDArray[np.bool_] = ((heard == 0) & (highest >= HIGH_DEG))[satellite]
    return silent


def _residuals(rows: dict[str, npt.NDArray[np.generic]]) -> Floats:
    """Mean level minus the mean at the same elevation (5-degree bins), per cell, dB; NaN unknown."""
    cn0 = rows["cn0_dbhz"].astype(np.float64)
    heard = np.isfinite(cn0)
    if not heard.any():
        return np.full(directions.CELLS, np.nan)
    elevation = rows["elevation_deg"].astype(np.float64)[heard]
    level = cn0[heard]
    band = np.clip(elevation // 5, 0, 17).astype(np.intp)
    count = np.bincount(band, minlength=18)
    mean = np.bincount(band, weights=level, minlength=18) / np.maximum(count, 1)
    cell = directions.cell_of(rows["azimuth_deg"].astype(np.float64)[heard], elevation)
    number = np.bincount(cell, minlength=directions.CELLS)
    total = np.bincount(cell, weights=level - mean[band], minlength=directions.CELLS)
    result = np.full(directions.CELLS, np.nan)
    np.divide(total, number, out=result, where=number > 0)
    return result


def _tracks(rows: dict[str, npt.NDArray[np.generic]]) -> tuple[Track, ...]:
    """Each satellite's way over the sky, thinned evenly to MOST_POINTS in all."""
    if not len(rows["minute"]):
        return ()
    every = max(1, -(-len(rows["minute"]) // MOST_POINTS))
    minute = rows["minute"].view(np.int64)
    kept = minute % every == 0
    satellite = rows["satellite"].astype(np.int64)[kept]
    order = np.argsort(satellite, kind="stable")
    codes, first = np.unique(satellite[order], return_index=True)
    tracks = []
    for code, part in zip(codes.tolist(), np.split(order, first[1:]), strict=True):
        tracks.append(
            Track(
                satellite=identity.label(code),
                azimuth_deg=rows["azimuth_deg"][kept][part].astype(np.float64),
                elevation_deg=rows["elevation_deg"][kept][part].astype(np.float64),
                tracked=rows["tracked"][kept][part] > 0,
            )
        )
    return tuple(tracks)
