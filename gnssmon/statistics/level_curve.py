"""Level against elevation, what is each satellite's own, and what all satellites have in common at a time.

Strategy. A minute's mean level of one satellite's signal is taken as a sum: curve of the signal at the satellite's
elevation + the satellite's own offset + what all have in common at that time + rest. Satellites differ by some dB in
what they send, so a plain mean over those in view moves whenever one rises or sets; the common part does not. The three
are found by turns (backfitting: J. H. Friedman & W. Stuetzle, J. Am. Stat. Assoc. 76, 1981) on blocks of some minutes:
offsets drawn towards zero by what is known of satellites in general, the common part by Huber's robust mean (P. J.
Huber, Ann. Math. Stat. 35, 1964), so that one satellite behind a tree does not move it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.constellations import identity
from gnssmon.estimators.histogram import deviations, quantiles
from gnssmon.estimators.tiles import Entries
from gnssmon.statistics.grid import LABELS, PER_DB, SIGNAL_STEP, labels_of_lines
from gnssmon.statistics.looks import Rows
from gnssmon.statistics.pictures import LevelPicture

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]

BAND_DEG = 5.0
BANDS = 18
REFERENCE_DEG = 45.0
"""The elevation that the level over time is reduced to."""
POWERS = 4
"""Of the sine of the elevation, the constant with them: a cubic (after Strode & Groves, GPS Solutions 20, 2016)."""
STIFFNESS = 0.0025
"""(1 dB / 20 dB)² minutes."""
TURNS = 12
SETTLED_DB = 0.01
"""Turns end when no offset moves by more."""
ROBUST_TURNS = 4
MOST_ROWS = 10_000
"""Rows that the turns are made with; more are first joined to blocks."""
BLOCKS_MINUTES = (1, 2, 5, 10, 20, 60)
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
    line, of_line = np.unique(levels.line, return_inverse=True)
    curve, offset = _curve_and_offsets(_in_blocks(levels), line, signals)
    by_line = _summed(of_line, levels.count, len(line))
    rest = levels.level_dbhz - _at(curve, levels) - offset[of_line]
    minute, level = _over_time(levels, rest, curve)
    return LevelPicture(
        signals=tuple(LABELS[i] for i in labels.tolist()),
        elevation_deg=(np.arange(BANDS, dtype=np.float64) + 0.5) * BAND_DEG,
        mean_dbhz=mean,
        low_dbhz=quantiles(spread[labels], 0.05),
        high_dbhz=quantiles(spread[labels], 0.95),
        spread_db=deviations(spread[labels]),
        count=np.rint(number).astype(np.int64),
        minute=minute,
        level_dbhz=level,
        satellites=tuple(identity.label(code) for code in (line // SIGNAL_STEP).tolist()),
        satellite_signal=np.searchsorted(labels, labels_of_lines(line)),
        satellite_count=np.rint(by_line).astype(np.int64),
        satellite_mean_dbhz=_ratio(_summed(of_line, levels.count * levels.level_dbhz, len(line)), by_line),
        satellite_offset_db=offset,
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
    elevation_deg = np.where(known[at] == distinct, looks.elevation_deg[at], np.nan)
    return np.asarray(elevation_deg[np.cumsum(first) - 1])


def _band(elevation_deg: Floats) -> npt.NDArray[np.intp]:
    return np.clip(elevation_deg // BAND_DEG, 0, BANDS - 1).astype(np.intp)


def _in_blocks(levels: _Levels) -> _Levels:
    """Means over blocks of minutes, so wide that few enough rows remain."""
    for wide in BLOCKS_MINUTES:
        key, which = np.unique((levels.minute // wide) << 32 | levels.line, return_inverse=True)
        if len(key) <= MOST_ROWS:
            break
    number = np.bincount(which)
    return _Levels(
        key >> 32,
        key & ((1 << 32) - 1),
        (_summed(which, levels.signal, len(key)) / number).astype(np.intp),
        np.asarray(_summed(which, levels.elevation_deg, len(key)) / number),
        number.astype(np.float64),
        np.asarray(_summed(which, levels.level_dbhz, len(key)) / number),
    )


def _curve_and_offsets(levels: _Levels, line: Ints, signals: int) -> tuple[Floats, Floats]:
    """The curve's coefficients, shape (signals, POWERS), and the lines' offsets.

    ``levels``: counts are minutes here. ``line``: keys of the lines, rising.
    """
    of_line = np.searchsorted(line, levels.line)
    minutes = _summed(of_line, levels.count, len(line))
    power = np.sin(np.radians(levels.elevation_deg))[:, None] ** np.arange(POWERS)
    normal = np.stack(
        [
            _summed(levels.signal, levels.count * power[:, i] * power[:, j], signals)
            for i in range(POWERS)
            for j in range(POWERS)
        ],
        axis=1,
    ).reshape(signals, POWERS, POWERS)
    # A slope, bend or turn of 20 dB is as likely as not; a signal seen at one elevation only stays solvable.
    normal += np.diag([1e-9, *[STIFFNESS] * (POWERS - 1)])
    _, which = np.unique(levels.minute, return_inverse=True)
    times = levels.signal * (int(which.max(initial=0)) + 1) + which
    offset, common = np.zeros(len(line)), np.zeros(len(times))
    curve: Floats = np.zeros((signals, POWERS))
    for _ in range(TURNS):
        rest = (levels.level_dbhz - offset[of_line] - common) * levels.count
        right = np.stack([_summed(levels.signal, rest * power[:, i], signals) for i in range(POWERS)], axis=1)
        curve = np.asarray(np.linalg.solve(normal, right[:, :, None])[:, :, 0], dtype=np.float64)
        rest = levels.level_dbhz - _at(curve, levels)
        before = offset
        offset = _summed(of_line, (rest - common) * levels.count, len(line)) / (minutes + SETTLING_MINUTES)
        found = _huber(times, rest - offset[of_line], levels.signal)
        # What is common is counted from its mean: the curve holds the level itself.
        middle = _ratio(_summed(levels.signal, found[times], signals), np.bincount(levels.signal, minlength=signals))
        common = found[times] - middle[levels.signal]
        if not (np.abs(offset - before) > SETTLED_DB).any():
            break
    return curve, offset


def _huber(cell: npt.NDArray[np.intp], rest: Floats, signal: npt.NDArray[np.intp]) -> Floats:
    """Robust mean of the rows of each cell; rows are weighed against the usual distance of their signal's rows."""
    number = np.bincount(cell)
    signals = np.bincount(signal)
    common = _ratio(_summed(cell, rest, len(number)), number)
    for _ in range(ROBUST_TURNS):
        distance = np.abs(rest - common[cell])
        # The mean of |x| of a normal distribution is 0.8 of its standard deviation.
        scale = np.maximum(_ratio(_summed(signal, distance, len(signals)), signals) / 0.8, 0.1)
        weight = np.minimum(1.0, HUBER * scale[signal] / np.maximum(distance, 1e-9))
        common = _ratio(_summed(cell, weight * rest, len(number)), _summed(cell, weight, len(number)))
    return common


