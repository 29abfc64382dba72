"""Levels against the plain list of reports, and against skies whose truth is known."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from gnssmon.constellations import identity
from gnssmon.epochs.batch import SignalRows
from gnssmon.statistics.signal_level import SignalLevel
from gnssmon.statistics.subject import EVERYTHING, Site, Span
from tests.statistics.batches import make_batch
from tests.statistics.skies import SYSTEMS, directions, level, sky_batch

N = 360


def level_of(*batches) -> SignalLevel:
    subject = SignalLevel(Site())
    for batch in batches:
        subject.update(batch)
    return subject


def values(subject: SignalLevel, span: Span = EVERYTHING) -> dict[str, float | None]:
    return {name.removeprefix("cn0."): estimate.value for name, estimate in subject.summary(span).items()}


@pytest.fixture(scope="module")
def batch():
    """An hour, an epoch every ten seconds, four systems on three signals, some satellites hidden."""
    return sky_batch(np.arange(N) * 10_000, hidden=lambda azimuth, elevation: (elevation < 12) & (azimuth < 90))


def reports(batch, first: int = 0, last: int = N):
    """Levels, satellites and labels of the reports with a level."""
    rows = batch.signals
    chosen = np.isfinite(rows.cn0_dbhz) & (rows.epoch >= first) & (rows.epoch < last)
    labels = [
        identity.signal_label(code // 1024, signal)
        for code, signal in zip(rows.satellite[chosen].tolist(), rows.signal[chosen].tolist(), strict=True)
    ]
    return rows.cn0_dbhz[chosen].astype(float), rows.satellite[chosen], np.array(labels), rows.epoch[chosen]


@pytest.mark.parametrize(("span", "first", "last"), [(EVERYTHING, 0, N), (Span(600_000, 1_800_000), 60, 180)])
def test_means_and_median_of_reports(batch, span, first, last):
    """Unweighted over the reports with a level: all of them, and each signal's."""
    found = values(level_of(batch), span)
    cn0, _, labels, _ = reports(batch, first, last)

    assert cn0.mean() == pytest.approx(found["mean_dbhz"], abs=1e-9)
    assert np.median(cn0) == found["median_dbhz"]
    assert {f"mean_dbhz.{label}" for label in set(labels)} == {name for name in found if name.startswith("mean_dbhz.")}
    for label in set(labels):
        assert cn0[labels == label].mean() == pytest.approx(found[f"mean_dbhz.{label}"], abs=1e-9)


def test_the_four_strongest(batch):
    """Mean over epochs of the mean of the four best satellites, each by its best signal."""
    cn0, satellite, _, epoch = reports(batch)
    means = []
    for k in range(N):
        own = epoch == k
        best: dict[int, float] = {}
        for code, value in zip(satellite[own].tolist(), cn0[own].tolist(), strict=True):
            best[code] = max(value, best.get(code, 0.0))
        means.append(np.mean(sorted(best.values())[-4:]))

    assert np.mean(means) == pytest.approx(values(level_of(batch))["strongest4_mean_dbhz"], abs=1e-9)


def listed(cn0_dbhz, satellites, *, elevation=45.0, signal=-1):
    """One epoch with these reports."""
    count = len(cn0_dbhz)
    rows = SignalRows(
        np.zeros(count, dtype=np.int32),
        np.array(satellites, dtype=np.int32),
        np.full(count, signal, dtype=np.int16),
        np.full(count, elevation, dtype=np.float32),
        np.full(count, 10.0, dtype=np.float32),
        np.array(cn0_dbhz, dtype=np.float32),
    )
    return dataclasses.replace(make_batch([0]), signals=rows)


def test_a_satellite_listed_twice_without_a_signal_counts_twice():
    """Receivers that name no signals list a satellite once a band: both reports are reports, it is one satellite."""
    found = values(level_of(listed([40, 30, 35, 45, 44, 20], [1, 1, 2, 3, 4, 4])))

    assert found["mean_dbhz"] == pytest.approx(np.mean([40, 30, 35, 45, 44, 20]))
    assert found["mean_dbhz.G"] == found["mean_dbhz"]
    assert found["strongest4_mean_dbhz"] == pytest.approx((40 + 35 + 45 + 44) / 4)


def test_levels_with_decimals():
    """Tenths are kept in mean and median; what is absurd is cut, not believed."""
    found = values(level_of(listed([40.3, 41.7, 38.2, 999.0], [1, 2, 3, 4])))

    assert found["median_dbhz"] == pytest.approx((40.3 + 41.7) / 2)
    assert found["mean_dbhz"] == pytest.approx((40.3 + 41.7 + 38.2 + 327.0) / 4, abs=0.01)


def test_a_satellite_without_a_direction_still_has_a_level():
    """It counts in the means; against elevation it cannot be drawn."""
    subject = level_of(listed([40.0, 42.0], [1, 2], elevation=np.nan))

    assert values(subject)["mean_dbhz"] == 41.0
    assert subject.picture().count.sum() == 0


