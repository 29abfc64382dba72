"""Spells against the samples that they stand for."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.estimators import spells
from gnssmon.estimators.spells import Spells

SAMPLES = st.lists(
    st.tuples(st.sampled_from([1000, 1000, 1000, 200, 5000, 0, -4000]), st.sampled_from([0, 1, 1, 4])), max_size=60
)
CUTS = st.lists(st.integers(0, 60), max_size=4)


def _columns(samples: list[tuple[int, int]]) -> tuple[np.ndarray, np.ndarray]:
    return (
        50_000 + np.cumsum(np.array([step for step, _ in samples], dtype=np.int64)),
        np.array([state for _, state in samples], dtype=np.int64),
    )


def _fill(axis_ms: np.ndarray, state: np.ndarray, cuts: list[int], *, merged: bool = False) -> Spells:
    whole = Spells()
    edges = [0, *sorted(min(cut, len(axis_ms)) for cut in cuts), len(axis_ms)]
    for start, stop in itertools.pairwise(edges):
        if merged:
            later = Spells()
            later.update(axis_ms[start:stop], state[start:stop])
            whole.merge(later)
        else:
            whole.update(axis_ms[start:stop], state[start:stop])
    return whole


@given(SAMPLES, CUTS, st.booleans())
@settings(max_examples=200)
def test_every_sample_comes_back(samples, cuts, merged):
    """Runs hold every sample's time and state in stream order, however the stream was cut or merged."""
    axis_ms, state = _columns(samples)

    times, states = _fill(axis_ms, state, cuts, merged=merged).within(None, None).samples()

    assert times.tolist() == axis_ms.tolist()
    assert states.tolist() == state.tolist()


@given(SAMPLES, st.integers(30_000, 120_000), st.integers(0, 60_000))
@settings(max_examples=200)
def test_a_stretch_is_cut_to_the_sample(samples, from_ms, length_ms):
    """``within`` holds exactly the samples of the half-open stretch."""
    axis_ms, state = _columns(samples)
    inside = (axis_ms >= from_ms) & (axis_ms < from_ms + length_ms)

    times, states = _fill(axis_ms, state, []).within(from_ms, from_ms + length_ms).samples()

    assert times.tolist() == axis_ms[inside].tolist()
    assert states.tolist() == state[inside].tolist()


@given(SAMPLES)
@settings(max_examples=100)
def test_spells_are_groups_of_neighbours(samples):
    """A spell's first, last and following sample are those of ``itertools.groupby`` over the samples."""
    axis_ms, state = _columns(samples)
    runs = _fill(axis_ms, state, []).within(None, None)
    expected, index = [], 0
    for chosen, group in itertools.groupby(state.tolist(), key=lambda value: value == 1):
        length = len(list(group))
        if chosen:
            after = min(index + length, len(axis_ms) - 1)
            expected.append((axis_ms[index], axis_ms[index + length - 1], axis_ms[after]))
        index += length

    assert list(zip(*runs.spells(runs.state == 1), strict=True)) == expected


def test_a_quiet_month_is_one_row():
    """A month at 1 Hz in one state costs one run."""
    whole = Spells()
    for day in range(30):
        whole.update(np.arange(86_400) * 1000 + day * 86_400_000, np.full(86_400, 4))

    assert len(whole.within(None, None)) == 1


def test_oldest_runs_go(monkeypatch):
    """Past the bound the newest runs are kept."""
    monkeypatch.setattr(spells, "MOST_RUNS", 10)
    whole = Spells()
    for start in range(0, 100, 5):
        whole.update(np.arange(start, start + 5) * 1000, np.arange(start, start + 5) % 3)
    runs = whole.within(None, None)

    assert runs.first_ms.tolist() == [k * 1000 for k in range(90, 100)]
    assert whole.forgotten == pytest.approx(90, abs=20)
