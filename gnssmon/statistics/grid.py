"""One batch's satellites as a matrix, epochs by satellites: the common ground of satellites, levels, sky and DOP."""

from __future__ import annotations

import functools
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.constellations.identity import NOT_STATED, SYSTEM_STEP
from gnssmon.constellations.systems import LETTERS, SIGNALS
from gnssmon.epochs.batch import EpochBatch

Matrix = npt.NDArray[np.float32]

CODES = 8 * 1024
"""Satellite codes are below this: eight systems of 1024 numbers (``constellations.identity``)."""


LABELS = (*dict.fromkeys(signal.label for signal in SIGNALS), *LETTERS)
"""What a level can belong to: a band of a system, or the bare system where the stream names no signal."""


def _label_table() -> npt.NDArray[np.intp]:
    """Label number by (system, signal row + 1)."""
    table = np.empty((len(LETTERS), len(SIGNALS) + 1), dtype=np.intp)
    for system, letter in enumerate(LETTERS):
        table[system, 0] = LABELS.index(letter)
        for row, signal in enumerate(SIGNALS):
            table[system, row + 1] = LABELS.index(signal.label)
    return table


_LABEL = _label_table()


def label_numbers(satellite: npt.NDArray[np.int32], signal: npt.NDArray[np.int16]) -> npt.NDArray[np.intp]:
    """Row of ``LABELS`` for satellite codes and signal rows, shape (n,)."""
    return _LABEL[satellite // SYSTEM_STEP, signal - NOT_STATED]


@dataclass(frozen=True, slots=True)
class Grid:
    """Arrays of shape (epochs, satellites) but for ``satellite``."""

    satellite: npt.NDArray[np.int32]
    """Codes, rising, shape (satellites,)."""
    listed: npt.NDArray[np.bool_]
    """Named in the epoch's satellite sentences."""
    cn0_dbhz: Matrix
    """Of the strongest signal; NaN not tracked."""
    elevation_deg: Matrix
    azimuth_deg: Matrix

    @property
    def tracked(self) -> npt.NDArray[np.bool_]:
        """Listed with a level on any signal."""
        return np.isfinite(self.cn0_dbhz)


@functools.lru_cache(maxsize=1)
def grid_of(batch: EpochBatch) -> Grid:
    """The satellites of all epochs; the last batch's are kept, because several subjects ask for them in turn."""
    return _grid(batch, None)


def grid_of_chosen(batch: EpochBatch, chosen: npt.NDArray[np.bool_]) -> Grid:
    """The satellites of the chosen epochs (shape (n,)), in order."""
    return _grid(batch, chosen)


def _grid(batch: EpochBatch, chosen: npt.NDArray[np.bool_] | None) -> Grid:
    rows = batch.signals
    epoch, satellite, signal = rows.epoch, rows.satellite, rows.signal
    cn0_dbhz, elevation_deg, azimuth_deg = rows.cn0_dbhz, rows.elevation_deg, rows.azimuth_deg
    count = len(batch)
    if chosen is not None:
        kept = chosen[epoch]
        place = np.cumsum(chosen) - 1
        epoch, satellite, signal = place[epoch[kept]], satellite[kept], signal[kept]
        cn0_dbhz, elevation_deg, azimuth_deg = cn0_dbhz[kept], elevation_deg[kept], azimuth_deg[kept]
        count = int(chosen.sum())
    present = np.zeros(CODES, dtype=bool)
    present[satellite] = True
    codes = np.flatnonzero(present).astype(np.int32)
    place = np.cumsum(present) - 1
    column = place[satellite]
    shape = (count, len(codes))
    listed = np.zeros(shape, dtype=bool)
    listed[epoch, column] = True
    elevation = np.full(shape, np.nan, dtype=np.float32)
    azimuth = np.full(shape, np.nan, dtype=np.float32)
    stated = np.isfinite(elevation_deg) & np.isfinite(azimuth_deg)
    elevation[epoch[stated], column[stated]] = elevation_deg[stated]
    azimuth[epoch[stated], column[stated]] = azimuth_deg[stated]
    best = np.full(shape, np.nan, dtype=np.float32)
    heard = np.isfinite(cn0_dbhz)
    heard_signal = np.where(heard, signal + 1, -1)
    for one in np.flatnonzero(np.bincount(heard_signal + 1)[1:]).tolist():
        # A signal lists a satellite once an epoch, so that no two rows meet in one cell.
        which = np.flatnonzero(heard_signal == one)
        at = epoch[which], column[which]
        best[at] = np.fmax(best[at], cn0_dbhz[which])
    return Grid(codes, listed, best, elevation, azimuth)


STRONGEST = 4


def strongest_mean(grid: Grid) -> npt.NDArray[np.float64]:
    """Mean C/N0 of the four strongest satellites of each epoch, dB-Hz, shape (epochs,); NaN with fewer than four."""
    count, satellites = grid.cn0_dbhz.shape
    if satellites < STRONGEST:
        return np.full(count, np.nan)
    heard = np.where(grid.tracked, grid.cn0_dbhz, -np.inf)
    top = np.partition(heard, satellites - STRONGEST, axis=1)[:, satellites - STRONGEST :].astype(np.float64)
    # Levels are multiples of 0.1 at the finest: summed as whole numbers they do not depend on their order.
    mean = np.rint(top * 1000.0).sum(axis=1) / (1000.0 * STRONGEST)
    return np.where(np.isfinite(top).all(axis=1), mean, np.nan)
