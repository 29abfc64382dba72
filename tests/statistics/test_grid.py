"""The matrices of a batch against the rows they were made from."""

from __future__ import annotations

import dataclasses
import tracemalloc

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gnssmon.epochs.batch import SignalRows
from gnssmon.statistics import grid as grids
from gnssmon.statistics.grid import azimuths_deg, elevations_deg, grid_of, strongest_mean
from gnssmon.statistics.signal_level import SignalLevel
from gnssmon.statistics.subject import Site
from tests.statistics.batches import make_batch

row = st.tuples(
    st.integers(0, 4),
    st.sampled_from([1, 2, 33, 1024 + 5, 7 * 1024 + 1023]),
    st.sampled_from([-1, 0, 2, 47]),
    st.sampled_from([np.nan, -5.0, 0.0, 45.0, 89.6, 90.0, 95.0]),
    st.sampled_from([np.nan, 0.0, 17.3, 359.0, 360.0, 400.0]),
    st.sampled_from([np.nan, 12.0, 45.5, 99.0]),
)


def batch_of(rows):
    """Five epochs, the third in the next minute."""
    rows = sorted(rows, key=lambda one: one[0])
    kinds = ("i4", "i4", "i2", "f4", "f4", "f4")
    columns = zip(*rows, strict=True) if rows else [()] * 6
    signals = SignalRows(*(np.array(column, dtype=kind) for column, kind in zip(columns, kinds, strict=True)))
    return dataclasses.replace(make_batch([57_000, 58_000, 60_000, 61_000, 62_000]), signals=signals)


@given(st.lists(row, max_size=40))
def test_every_row_is_in_the_matrices(rows):
    """Levels by line and epoch: no report is lost, also where an epoch lists a satellite several times on a signal;
    a satellite's best level and direction are those of its rows."""
    grid = grid_of(batch_of(rows))

    for epoch in range(5):
        for line in set(grid.line.tolist()):
            own = grid.level[grid.line == line, epoch]
            expected = sorted(
                round(one[5] * 100)
                for one in rows
                if one[0] == epoch and one[1] * 64 + one[2] + 1 == line and np.isfinite(one[5])
            )
            if len(expected) < grids.REPEATS:
                assert expected == sorted(own[own > 0].tolist())
    for place, satellite in enumerate(grid.satellite.tolist()):
        for epoch in range(5):
            mine = [one for one in rows if one[0] == epoch and one[1] == satellite]
            levels = [round(one[5] * 100) for one in mine if np.isfinite(one[5])]
            assert bool(mine) == grid.listed[place, epoch]
            assert max(levels, default=0) == grid.best[place, epoch]
            stated = {
                (round(one[4] % 360.0, 1), round(one[3], 1))
                for one in mine
                if np.isfinite(one[3]) and np.isfinite(one[4]) and one[3] <= 90 and one[4] <= 360
            }
            direction = grid.direction[place, epoch]
            assert bool(stated) == (direction >= 0)
            if stated:
                assert (round(float(azimuths_deg(direction)), 1), round(float(elevations_deg(direction)), 1)) in stated
    assert grid.minute.tolist() == [0, 1]
    assert grid.run.tolist() == [0, 2]


@given(st.lists(row, max_size=40))
def test_both_ways_of_finding_lines_agree(rows):
    """Sorting the keys of few rows and looking up those of many give the same matrices."""
    batch = batch_of(rows)
    few = grid_of(batch)
    kept = grids.FEW_ROWS
    try:
        grids.FEW_ROWS = 0
        grid_of.cache_clear()
        many = grid_of(batch)
    finally:
        grids.FEW_ROWS = kept

    for field in ("line", "level", "satellite", "best", "direction"):
        np.testing.assert_array_equal(getattr(few, field), getattr(many, field))


def test_fewer_than_four_satellites_have_no_four_strongest():
    """Three are too few; of four and more the best four count, each once."""
    levels = {0: [40, 41, 42], 1: [40, 41, 42, 43], 2: [40, 41, 42, 43, 44]}
    rows = [
        (epoch, number + 1, -1, 45.0, 0.0, float(value))
        for epoch, values in levels.items()
        for number, value in enumerate(values)
    ]
    found = strongest_mean(grid_of(batch_of(rows)))

    np.testing.assert_array_equal(found, [np.nan, 41.5, 42.5, np.nan, np.nan])


def noise(epochs: int, each: int, *, step_ms: int):
    """Epochs that list satellites which nobody has."""
    rng = np.random.default_rng(1)
    count = epochs * each
    signals = SignalRows(
        np.repeat(np.arange(epochs), each).astype(np.int32),
        rng.integers(0, 8192, count).astype(np.int32),
        rng.integers(-1, 48, count).astype(np.int16),
        rng.integers(0, 90, count).astype(np.float32),
        rng.integers(0, 360, count).astype(np.float32),
        rng.integers(10, 99, count).astype(np.float32),
    )
    return dataclasses.replace(make_batch(np.arange(epochs) * step_ms), signals=signals)


def test_noise_does_not_fill_the_memory():
    """Two thousand epochs that list a hundred random satellites each, a minute apart: taken in portions, none of whose
    matrices is large; levels are the same as those of the plain list."""
    batch = noise(2000, 100, step_ms=60_000)
    level = SignalLevel(Site())
    tracemalloc.start()
    level.update(batch)
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()

    parts = grids.portions(batch)
    assert sum(len(part) for part in parts) == 2000
    assert all(grid_of(part).level.size <= 2 * grids.MOST_CELLS for part in parts)
    assert peak < 250e6
    mean = level.summary()["cn0.mean_dbhz"]
    assert (mean.value, mean.samples) == (pytest.approx(batch.signals.cn0_dbhz.astype(float).mean()), 200_000)


def test_an_ordinary_batch_is_one_portion():
    """Nothing is cut without need."""
    batch = noise(60, 30, step_ms=1000)
    assert grids.portions(batch) == (batch,)
