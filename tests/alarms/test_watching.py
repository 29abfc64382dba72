"""Alarms over a stream: raised when they should be, and the same however the stream was cut."""

from __future__ import annotations

import functools
import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.alarms.rules import AlarmRule
from gnssmon.alarms.watching import Watch
from gnssmon.chunks import Chunk
from gnssmon.epochs.batch import EpochBatch
from gnssmon.pipeline import Pipeline
from gnssmon.simulation.generator import generate
from gnssmon.simulation.scenario import load_scenario
from gnssmon.statistics.instants import INSTANTS, Sliding
from gnssmon.statistics.subject import Site

RULES = (
    AlarmRule(quantity="cn0.strongest4_mean_dbhz", below=49.0, clear=50.0, over_s=5.0, hold_s=3.0),
    AlarmRule(quantity="corrections.age_max_s", above=5.0, clear=3.0, over_s=10.0),
    AlarmRule(quantity="fix.share_rtk_fixed", below=0.5, clear=0.9, over_s=20.0),
    AlarmRule(quantity="stream.completeness", below=0.5, over_s=10.0),
)


@functools.cache
def stream() -> EpochBatch:
    """Thirty minutes with a cut of the corrections from minute 20 to 25 (scenario ``lost_corrections``)."""
    pipeline = Pipeline()
    data = b"".join(part for _, part in generate(load_scenario("lost_corrections"), duration_s=1800.0, seed=5))
    return pipeline.feed(Chunk(data))


@settings(max_examples=20, deadline=None)
@given(st.lists(st.integers(0, 1799), max_size=6))
def test_any_cut_raises_the_same_alarms(cuts):
    """Events, their times and their worst values do not depend on how the epochs came in batches."""
    whole, pieces = Watch(RULES, Site()), Watch(RULES, Site())
    whole.update(stream(), utc_offset_ms=0)
    for begin, end in itertools.pairwise([0, *sorted(cuts), len(stream())]):
        pieces.update(stream().part(begin, end), utc_offset_ms=0)

    assert whole.events == pieces.events


def test_lost_corrections_raise_and_clear():
    """The age passes 5 s soon after the link fails at minute 20, and clears soon after it returns at minute 25."""
    watch = Watch(RULES, Site())
    watch.update(stream(), utc_offset_ms=0)
    first_ms = int(stream().axis_ms[0])
    ages = [event for event in watch.events if event.quantity == "corrections.age_max_s"]

    assert len(ages) == 1
    assert 1203 <= (ages[0].raised_ms - first_ms) / 1000 <= 1212
    assert ages[0].cleared_ms is not None
    assert ages[0].worst > 50.0


def test_silence_raises_completeness():
    """When nothing comes any more, the missing epochs are noticed as time goes on."""
    watch = Watch(RULES, Site())
    watch.update(stream().part(0, 60), utc_offset_ms=0)
    last_ms = int(stream().axis_ms[59])
    for second in range(1, 20):
        watch.silence(last_ms + second * 1000, utc_offset_ms=0)

    assert "stream.completeness" in [event.quantity for event in watch.events]


def test_nothing_is_raised_before_a_window_is_full():
    """The first seconds of a stream are no fault."""
    watch = Watch(RULES, Site())
    watch.update(stream().part(0, 15), utc_offset_ms=0)

    assert watch.events == ()


@pytest.mark.parametrize("name", sorted(INSTANTS))
def test_windows_answer_like_a_loop_over_epochs(name):
    """Every quantity over a sliding window equals what a plain loop over the window's epochs computes."""
    batch, site = stream().part(0, 120), Site(baud=115_200)
    instant = INSTANTS[name]
    top, bottom = instant.contribution(batch, site)
    window = Sliding(name, 10.0, site)
    window.update(batch)
    grid_ms = batch.axis_ms[30:110:7] // 1000 * 1000
    found = window.at(grid_ms)
    for at_ms, value in zip(grid_ms.tolist(), found.tolist(), strict=True):
        inside = (batch.axis_ms > at_ms - 10_000) & (batch.axis_ms <= at_ms)
        known = top[inside][bottom[inside] > 0]
        if name == "stream.completeness":
            expected = inside.sum() / 10
        elif name == "stream.link_load":
            expected = top[inside].sum() * 10 / (10 * 115_200)
        elif not len(known):
            expected = np.nan
        else:
            by_kind = {"RATIO": top[inside].sum() / bottom[inside].sum(), "LARGEST": known.max()}
            by_kind |= {"SMALLEST": known.min(), "MEDIAN": np.median(known)}
            expected = by_kind[instant.combine.name]
        assert value == pytest.approx(float(expected), abs=1e-6, nan_ok=True)
