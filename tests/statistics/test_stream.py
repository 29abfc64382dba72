"""The stream's own figures against arithmetic on the list of its epochs."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gnssmon.nmea.columns import Tally
from gnssmon.statistics.stream import Stream
from gnssmon.statistics.subject import Site, Span
from tests.statistics.batches import make_batch


def values(stream: Stream, span: Span | None = None) -> dict[str, float | None]:
    summary = stream.summary() if span is None else stream.summary(span)
    return {name.removeprefix("stream."): estimate.value for name, estimate in summary.items()}


def stream_of(axis_ms, site: Site | None = None, **columns) -> Stream:
    stream = Stream(site or Site())
    stream.update(make_batch(axis_ms, **columns))
    return stream


@given(st.sampled_from([20, 100, 200, 1000, 5000]), st.sets(st.integers(1, 198), max_size=60))
def test_missing_epochs(step_ms, missing):
    """Completeness is received / due, a gap is a run of missing epochs, its length the time between its neighbours."""
    kept = [k for k in range(200) if k not in missing]
    found = values(stream_of(np.array(kept) * step_ms))
    steps = np.diff(kept)

    assert len(kept) == found["epochs"]
    assert len(kept) / 200 == pytest.approx(found["completeness"])
    assert (steps > 1).sum() == found["gaps"]
    assert (steps.max() * step_ms / 1000.0 if (steps > 1).any() else 0.0) == pytest.approx(found["longest_gap_s"])
    assert step_ms / 1000.0 == found["interval_s"]
    assert 199 * step_ms / 1000.0 == pytest.approx(found["duration_s"])


@pytest.mark.parametrize(("rate_hz", "hours"), [(3, 24), (15, 2), (30, 1)])
def test_rates_that_do_not_divide_a_second(rate_hz, hours):
    """Three epochs a second come 333, 333 and 334 ms apart: nothing is missing and nothing is too much."""
    axis_ms = np.rint(np.arange(rate_hz * 3600 * hours) * 1000.0 / rate_hz)
    found = values(stream_of(axis_ms))

    assert found["completeness"] == pytest.approx(1.0, abs=1e-5)
    assert found["interval_s"] == pytest.approx(1.0 / rate_hz, rel=1e-5)
    assert found["gaps"] == 0.0


def test_one_second_in_a_second_missing_of_an_uneven_rate():
    """One in three of three a second is missed: completeness tells, although steps are uneven."""
    axis_ms = np.rint(np.arange(9000) * 1000.0 / 3)
    kept = np.ones(9000, dtype=bool)
    kept[4000:4300] = False
    found = values(stream_of(axis_ms[kept]))

    assert found["completeness"] == pytest.approx(8700 / 9000, abs=1e-4)
    assert found["gaps"] == 1.0


def test_time_that_steps_back():
    """A clock set back by ten minutes: the epochs before and behind are counted each in their own stretch."""
    axis_ms = np.concatenate([np.arange(600), np.arange(600)]) * 1000
    found = values(stream_of(axis_ms))

    assert (found["epochs"], found["time_steps"], found["completeness"]) == (1200.0, 1.0, 1.0)


def test_epochs_that_do_not_count():
    """Epochs without their position sentence are instants, and missing in the completeness."""
    counted = np.arange(100) % 4 != 1
    found = values(stream_of(np.arange(100) * 1000, counted=counted))

    assert (found["epochs"], found["instants"]) == (75.0, 100.0)
    assert found["completeness"] == pytest.approx(0.75)


@pytest.mark.parametrize("count", [0, 1, 2])
def test_hardly_any_epochs(count):
    """Without a step there is no rate, and nothing is said of what is due."""
    found = values(stream_of(np.arange(count) * 1000))

    assert found["interval_s"] == (1.0 if count == 2 else None)
    assert found["completeness"] == (1.0 if count == 2 else None)


def test_two_epochs_of_one_instant():
    """Repeated times (a receiver without a clock) are no rate."""
    found = values(stream_of(np.zeros(50)))

    assert (found["epochs"], found["interval_s"]) == (50.0, None)


def tally(**counts: int) -> Tally:
    return dataclasses.replace(Tally(), **counts)


def test_damage_and_load():
    """Shares of failures, torn sentences and foreign bytes; load at ten bits a byte (start, eight data, stop)."""
    stream = stream_of(np.arange(100) * 1000, Site(baud=9600))
    stream.observe(
        tally(bytes=48_000, sentences=950, unverified=150, checksum_failures=200, malformed=50, non_nmea_bytes=4800),
        99_000,
    )
    found = values(stream)

    assert found["checksum_failure_share"] == 200 / (800 + 200)
    assert found["malformed_share"] == 50 / (950 + 200 + 50)
    assert found["non_nmea_share"] == pytest.approx(0.1)
    assert found["bytes_per_s"] == pytest.approx(480.0)
    assert found["link_load"] == pytest.approx(0.5)


def test_no_load_without_a_line():
    """A file or a network has no baud rate."""
    stream = stream_of(np.arange(100) * 1000)
    stream.observe(tally(bytes=48_000, sentences=900), 99_000)

    assert values(stream)["link_load"] is None


def test_a_window_has_its_own_damage():
    """Differences of the tally belong to the minute of the latest epoch; merging adds them."""
    one, other = (Stream(Site()) for _ in range(2))
    one.update(make_batch(np.arange(60) * 1000))
    one.observe(tally(bytes=1000, sentences=60), 59_000)
    other.update(make_batch(60_000 + np.arange(60) * 1000))
    other.observe(tally(bytes=500, sentences=20), 70_000)
    other.observe(tally(bytes=2000, sentences=60, checksum_failures=30), 119_000)
    one.merge(other)

    assert values(one, Span(60_000, 120_000))["checksum_failure_share"] == pytest.approx(30 / 90)
    assert values(one, Span(0, 60_000))["checksum_failure_share"] == 0.0
    assert values(one)["checksum_failure_share"] == pytest.approx(30 / 150)
    assert one.picture().bytes.tolist() == [1000, 2000]


def test_the_picture_names_the_gaps():
    """Start on the axis and length, in order of time."""
    axis_ms = np.concatenate([np.arange(10), np.arange(15, 30), np.arange(50, 60)]) * 1000
    assert stream_of(axis_ms).picture().gaps == ((9000, 6.0), (29_000, 21.0))