def _at(curve: Floats, levels: _Levels) -> Floats:
    """The curve at each row's elevation, shape (k,)."""
    sine = np.sin(np.radians(levels.elevation_deg))
    own = curve[levels.signal]
    return np.asarray(own[:, 0] + sine * (own[:, 1] + sine * (own[:, 2] + sine * own[:, 3])))


def _over_time(levels: _Levels, rest: Floats, curve: Floats) -> tuple[Ints, Floats]:
    """Level minute by minute as a satellite at REFERENCE_DEG would have it, shape (signals, t)."""
    minute, which = np.unique(levels.minute, return_inverse=True)
    cell = levels.signal * len(minute) + which
    common = np.full(len(curve) * len(minute), np.nan)
    found = _huber(cell, rest, levels.signal)
    common[: len(found)] = found
    common[np.bincount(cell, minlength=len(common)) < FEWEST_COMMON] = np.nan
    # Where no satellite stood so high, the curve is taken at the highest elevation that was seen.
    highest = np.zeros(len(curve))
    np.maximum.at(highest, levels.signal, levels.elevation_deg)
    sine = np.sin(np.radians(np.minimum(highest, REFERENCE_DEG)))
    base = (curve * sine[:, None] ** np.arange(POWERS)).sum(axis=1)
    return minute, common.reshape(len(curve), len(minute)) + base[:, None]


def _summed(cell: npt.NDArray[np.intp], values: npt.NDArray[np.generic], cells: int) -> Floats:
    return np.bincount(cell, weights=values.astype(np.float64), minlength=cells).astype(np.float64)


def _ratio(top: Floats, bottom: Floats | npt.NDArray[np.integer]) -> Floats:
    """Division that gives NaN where the bottom is 0."""
    result = np.full(top.shape, np.nan)
    np.divide(top, bottom, out=result, where=bottom > 0)
    return result