def test_level_against_elevation(batch):
    """Counts, means and quantiles of the reports in each band of five degrees, as NumPy gives them.

    Count and mean go by the satellite's mean elevation in a minute, the quantiles by each report's.
    """
    picture = level_of(batch).picture()
    rows = batch.signals
    label = picture.signals.index("G1")
    own = np.isfinite(rows.cn0_dbhz) & (rows.signal == 0)
    minute = rows.epoch // 6 * 8192 + rows.satellite
    _, which = np.unique(minute, return_inverse=True)
    elevation = (np.bincount(which, weights=rows.elevation_deg) / np.bincount(which))[which]
    for band in range(1, 17):
        inside = own & (rows.elevation_deg // 5 == band)
        by_minute = own & (np.floor(elevation / 5 + 1e-9) == band)
        low, high = np.quantile(rows.cn0_dbhz[inside], (0.05, 0.95))
        assert picture.low_dbhz[label, band] == pytest.approx(low, abs=1e-6)
        spread = rows.cn0_dbhz[inside].astype(float).std(ddof=1)
        assert picture.spread_db[label, band] == pytest.approx(spread, abs=1e-6)
        assert picture.high_dbhz[label, band] == pytest.approx(high, abs=1e-6)
        assert picture.mean_dbhz[label, band] == pytest.approx(rows.cn0_dbhz[by_minute].astype(float).mean(), abs=1e-6)
        assert picture.count[label, band] == by_minute.sum()
    assert picture.count[label].sum() == own.sum()


def test_a_strong_and_a_weak_satellite_are_found_out():
    """Offsets that single satellites were given come back, in an hour's record of forty satellites."""
    visible = directions(np.array([0.0, 3600.0]))
    codes = visible.code[(visible.elevation_deg > 20).all(axis=0)]
    strong, weak = int(codes[0]), int(codes[-1])
    batch = sky_batch(np.arange(N) * 10_000, offsets_db={strong: 4.0, weak: -5.0})
    picture = level_of(batch).picture()
    offset = dict(zip(picture.satellites, picture.satellite_offset_db.tolist(), strict=True))

    # Drawn towards zero by what is known of satellites in general; the curve took a part of it as well.
    assert 1.5 < offset[identity.label(strong)] < 4.5
    assert -5.5 < offset[identity.label(weak)] < -2.0


@pytest.mark.parametrize(("shade_db", "tolerance_db"), [(0.0, 0.15), (10.0, 0.6)])
def test_the_common_level_does_not_follow_satellites_rising_and_setting(shade_db, tolerance_db):
    """Six hours of a constant level: the mean over satellites moves with the sky, the common level stays put; a real
    drop of 3 dB shows as one of 3 dB. One satellite in ten that loses 10 dB behind a tree moves it by half of what it
    moves the mean."""
    axis_ms = np.arange(0, 6 * 3_600_000, 20_000)
    batch = sky_batch(axis_ms, signals=1, noise_db=0.7)
    rows = batch.signals
    late = rows.epoch >= len(axis_ms) // 2
    shaded = (rows.satellite == np.bincount(rows.satellite[late]).argmax()) & late
    cn0 = rows.cn0_dbhz - np.where(late, 3.0, 0.0) - np.where(shaded, shade_db, 0.0)
    batch = dataclasses.replace(batch, signals=dataclasses.replace(rows, cn0_dbhz=cn0.astype(np.float32)))
    picture = level_of(batch).picture()
    label = picture.signals.index("G1")
    common = picture.level_dbhz[label]
    half = len(common) // 2
    own = rows.signal == 0
    mean = np.bincount(rows.epoch[own], weights=cn0[own]) / np.bincount(rows.epoch[own])

    assert np.median(common[:half]) - np.median(common[half:]) == pytest.approx(3.0, abs=tolerance_db)
    assert np.ptp(mean[: len(mean) // 2]) > 3.0
    assert common[:half].std() < 0.35
    assert common[half:].std() < 0.35
    assert np.median(common[:half]) == pytest.approx(float(level(45.0)), abs=2.0 * tolerance_db)


def test_intervals_hold_the_mean():
    """The interval of a mean lies around it; that of a level that never moves has no width."""
    one = listed([40.0, 41.0], [1, 2])
    still = level_of(*(dataclasses.replace(one, axis_ms=np.array([k * 1000])) for k in range(40)))
    assert still.summary()["cn0.mean_dbhz"].interval == (40.5, 40.5)
    moving = level_of(sky_batch(np.arange(2000) * 1000)).summary()["cn0.mean_dbhz"]
    assert moving.interval[0] < moving.value < moving.interval[1]
    assert moving.samples > 100_000


def test_four_systems_give_all_their_labels(batch):
    """Every signal of the made-up sky has its own mean."""
    signals = sum(len(rows) for *_, rows in SYSTEMS)
    assert signals == len([name for name in values(level_of(batch)) if name.startswith("mean_dbhz.")])
