"""One batch's satellites as matrices, signals by epochs: the common ground of satellites, levels, sky and DOP.

Strategy. The rows of a batch list nearly the same satellites epoch after epoch, so they fit into a matrix with one line
a satellite and signal and one column an epoch. Lines lie in memory one behind the other: sums over the epochs of a
minute and largest values over the signals of a satellite are then plain vector work, without sorting. Levels are whole
hundredths of dB-Hz and directions whole tenths of a degree, finer than receivers print, so that sums are exact. A
satellite that an epoch lists twice on one signal (receivers that name no signals do) gets a second line.
"""

from __future__ import annotations

import functools
import itertools
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
import numpy.typing as npt

from gnssmon.constellations.identity import NOT_STATED, SYSTEM_STEP
from gnssmon.constellations.systems import LETTERS, SIGNALS
from gnssmon.epochs.batch import EpochBatch

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]
Levels = npt.NDArray[np.int16]
Whole = TypeVar("Whole", np.int16, np.int32)

CODES = len(LETTERS) * SYSTEM_STEP
"""Satellite codes are below this (``constellations.identity``)."""
SIGNAL_STEP = 64
"""Line key = satellite code * SIGNAL_STEP + row of ``SIGNALS`` + 1."""
PER_DB = 100
"""Levels are whole hundredths of dB-Hz."""
LOUDEST = 327.0
"""dB-Hz; anything above is a misprint and is cut to this."""
AZIMUTH_STEP = 4096
ZERO_ELEVATION = 900
"""Direction = (elevation in tenths + ZERO_ELEVATION) * AZIMUTH_STEP + azimuth in tenths."""
UNKNOWN_DIRECTION, NOT_LISTED = -1, -2
REPEATS = 8
"""Times that one epoch may list one satellite on one signal; more are noise and the last counts."""
MOST_CELLS = 2_000_000
"""Lines times epochs of one matrix, some 12 MB; a real sky has 200 lines, noise may have any number."""
MOST_RUNS = 64
"""Minutes of one matrix: histograms by the minute are laid out in full."""
FEW_ROWS = 4096
"""Below this sorting the keys is quicker than a table of all that there may be."""

LABELS = (*dict.fromkeys(signal.label for signal in SIGNALS), *LETTERS)
"""What a level can belong to: a band of a system, or the bare system where the stream names no signal."""


def _label_table() -> npt.NDArray[np.intp]:
    """Label number by (system, signal row + 1)."""
    table = np.zeros((len(LETTERS), SIGNAL_STEP), dtype=np.intp)
    for system, letter in enumerate(LETTERS):
        table[system, 0] = LABELS.index(letter)
        for row, signal in enumerate(SIGNALS):
            table[system, row + 1] = LABELS.index(signal.label)
    return table


_LABEL = _label_table()


