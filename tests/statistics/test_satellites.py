"""Numbers of satellites against sets counted epoch by epoch."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from gnssmon.statistics.satellites import Satellites
from gnssmon.statistics.subject import Site, Span
from tests.statistics.batches import make_batch
from tests.statistics.skies import sky_batch


def values(batch, *span) -> dict[str, float | None]:
    satellites = Satellites(Site())
    satellites.update(batch)
    return {name.removeprefix("satellites."): e.value for name, e in satellites.summary(*span).items()}


def by_hand(batch, chosen) -> dict[str, float]:
    """Means and sets with Python's own."""
    signals, used = batch.signals, batch.used
    view, heard, listed = ({k: set() for k in chosen} for _ in range(3))
    for epoch, satellite, cn0 in zip(signals.epoch, signals.satellite, signals.cn0_dbhz, strict=True):
        if epoch in view:
            view[epoch].add(int(satellite))
            if np.isfinite(cn0):
                heard[epoch].add(int(satellite))
    for epoch, satellite in zip(used.epoch, used.satellite, strict=True):
        if epoch in listed:
            listed[epoch].add(int(satellite))
    stated = [int(batch.satellites_used[k]) for k in chosen if batch.quality[k] > 0 and batch.counted[k]]
    in_view = [k for k in chosen if view[k]]
    systems = {code // 1024 for k in chosen for code in heard[k] | listed[k]}
    return {
        "used_mean": np.mean(stated),
        "used_min": min(stated),
        "used_listed_mean": np.mean([len(listed[k]) for k in chosen if listed[k]]),
        "in_view_mean": np.mean([len(view[k]) for k in in_view]),
        "tracked_mean": np.mean([len(heard[k]) for k in in_view]),
        "systems": len(systems),
    }


@pytest.fixture(scope="module")
def batch():
    """Half an hour with some epochs without a fix, without satellite sentences, or not counted."""
    n = 180
    whole = sky_batch(
        np.arange(n) * 10_000,
        hidden=lambda azimuth, elevation: elevation < 15,
        quality=np.where(np.arange(n) % 17 == 3, 0, 1),
        counted=np.arange(n) % 11 != 4,
    )
    kept = whole.signals.epoch % 5 != 2
    signals = dataclasses.replace(
        whole.signals, **{f.name: getattr(whole.signals, f.name)[kept] for f in dataclasses.fields(whole.signals)}
    )
    return dataclasses.replace(whole, signals=signals)


def test_means_and_systems(batch):
    """Over everything."""
    assert by_hand(batch, range(len(batch))) == pytest.approx(values(batch), abs=1e-12)


def test_a_window(batch):
    """Over the minutes of a window."""
    assert by_hand(batch, range(60, 120)) == pytest.approx(values(batch, Span(600_000, 1_200_000)), abs=1e-12)


def test_epochs_without_a_fix_do_not_count():
    """A zero in an epoch without a position is no smallest number; one in an epoch with a position is."""
    found = values(make_batch(np.arange(4) * 1000, quality=[1, 0, 1, 1], satellites_used=[7, 0, 5, 9]))
    assert (found["used_mean"], found["used_min"]) == (7.0, 5.0)


def test_nothing_stated():
    """A stream that never says how many are used has no number."""
    found = values(make_batch(np.arange(4) * 1000))
    assert set(found.values()) == {None}


def test_intervals():
    """A number that never changes is known exactly; one that changes has an interval around its mean."""
    n = 600
    still = Satellites(Site())
    still.update(make_batch(np.arange(n) * 1000, satellites_used=np.full(n, 12)))
    moving = Satellites(Site())
    moving.update(make_batch(np.arange(n) * 1000, satellites_used=np.random.default_rng(1).integers(8, 13, n)))

    assert still.summary()["satellites.used_mean"].interval == (12.0, 12.0)
    low, high = moving.summary()["satellites.used_mean"].interval
    assert 9.5 < low < 10.0 < high < 10.5
