"""Reported values against NumPy; recomputed ones against a plain solution of the normal equations."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from gnssmon.epochs.batch import UsedRows
from gnssmon.statistics.dop import Dop
from gnssmon.statistics.subject import Site, Span
from tests.statistics.batches import make_batch
from tests.statistics.skies import directions, sky_batch

N = 120


def dop_of(*batches) -> dict[str, float | None]:
    subject = Dop(Site())
    for batch in batches:
        subject.update(batch)
    return {name.removeprefix("dop."): estimate.value for name, estimate in subject.summary().items()}


def by_hand(batch, epoch: int, *, clocks: bool) -> tuple[float, float]:
    """HDOP and PDOP of one epoch by numpy.linalg.pinv of the design matrix, from the listed directions."""
    rows = batch.signals
    own = rows.epoch == epoch
    place = {
        int(code): (float(azimuth), float(elevation))
        for code, azimuth, elevation in zip(
            rows.satellite[own], rows.azimuth_deg[own], rows.elevation_deg[own], strict=True
        )
    }
    used = [int(code) for code in batch.used.satellite[batch.used.epoch == epoch]]
    systems = sorted({code // 1024 for code in used}) if clocks else [0]
    design = []
    for code in used:
        azimuth, elevation = np.radians(place[code])
        unit = [np.cos(elevation) * np.sin(azimuth), np.cos(elevation) * np.cos(azimuth), np.sin(elevation)]
        design.append(unit + [1.0 if not clocks or code // 1024 == system else 0.0 for system in systems])
    q = np.diag(np.linalg.pinv(np.array(design).T @ np.array(design)))
    return float(np.sqrt(q[0] + q[1])), float(np.sqrt(q[:3].sum()))


def test_reported_values():
    """Medians and the largest of epochs with a fix; those without report nonsense."""
    rng = np.random.default_rng(1)
    pdop, hdop = np.round(1 + rng.gamma(2, 0.3, (2, N)), 2)
    quality = np.where(np.arange(N) % 10 == 0, 0, 1)
    pdop[quality == 0] = 99.99
    found = dop_of(make_batch(np.arange(N) * 1000, pdop=pdop, hdop=hdop, quality=quality))

    assert found["pdop_median"] == pytest.approx(np.median(pdop[quality > 0]), abs=1e-9)
    assert found["hdop_median"] == pytest.approx(np.median(hdop[quality > 0]), abs=1e-9)
    assert found["pdop_max"] == pytest.approx(pdop[quality > 0].max(), abs=1e-9)
    assert found["vdop_median"] is None


@pytest.mark.parametrize("clocks", [False, True])
def test_recomputed_values(clocks):
    """Every ten seconds an epoch; one clock for all or one a system, as the receiver's own HDOP was made."""
    batch = sky_batch(np.arange(N) * 5000)
    chosen = range(0, N, 2)
    expected = np.array([by_hand(batch, epoch, clocks=clocks) for epoch in chosen])
    hdop = np.full(N, np.nan)
    hdop[::2] = expected[:, 0]
    found = dop_of(dataclasses.replace(batch, hdop=hdop))

    assert found["hdop_recomputed_median"] == pytest.approx(np.median(expected[:, 0]), abs=1e-6)
    assert found["pdop_recomputed_median"] == pytest.approx(np.median(expected[:, 1]), abs=1e-6)


def test_the_receivers_clocks_are_told_where_they_matter():
    """Where few satellites of each system are in use, the two conventions differ; with many they do not, and nothing is
    claimed."""
    many = sky_batch(np.arange(N) * 10_000)
    few = dataclasses.replace(
        many,
        used=UsedRows(*(column[many.used.satellite % 4 == 1] for column in (many.used.epoch, many.used.satellite))),
    )
    for clocks in (False, True):
        hdop = np.array([round(by_hand(few, k, clocks=clocks)[0], 2) for k in range(N)])
        assert dop_of(dataclasses.replace(few, hdop=hdop))["clocks_per_system"] == float(clocks)
    hdop = np.array([round(by_hand(many, k, clocks=False)[0], 2) for k in range(N)])
    assert dop_of(dataclasses.replace(many, hdop=hdop))["clocks_per_system"] is None


def test_whole_degrees_move_it_by_less_than_three_percent():
    """Against the true directions: the effect of rounding that the quantity's text states."""
    batch = sky_batch(np.arange(N) * 60_000)
    sky = directions(batch.axis_ms / 1000.0)
    column = {int(code): k for k, code in enumerate(sky.code)}
    rows = batch.signals
    at = np.array([column[int(code)] for code in rows.satellite])
    exact = dataclasses.replace(
        rows,
        azimuth_deg=sky.azimuth_deg[rows.epoch, at].astype(np.float32),
        elevation_deg=sky.elevation_deg[rows.epoch, at].astype(np.float32),
    )
    true = np.array([by_hand(dataclasses.replace(batch, signals=exact), k, clocks=False)[0] for k in range(N)])
    whole = np.array([by_hand(batch, k, clocks=False)[0] for k in range(N)])

    error = np.abs(whole / true - 1.0)
    assert np.median(error) < 0.005
    assert error.max() < 0.03


def test_satellites_without_a_direction_make_it_unknown():
    """With less than eight in ten of the used satellites placed, nothing is recomputed."""
    batch = sky_batch(np.arange(N) * 10_000)
    unplaced = np.flatnonzero(np.bincount(batch.signals.satellite) > 0)[::2]
    batch.signals.elevation_deg[np.isin(batch.signals.satellite, unplaced)] = np.nan

    assert dop_of(batch)["hdop_recomputed_median"] is None


def test_one_ring_is_no_geometry():
    """Satellites all at one elevation cannot tell height from clock: no number."""
    batch = sky_batch(np.arange(N) * 10_000)
    batch.signals.elevation_deg[:] = 30.0

    assert dop_of(batch)["pdop_recomputed_median"] is None


def test_nothing_used_nothing_recomputed():
    """A receiver without GSA reports an HDOP and no more."""
    batch = sky_batch(np.arange(N) * 10_000)
    nobody = UsedRows(np.empty(0, dtype=np.int32), np.empty(0, dtype=np.int32))
    found = dop_of(dataclasses.replace(batch, used=nobody))

    assert (found["hdop_median"], found["hdop_recomputed_median"]) == (pytest.approx(0.7), None)


def test_a_window():
    """Only the epochs of the window."""
    subject = Dop(Site())
    subject.update(make_batch(np.arange(N) * 1000, hdop=np.where(np.arange(N) < 60, 1.5, 0.9)))

    assert subject.summary(Span(0, 60_000))["dop.hdop_median"].value == 1.5
    assert subject.summary(Span(60_000, 120_000))["dop.hdop_median"].value == 0.9


def test_an_interval_from_a_short_record():
    """A geometry that moved from 0.6 to 0.8 once in half an hour: too slow for order statistics, but the range seen and
    as much again on either side is told; a handful of epochs tells nothing."""
    subject = Dop(Site())
    subject.update(make_batch(np.arange(1800) * 1000, hdop=np.where(np.arange(1800) < 1000, 0.6, 0.8)))
    assert subject.summary()["dop.hdop_median"].interval == pytest.approx((0.4, 1.0), abs=1e-6)

    few = Dop(Site())
    few.update(make_batch(np.arange(10) * 1000, hdop=np.where(np.arange(10) < 7, 0.6, 0.8)))
    assert few.summary()["dop.hdop_median"].interval is None
