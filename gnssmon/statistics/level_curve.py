"""Level against elevation, what is each satellite's own, and what all satellites have in common at a time.

Strategy. A minute's mean level of one satellite's signal is taken as a sum: curve of the signal at the satellite's
elevation + the satellite's own offset + what all have in common in that minute + rest. Satellites differ by some dB in
what they send, so a plain mean over those in view moves whenever one rises or sets; the common part does not. Curve and
offsets are found by turns (backfitting: J. H. Friedman & W. Stuetzle, J. Am. Stat. Assoc. 76, 1981), offsets drawn
towards zero by what is known of satellites in general; the common part by Huber's robust mean (P. J. Huber, Ann. Math.
Stat. 35, 1964), so that one satellite behind a tree does not move it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.constellations import identity
from gnssmon.estimators.histogram import quantiles
from gnssmon.estimators.tiles import Entries
from gnssmon.statistics.grid import LABELS, PER_DB, SIGNAL_STEP, labels_of_lines
from gnssmon.statistics.looks import Rows
from gnssmon.statistics.pictures import LevelPicture

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]

BAND_DEG = 5.0
BANDS = 18
REFERENCE_BAND = 9
"""45 to 50 degrees: the elevation that the level over time is reduced to."""
TURNS = 4
SETTLING_MINUTES = 30.0
"""Minutes after which a satellite's own offset counts as much as what is known of satellites in general (1 dB); their
errors hang together over some minutes. Common practice, no source."""
HUBER = 1.5
FEWEST_COMMON = 3
"""Satellites needed to tell what is common; with fewer a minute's level is left out."""


@dataclass(frozen=True, slots=True)
class _Levels:
    """One row a line (satellite and signal) and minute with a level and a direction; arrays of shape (k,)."""

    minute: Ints
    line: Ints
    signal: npt.NDArray[np.intp]
    """Row among the signals of the picture."""
    elevation_deg: Floats
    count: Floats
    level_dbhz: Floats


