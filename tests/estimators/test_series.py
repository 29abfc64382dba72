"""Series: what is kept, what is thinned, and that no cut changes it."""

from __future__ import annotations

import itertools

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.estimators.rows import Rows
from gnssmon.estimators.series import Series

MOST = 40


def _fill(axis_ms: np.ndarray, cuts: list[int], *, merged: bool) -> Series:
    whole = Series({"value": np.float64}, most_rows=MOST)
    edges = [0, *sorted(min(cut, len(axis_ms)) for cut in cuts), len(axis_ms)]
    for start, stop in itertools.pairwise(edges):
        times = axis_ms[start:stop]
        if merged:
            later = Series({"value": np.float64}, most_rows=MOST)
            later.update(times, value=times * 2.0)
            whole.merge(later)
        else:
            whole.update(times, value=times * 2.0)
    return whole


STEPS = st.lists(st.sampled_from([100, 200, 1000, 1000, 1000, 3000, 60_000, -5000]), max_size=200)
CUTS = st.lists(st.integers(0, 200), max_size=4)


@given(STEPS, CUTS, st.booleans())
@settings(max_examples=150)
def test_any_cut_keeps_the_same_rows(steps, cuts, merged):
    """Rows kept and grid depend on the samples alone: not on blocks, not on merging, also past the bound."""
    axis_ms = 1_000_000 + np.cumsum(np.array(steps, dtype=np.int64))
    whole, parts = _fill(axis_ms, [], merged=False), _fill(axis_ms, cuts, merged=merged)

    assert whole.grid_ms == parts.grid_ms
    assert whole.axis_ms.tolist() == parts.axis_ms.tolist()
    assert whole["value"].tolist() == parts["value"].tolist()
    assert len(whole) <= MOST


@given(STEPS)
@settings(max_examples=100)
def test_nothing_is_lost_while_it_fits(steps):
    """Up to the bound every sample is kept, in stream order."""
    axis_ms = 1_000_000 + np.cumsum(np.array(steps[:MOST], dtype=np.int64))

    assert _fill(axis_ms, [], merged=False).axis_ms.tolist() == axis_ms.tolist()


def test_thinning_is_even_in_time():
    """Past the bound one sample a cell is kept, from the first to the last."""
    series = _fill(np.arange(1000) * 1000, [], merged=False)

    assert series.grid_ms == 32_000
    assert series.axis_ms.tolist() == list(range(0, 1_000_000, 32_000))
    assert series.revision > 0


@given(STEPS, st.integers(900_000, 1_300_000), st.integers(0, 200_000))
@settings(max_examples=100)
def test_a_stretch_is_what_its_definition_says(steps, from_ms, length_ms):
    """``within`` selects the rows whose times are in the half-open stretch, also where time steps back."""
    series = _fill(1_000_000 + np.cumsum(np.array(steps[:MOST], dtype=np.int64)), [], merged=False)
    axis_ms = series.axis_ms

    found = axis_ms[series.within(from_ms, from_ms + length_ms)].tolist()

    assert found == [time for time in axis_ms.tolist() if from_ms <= time < from_ms + length_ms]


def test_a_clock_that_jumps_for_ever_is_bounded():
    """Where no grid can thin (each sample in another cell than its neighbour), the oldest rows go."""
    series = Series({"value": np.float64}, most_rows=MOST)
    axis_ms = np.tile(np.array([-1, 1]), 500)
    series.update(axis_ms, value=np.arange(1000.0))

    assert len(series) == MOST
    assert series["value"][-1] == 999.0


def test_rows_grow_and_shrink_together():
    """Columns keep their kinds and stay of one length."""
    rows = Rows({"time": np.int64, "value": np.float32})
    for start in range(0, 3000, 7):
        rows.append(time=np.arange(start, start + 7), value=np.arange(start, start + 7) / 2)
    rows.keep(slice(10, None, 10))

    assert len(rows) == len(rows["time"]) == len(rows["value"])
    assert rows["time"].tolist() == list(range(10, 3003, 10))
    assert rows["value"].dtype == np.float32
