"""Tiles: sums, smallest and largest by minute and column, in any order of time, cut anywhere, and bounded."""

from __future__ import annotations

import itertools
from collections import defaultdict

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.estimators.tiles import Tiles

SMALL = {"ladder": ((20, 10), (60, 30)), "most": 40}
"""Ages and widths so short that a few hundred minutes go through all of them."""

minutes = st.integers(-50, 400)
samples = st.lists(st.tuples(minutes, st.integers(0, 5), st.integers(0, 1000)), max_size=120)


def filled(rows, **kind) -> Tiles:
    tiles = Tiles(2, **kind)
    _add(tiles, rows)
    return tiles


def columns(rows) -> np.ndarray:
    return np.array(rows, dtype=np.int64).reshape(-1, 3).T


def _add(tiles: Tiles, rows) -> None:
    minute, column, value = columns(rows)
    tiles.add(minute, column, np.ones(len(minute)), value)


def by_hand(rows) -> dict[tuple[int, int], list[int]]:
    """The same with a dictionary."""
    table = defaultdict(lambda: [0, 0])
    for minute, column, value in rows:
        table[minute, column][0] += 1
        table[minute, column][1] += value
    return dict(table)


def table_of(tiles: Tiles, *span) -> dict[tuple[int, int], list[int]]:
    entries = tiles.select(*span)
    keys = zip(entries.minute.tolist(), entries.column.tolist(), strict=True)
    return dict(zip(keys, entries.values.tolist(), strict=True))


@given(samples)
def test_sums_by_minute_and_column(rows):
    """The table is the one that a dictionary gives, sorted; time may step back."""
    tiles = filled(rows)

    tiles.check()
    assert by_hand(rows) == table_of(tiles)
    assert sorted(by_hand(rows)) == list(table_of(tiles))


@given(samples, minutes, st.integers(0, 100))
def test_a_window_takes_whole_minutes(rows, begin, length):
    """From the minute that it begins in, without the one that it ends in, unless they are the same."""
    tiles = filled(rows)
    from_ms, to_ms = begin * 60_000 + 20_000, (begin + length) * 60_000 + 20_000

    expected = {key: value for key, value in by_hand(rows).items() if begin <= key[0] < begin + max(length, 1)}
    assert expected == table_of(tiles, from_ms, to_ms)
    column, values = tiles.total(from_ms, to_ms)
    assert sum(value[1] for value in expected.values()) == values[:, 1].sum()
    assert sorted({key[1] for key in expected}) == column.tolist()


@settings(max_examples=150)
@given(samples, st.lists(st.integers(0, 120), max_size=4), st.booleans())
def test_any_cut_merges_to_the_same_table(rows, cuts, looked_at):
    """Parts that are merged, or taken in one after the other and looked at in between, give the table of one pass,
    old minutes joined or not."""
    kind = {"ladder": SMALL["ladder"], "most": 1000}
    whole, merged, stepwise = filled(rows, **kind), Tiles(2, **kind), Tiles(2, **kind)
    edges = [0, *sorted(cuts), len(rows)]
    for first, last in itertools.pairwise(edges):
        merged.merge(filled(rows[first:last], **kind))
        _add(stepwise, rows[first:last])
        if looked_at:
            stepwise.select()
            merged.check()

    assert table_of(whole) == table_of(merged)
    assert table_of(whole) == table_of(stepwise)


@given(samples)
def test_nothing_is_lost_by_joining_old_minutes(rows):
    """Rows get wider with age by the ladder, never across each other; totals stay, newest minutes stay single."""
    tiles = filled(rows, ladder=SMALL["ladder"])
    table, expected = table_of(tiles), by_hand(rows)
    latest = max((minute for minute, _, _ in rows), default=0)

    def row_of(minute: int) -> int:
        for age, wide in reversed(SMALL["ladder"]):
            if minute // wide * wide + wide <= latest - age:
                return minute // wide * wide
        return minute

    joined = defaultdict(lambda: np.zeros(2, dtype=int))
    for (minute, column), value in expected.items():
        joined[row_of(minute), column] += value
    assert {key: value.tolist() for key, value in joined.items()} == table


@settings(max_examples=30)
@given(st.lists(samples.filter(bool), min_size=1, max_size=6))
def test_memory_is_bounded(parts):
    """However many minutes and columns there are, the table stays within its bound, and totals are kept by widening."""
    tiles = Tiles(2, **SMALL)
    for k, rows in enumerate(parts):
        _add(tiles, [(minute + 300 * k, column, value) for minute, column, value in rows])
        tiles.select()
        tiles.check()
    assert len(tiles) <= SMALL["most"]
    assert tiles.total()[1][:, 0].sum() == sum(len(rows) for rows in parts)


def test_a_month_of_a_full_sky_fits():
    """150 signals a minute for 31 days: no more than two days singly, the rest in tens; 25 MB at most."""
    tiles = Tiles(2, ladder=((2880, 10),))
    columns = np.arange(150)
    for minute in range(0, 31 * 1440, 60):
        hour = np.repeat(np.arange(minute, minute + 60), len(columns))
        tiles.add(hour, np.tile(columns, 60), np.full(len(hour), 60), np.full(len(hour), 4500))

    assert tiles.total()[1][:, 0].sum() == 31 * 1440 * 60 * 150
    assert len(tiles) * 24 < 25e6


@pytest.mark.parametrize(("ufunc", "function"), [(np.minimum, min), (np.maximum, max)])
@given(rows=samples)
def test_smallest_and_largest(ufunc, function, rows):
    """Other ways of combining keep to the same law."""
    half = len(rows) // 2
    one, other = Tiles(combine=ufunc), Tiles(combine=ufunc)
    for tiles, part in ((one, rows[:half]), (other, rows[half:])):
        tiles.add(*columns(part))
    one.merge(other)

    expected = defaultdict(list)
    for minute, column, value in rows:
        expected[minute, column].append(value)
    assert {key: [function(values)] for key, values in expected.items()} == table_of(one)


def test_samples_count_one_each_by_default():
    """Without numbers, samples are counted."""
    tiles = Tiles()
    tiles.add(np.array([3, 3, 4]), np.array([7, 7, 7]))

    assert table_of(tiles) == {(3, 7): [2], (4, 7): [1]}
    assert tiles.by_minute()[1].tolist() == [[2], [1]]


def test_merging_does_not_touch_the_other():
    """What was merged can go on by itself: neither sees the other's later samples."""
    one, other = filled([(1, 1, 5)]), filled([(2, 1, 6)])
    one.merge(other)
    _add(other, [(2, 1, 100)])
    _add(one, [(2, 1, 1)])

    assert table_of(one) == {(1, 1): [1, 5], (2, 1): [2, 7]}
    assert table_of(other) == {(2, 1): [2, 106]}