def picture(lines: Entries, spread: Ints, looks: Rows) -> LevelPicture:
    """What can be drawn of levels.

    ``lines``: count and sum by line and minute. ``spread``: counts by label, band of elevation and whole dB-Hz, shape
    (labels, BANDS, levels). ``looks``: where satellites stood.
    """
    label = labels_of_lines(lines.column)
    labels = np.unique(label)
    signals = len(labels)
    elevation_deg = _elevations(lines.minute, lines.column // SIGNAL_STEP, looks)
    stated = np.isfinite(elevation_deg)
    count, total = lines.values.T
    levels = _Levels(
        lines.minute[stated],
        lines.column[stated],
        np.searchsorted(labels, label[stated]),
        elevation_deg[stated],
        count[stated].astype(np.float64),
        total[stated] / count[stated] / PER_DB,
    )
    cell = levels.signal * BANDS + _band(levels.elevation_deg)
    number = _summed(cell, levels.count, signals * BANDS).reshape(signals, BANDS)
    mean = _ratio(_summed(cell, levels.count * levels.level_dbhz, signals * BANDS).reshape(signals, BANDS), number)
    curve, offset = _curve_and_offsets(levels, signals)
    line, of_line = np.unique(levels.line, return_inverse=True)
    by_line = _summed(of_line, levels.count, len(line))
    minute, level = _over_time(levels, curve, offset, signals)
    return LevelPicture(
        signals=tuple(LABELS[i] for i in labels.tolist()),
        elevation_deg=(np.arange(BANDS, dtype=np.float64) + 0.5) * BAND_DEG,
        mean_dbhz=mean,
        low_dbhz=quantiles(spread[labels], 0.05),
        high_dbhz=quantiles(spread[labels], 0.95),
        count=np.rint(number).astype(np.int64),
        minute=minute,
        level_dbhz=level,
        satellites=tuple(identity.label(code) for code in (line // SIGNAL_STEP).tolist()),
        satellite_signal=np.searchsorted(labels, labels_of_lines(line)),
        satellite_count=np.rint(by_line).astype(np.int64),
        satellite_mean_dbhz=_ratio(_summed(of_line, levels.count * levels.level_dbhz, len(line)), by_line),
        satellite_offset_db=_ratio(_summed(of_line, offset, len(line)), np.bincount(of_line, minlength=len(line))),
    )


def _elevations(minute: Ints, satellite: Ints, looks: Rows) -> Floats:
    """Elevation of each satellite in each minute, shape (k,), by rising minute and satellite; NaN not known."""
    result = np.full(len(minute), np.nan)
    if not len(looks) or not len(minute):
        return result
    wanted = (minute << 32) | satellite
    first = np.ones(len(wanted), dtype=bool)
    np.not_equal(wanted[1:], wanted[:-1], out=first[1:])
    distinct = wanted[first]
    known = (looks.minute << 32) | looks.satellite
    at = np.minimum(np.searchsorted(known, distinct), len(known) - 1)
    found: Floats = np.where(known[at] == distinct, looks.elevation_deg[at], np.nan)
    spread: Floats = found[np.cumsum(first) - 1]
    return spread


def _band(elevation_deg: Floats) -> npt.NDArray[np.intp]:
    return np.clip(elevation_deg // BAND_DEG, 0, BANDS - 1).astype(np.intp)


def _curve_and_offsets(levels: _Levels, signals: int) -> tuple[Floats, Floats]:
    """The curve's values at the bins' middles, shape (signals, BANDS), NaN unseen; each row's offset, shape (k,)."""
    line, of_line = np.unique(levels.line, return_inverse=True)
    minutes = np.bincount(of_line, minlength=len(line))
    cell = levels.signal * BANDS + _band(levels.elevation_deg)
    number = np.bincount(cell, minlength=signals * BANDS)
    offset = np.zeros(len(levels.minute))
    curve = np.full((signals, BANDS), np.nan)
    for _ in range(TURNS):
        curve = _ratio(_summed(cell, levels.level_dbhz - offset, signals * BANDS), number).reshape(signals, BANDS)
        rest = levels.level_dbhz - _at(curve, levels)
        offset = (_summed(of_line, rest, len(line)) / (minutes + SETTLING_MINUTES))[of_line]
    return curve, offset


def _at(curve: Floats, levels: _Levels) -> Floats:
    """The curve at each row's elevation, straight between the middles of the bands seen, shape (k,)."""
    filled = np.full(curve.shape, np.nan)
    for values, result in zip(curve, filled, strict=True):
        seen = np.flatnonzero(np.isfinite(values))
        if len(seen):
            result[:] = np.interp(np.arange(BANDS), seen, values[seen])
    place = np.clip(levels.elevation_deg / BAND_DEG - 0.5, 0.0, BANDS - 1.0)
    low = np.minimum(place.astype(np.intp), BANDS - 2)
    cell = levels.signal * BANDS + low
    step = np.diff(filled, axis=1, append=np.nan).ravel()
    return np.asarray(filled.ravel()[cell] + step[cell] * (place - low))


def _over_time(levels: _Levels, curve: Floats, offset: Floats, signals: int) -> tuple[Ints, Floats]:
    """Level minute by minute as a satellite at 45 to 50 degrees would have it, shape (signals, t)."""
    minute, which = np.unique(levels.minute, return_inverse=True)
    cell = levels.signal * len(minute) + which
    cells = signals * len(minute)
    rest = levels.level_dbhz - _at(curve, levels) - offset
    number = np.bincount(cell, minlength=cells)
    common = _ratio(_summed(cell, rest, cells), number)
    for _ in range(TURNS):
        distance = np.abs(rest - common[cell])
        # Mean of |x| of a normal distribution is 0.8 of its standard deviation.
        scale = np.maximum(_ratio(_summed(levels.signal, distance, signals), np.bincount(levels.signal)) / 0.8, 0.1)
        weight = np.minimum(1.0, HUBER * scale[levels.signal] / np.maximum(distance, 1e-9))
        common = _ratio(_summed(cell, weight * rest, cells), _summed(cell, weight, cells))
    common[number < FEWEST_COMMON] = np.nan
    base = curve[:, REFERENCE_BAND].copy()
    for signal in np.flatnonzero(~np.isfinite(base)).tolist():
        base[signal] = np.nanmean(curve[signal]) if np.isfinite(curve[signal]).any() else np.nan
    return minute, common.reshape(signals, len(minute)) + base[:, None]


def _summed(cell: npt.NDArray[np.intp], values: npt.NDArray[np.generic], cells: int) -> Floats:
    return np.bincount(cell, weights=values.astype(np.float64), minlength=cells).astype(np.float64)


def _ratio(top: Floats, bottom: Floats | npt.NDArray[np.integer]) -> Floats:
    """Division that gives NaN where the bottom is 0."""
    result = np.full(top.shape, np.nan)
    np.divide(top, bottom, out=result, where=bottom > 0)
    return result