def label_numbers(satellite: npt.NDArray[np.integer], signal: npt.NDArray[np.integer]) -> npt.NDArray[np.intp]:
    """Row of ``LABELS`` for satellite codes and signal rows, shape (n,)."""
    label: npt.NDArray[np.intp] = _LABEL[satellite // SYSTEM_STEP, signal - NOT_STATED]
    return label


def labels_of_lines(line: Ints) -> npt.NDArray[np.intp]:
    """Row of ``LABELS`` for line keys, shape (n,)."""
    # Shifts, for divisions of whole numbers are slow: SIGNAL_STEP is 2^6, SYSTEM_STEP 2^10.
    label: npt.NDArray[np.intp] = _LABEL.ravel()[(line >> 16) * SIGNAL_STEP + (line & (SIGNAL_STEP - 1))]
    return label


@dataclass(frozen=True, slots=True, eq=False)
class Grid:
    """p lines (satellite and signal), s satellites, n epochs, t runs of epochs in one minute."""

    line: Ints
    """Key of each line, rising, shape (p,); two of one key where an epoch lists a satellite twice on a signal."""
    level: Levels
    """Hundredths of dB-Hz, 0 not heard, shape (p, n)."""
    satellite: Ints
    """Codes, rising, shape (s,)."""
    best: Levels
    """Of a satellite's strongest signal, 0 not heard, shape (s, n)."""
    direction: npt.NDArray[np.int32]
    """Tenths of degrees as one number, see ``azimuths_deg``; UNKNOWN_DIRECTION, NOT_LISTED; shape (s, n)."""
    run: npt.NDArray[np.intp]
    """First epoch of each run of equal minutes, shape (t,)."""
    minute: Ints
    """Of each run."""
    epochs: int

    @property
    def listed(self) -> npt.NDArray[np.bool_]:
        """Named in the epoch's satellite sentences, shape (s, n)."""
        return np.asarray(self.direction != NOT_LISTED)

    @property
    def tracked(self) -> npt.NDArray[np.bool_]:
        """With a level on any signal, shape (s, n)."""
        return self.best > 0

    def sums(self, matrix: npt.NDArray[np.generic]) -> Ints:
        """Sum of a matrix (k, n) over the epochs of each run, shape (k, t)."""
        total: Ints = np.add.reduceat(matrix, self.run, axis=1, dtype=np.int64)
        return total


def azimuths_deg(direction: npt.NDArray[np.int32]) -> Floats:
    """Azimuth in degrees of known directions, shape as given."""
    return np.asarray(direction % AZIMUTH_STEP / 10.0)


def elevations_deg(direction: npt.NDArray[np.int32]) -> Floats:
    """Elevation in degrees of known directions, shape as given."""
    return np.asarray((direction // AZIMUTH_STEP - ZERO_ELEVATION) / 10.0)


@functools.lru_cache(maxsize=1)
def portions(batch: EpochBatch) -> tuple[EpochBatch, ...]:
    """The batch, or parts of it where its matrices or histograms by the minute would be too large; none of nothing."""
    count = len(batch)
    if not count:
        return ()
    most = max(1, MOST_CELLS // max(1, len(_lines(batch)[1])))
    run = _runs(batch.minute)
    if count <= most and len(run) <= MOST_RUNS:
        return (batch,)
    edges = np.unique(np.concatenate([np.arange(0, count, most), run[::MOST_RUNS], [count]])).tolist()
    return tuple(batch.part(first, last) for first, last in itertools.pairwise(edges))


@functools.lru_cache(maxsize=1)
def grid_of(batch: EpochBatch) -> Grid:
    """The satellites of one of ``portions``; the last one is kept, for several subjects ask in turn."""
    rows, count = batch.signals, len(batch)
    epoch = rows.epoch.astype(np.int64)
    key, line, place = _lines(batch)
    wide = _width(count)
    cell = place * wide
    cell += epoch
    direction = _spread(cell, _directions(rows.azimuth_deg, rows.elevation_deg), (len(line), wide), NOT_LISTED)
    if np.count_nonzero(direction != NOT_LISTED) < len(key):
        line, place = _distinct(key.astype(np.int64) * REPEATS + _repeat(cell))
        line //= REPEATS
        cell = place * wide + epoch
        direction = _spread(cell, _directions(rows.azimuth_deg, rows.elevation_deg), (len(line), wide), NOT_LISTED)
    level = _spread(cell, _levels(rows.cn0_dbhz), (len(line), wide), 0)
    owner = line // SIGNAL_STEP
    first = np.flatnonzero(np.diff(owner, prepend=-1))
    minute = batch.minute
    run = _runs(minute)
    return Grid(
        line=line,
        level=level[:, :count],
        satellite=owner[first],
        best=_largest(level, first)[:, :count],
        direction=_largest(direction, first)[:, :count],
        run=run,
        minute=minute[run],
        epochs=count,
    )


STRONGEST = 4


def strongest_mean(grid: Grid) -> Floats:
    """Mean C/N0 of the four strongest satellites of each epoch, dB-Hz, shape (n,); NaN with fewer than four."""
    return strongest_sums(grid) / np.where(grid.tracked.sum(axis=0) >= STRONGEST, PER_DB * STRONGEST, np.nan)


def strongest_sums(grid: Grid) -> Ints:
    """Sum of the levels of the four strongest satellites of each epoch, hundredths, shape (n,)."""
    satellites = len(grid.satellite)
    if satellites <= STRONGEST:
        return np.asarray(grid.best.sum(axis=0, dtype=np.int64))
    ordered = np.partition(grid.best.T.copy(), satellites - STRONGEST, axis=1)
    return np.asarray(ordered[:, satellites - STRONGEST :].sum(axis=1, dtype=np.int64))


@functools.lru_cache(maxsize=1)
def _lines(batch: EpochBatch) -> tuple[npt.NDArray[np.int32], Ints, npt.NDArray[np.intp]]:
    """Key of each row, distinct keys, and which of them each row has."""
    rows = batch.signals
    key = rows.satellite * np.int32(SIGNAL_STEP) + (rows.signal - np.int16(NOT_STATED))
    return key, *_distinct(key)


def _runs(minute: Ints) -> npt.NDArray[np.intp]:
    """First epoch of each run of equal minutes."""
    return np.flatnonzero(np.diff(minute, prepend=minute[0] - 1))


def _distinct(key: npt.NDArray[np.integer]) -> tuple[Ints, npt.NDArray[np.intp]]:
    """Distinct keys, rising, and for each row which of them it has."""
    if len(key) < FEW_ROWS or key.dtype == np.int64:
        distinct, place = np.unique(key, return_inverse=True)
        return distinct.astype(np.int64), place
    present = np.zeros(CODES * SIGNAL_STEP, dtype=bool)
    present[key] = True
    found = np.flatnonzero(present)
    number = np.zeros(len(present), dtype=np.intp)
    number[found] = np.arange(len(found))
    return found.astype(np.int64), number[key]


def _width(count: int) -> int:
    """Epochs to a line in memory: lines that begin at equal places of a page crowd each other out of the cache."""
    return count if count < 256 else count + 17


def _spread(
    cell: npt.NDArray[np.intp], values: npt.NDArray[Whole], shape: tuple[int, int], empty: int
) -> npt.NDArray[Whole]:
    flat = np.full(shape[0] * shape[1], empty, dtype=values.dtype)
    flat[cell] = values
    return flat.reshape(shape)


def _largest(matrix: npt.NDArray[Whole], first: npt.NDArray[np.intp]) -> npt.NDArray[Whole]:
    if len(first) == len(matrix):
        return matrix
    largest: npt.NDArray[Whole] = np.maximum.reduceat(matrix, first, axis=0)
    return largest


def _levels(cn0_dbhz: npt.NDArray[np.float32]) -> Levels:
    hundredths = np.rint(cn0_dbhz * np.float32(PER_DB))
    np.minimum(hundredths, np.float32(LOUDEST * PER_DB), out=hundredths)
    np.copyto(hundredths, np.float32(0.0), where=~(hundredths > 0))
    return np.asarray(hundredths.astype(np.int16))


def _directions(azimuth_deg: npt.NDArray[np.float32], elevation_deg: npt.NDArray[np.float32]) -> npt.NDArray[np.int32]:
    # Below 2^24, so that single precision is exact.
    joined = np.rint(elevation_deg * np.float32(10.0))
    joined += np.float32(ZERO_ELEVATION)
    joined *= np.float32(AZIMUTH_STEP)
    azimuth = np.rint(azimuth_deg * np.float32(10.0))
    if (azimuth >= 3600).any() or (azimuth < 0).any():
        azimuth = np.where((azimuth < 0) | (azimuth > 3600), np.float32(np.nan), np.mod(azimuth, np.float32(3600.0)))
    if (np.abs(elevation_deg) > 90).any():
        joined[np.abs(elevation_deg) > 90] = np.nan
    joined += azimuth
    np.fmax(joined, np.float32(UNKNOWN_DIRECTION), out=joined)
    return np.asarray(joined.astype(np.int32))


def _repeat(cell: npt.NDArray[np.intp]) -> Ints:
    """How many rows before it fall on the same cell, for each row, at most REPEATS - 1."""
    order = np.argsort(cell, kind="stable")
    ordered = cell[order]
    begins = np.ones(len(cell), dtype=bool)
    begins[1:] = ordered[1:] != ordered[:-1]
    start = np.maximum.accumulate(np.where(begins, np.arange(len(cell)), 0))
    repeat = np.empty(len(cell), dtype=np.int64)
    repeat[order] = np.minimum(np.arange(len(cell)) - start, REPEATS - 1)
    return repeat
