"""The sky against skies that were made: which cells were crossed, where the horizon was put, what is never reached."""

from __future__ import annotations

import numpy as np
import pytest

from gnssmon.geodesy import directions
from gnssmon.statistics.horizon import SECTORS
from gnssmon.statistics.looks import Looks
from gnssmon.statistics.pictures import (
    CELL_BLOCKED,
    CELL_OPEN,
    CELL_UNKNOWN,
    CELL_UNREACHABLE,
    MOST_POINTS,
)
from gnssmon.statistics.sky import Sky
from gnssmon.statistics.subject import EVERYTHING, Site, Span
from tests.statistics.skies import directions as true_directions
from tests.statistics.skies import sky_batch

STEP_MS = 20_000


def sky_of(hours: float, *, begin_ms: int = 0, mask_deg: float = 10.0, **kind) -> Sky:
    """A made-up sky seen for some hours, every 20 s, on one signal."""
    sky = Sky(Site(mask_deg=mask_deg))
    axis_ms = begin_ms + np.arange(0, int(hours * 3_600_000), STEP_MS)
    for first in range(0, len(axis_ms), 2000):
        sky.update(sky_batch(axis_ms[first : first + 2000], signals=1, **kind))
    return sky


def values(sky: Sky, span: Span = EVERYTHING) -> dict:
    return {name.removeprefix("sky."): estimate.value for name, estimate in sky.summary(span).items()}


def skyline(azimuth_deg):
    """A building to the north-east up to 40 degrees, a slope up to 15 elsewhere in the south, nothing else."""
    return np.where((azimuth_deg >= 20) & (azimuth_deg < 100), 40.0, np.where(azimuth_deg >= 180, 15.0, 0.0))


def behind_skyline(azimuth_deg, elevation_deg):
    return elevation_deg < skyline(azimuth_deg)


@pytest.fixture(scope="module")
def blocked() -> Sky:
    return sky_of(12, hidden=behind_skyline)


@pytest.fixture(scope="module")
def free() -> Sky:
    return sky_of(6)


def test_cells_crossed():
    """Coverage is the share of cells above the mask in which a satellite's minute lay; from the true directions."""
    sky = sky_of(1.0)
    axis_ms = np.arange(0, 3_600_000, STEP_MS)
    true = true_directions(axis_ms / 1000.0)
    # A minute's mean direction: of three looks the middle one is close enough for all but a few cells.
    azimuth, elevation = true.azimuth_deg[1::3], true.elevation_deg[1::3]
    cells = set(directions.cell_of(azimuth, elevation)[elevation >= 2.5].tolist())
    _, middle = directions.cell_centres()
    above = set(np.flatnonzero(middle >= 10.0).tolist())

    assert len(cells & above) / len(above) == pytest.approx(values(sky)["coverage_share"], abs=0.02)


def test_the_mask_chooses_the_cells():
    """With a higher mask fewer cells are asked for."""
    low, high = (values(sky_of(1.0, mask_deg=mask))["coverage_share"] for mask in (5.0, 40.0))
    _, middle = directions.cell_centres()

    assert low != high
    assert (middle >= 40).sum() < (middle >= 5).sum()


def test_an_open_sky(free):
    """Nothing is obstructed, and every cell that was crossed is open; the horizon is at the ground."""
    found = values(free)
    picture = free.picture()

    assert found["obstructed_share"] == 0.0
    assert set(np.unique(picture.state).tolist()) <= {CELL_UNKNOWN, CELL_OPEN, CELL_UNREACHABLE}
    assert np.nanmedian(picture.horizon_deg) <= 1.0
    assert np.nanmax(picture.horizon_deg) <= 5.0


def test_a_skyline_is_found(blocked):
    """Median error of the horizon in 12 hours at most a degree, nine sectors in ten within two (measured in the
    method's own simulation: 0 and 0); its interval holds the truth of nearly all sectors."""
    picture = blocked.picture()
    true = skyline(np.arange(SECTORS) * 10.0 + 5.0)
    seen = np.isfinite(picture.horizon_deg)
    error = np.abs(picture.horizon_deg - true)[seen & (true > 0)]
    within = (picture.horizon_low_deg <= true + 0.5) & (picture.horizon_high_deg >= true - 0.5)

    assert seen.sum() >= 30
    assert np.median(error) <= 1.0
    assert np.quantile(error, 0.9) <= 2.0
    assert within[seen].mean() >= 0.9


def test_blocked_cells(blocked):
    """Cells wholly behind the skyline are blocked, those wholly above it open; their share is the obstructed one."""
    picture = blocked.picture()
    crossed = ~np.isin(picture.state, (CELL_UNKNOWN, CELL_UNREACHABLE))
    edge = np.maximum(skyline(picture.azimuth_from_deg), skyline(picture.azimuth_to_deg - 1e-6))
    flat = skyline(picture.azimuth_from_deg) == skyline(picture.azimuth_to_deg - 1e-6)
    behind = crossed & flat & (picture.elevation_to_deg <= edge)
    over = crossed & flat & (picture.elevation_from_deg >= edge)

    assert behind.sum() > 20
    assert (picture.state[behind] == CELL_BLOCKED).all()
    assert over.sum() > 60
    assert (picture.state[over] == CELL_OPEN).all()
    above = (picture.elevation_from_deg + picture.elevation_to_deg) / 2 >= 10
    share = (picture.state[above & crossed] == CELL_BLOCKED).mean()
    assert values(blocked)["obstructed_share"] == share
    low, high = blocked.summary()["sky.obstructed_share"].interval
    assert low < share < high


def test_a_receiver_that_hides_silent_satellites():
    """It lists only what it hears: the share has no interval, the horizon lies under the lowest satellite heard and
    counts as unseen where that leaves it open."""
    sky = sky_of(6, hidden=behind_skyline, list_hidden=False)
    estimate = sky.summary()["sky.obstructed_share"]
    picture = sky.picture()
    north_east = slice(3, 9)

    assert (estimate.value, estimate.interval) == (0.0, None)
    assert np.isnan(picture.horizon_deg[north_east]).all()
    assert (picture.horizon_low_deg[north_east] < 10).all()
    assert (picture.horizon_high_deg[north_east] >= 35).all()
    assert values(sky)["mask_deg"][3] is None


def test_a_satellite_that_is_switched_off_hides_nothing():
    """Listed high in the sky and never heard, it says nothing about the site."""

    def one_is_off(azimuth_deg, elevation_deg):
        hidden = np.zeros(azimuth_deg.shape, dtype=bool)
        # Of two hundred epochs the satellite that stands highest in the middle.
        hidden[:, elevation_deg[len(elevation_deg) // 2].argmax()] = True
        return hidden

    sky = Sky(Site())
    sky.update(sky_batch(np.arange(200) * STEP_MS, signals=1, hidden=one_is_off))

    assert values(sky)["obstructed_share"] == 0.0


@pytest.mark.parametrize(("latitude_deg", "least", "most"), [(48.0, 0.13, 0.27), (0.0, 0.0, 0.05)])
def test_cells_that_no_satellite_reaches(latitude_deg, least, most):
    """From 48 degrees the pole's side of the sky stays empty, from the equator hardly anything (the method's own table:
    GLONASS leaves .14 and .01 of the sky above 5 degrees, the other systems .26 and .08; a cell counts as reachable
    when a part of it is)."""
    picture = sky_of(1.0, latitude_deg=latitude_deg).picture()
    unreachable = picture.state == CELL_UNREACHABLE
    above = picture.elevation_from_deg >= 0.0
    share = unreachable[above].mean()

    assert least - 0.06 <= share <= most
    if latitude_deg > 0:
        north = np.minimum(picture.azimuth_from_deg, 360.0 - picture.azimuth_to_deg) < 90
        assert north[unreachable].all()


def test_reachable_coverage_grows_to_all():
    """In a day four systems cross every cell that they can reach; no cell beyond that is crossed."""
    found = values(sky_of(24))

    assert found["coverage_reachable_share"] > 0.97
    assert found["coverage_needed_s"] == 0.0
    assert found["coverage_share"] < found["coverage_reachable_share"]


@pytest.mark.parametrize("systems", [1, 2, 4])
def test_the_forecast_of_the_coverage(systems):
    """After one hour and after two the time to 90 % is told within a factor of one and a half."""
    truth_s = next(
        hours * 3600.0
        for hours in np.arange(3.0, 16.0, 0.5)
        if values(sky_of(hours, systems=systems))["coverage_reachable_share"] >= 0.9
    )
    for hours in (1.0, 2.0):
        total_s = values(sky_of(hours, systems=systems))["coverage_needed_s"] + hours * 3600.0
        assert truth_s / 1.5 < total_s < truth_s * 1.5
    assert values(sky_of(0.3, systems=systems))["coverage_needed_s"] is None


def test_tracks_follow_the_satellites(free):
    """Points of a track lie in order of time and close to the true direction; there are not too many to draw."""
    picture = free.picture()
    points = sum(len(track.azimuth_deg) for track in picture.tracks)

    assert 1000 < points <= MOST_POINTS + len(picture.tracks)
    track = next(track for track in picture.tracks if len(track.elevation_deg) > 20)
    assert np.abs(np.diff(track.elevation_deg)).max() < 8.0
    assert track.tracked.all()


def test_a_shadow_shows_in_the_residuals():
    """Levels 8 dB down in one direction: the cells there stand out, those elsewhere do not."""
    sky = Sky(Site())
    batch = sky_batch(np.arange(0, 6 * 3_600_000, STEP_MS), signals=1)
    rows = batch.signals
    shaded = (rows.azimuth_deg >= 200) & (rows.azimuth_deg < 260) & (rows.elevation_deg < 50)
    rows.cn0_dbhz[shaded] -= 8.0
    sky.update(batch)
    picture = sky.picture()
    inside = (
        (picture.azimuth_from_deg >= 200) & (picture.azimuth_to_deg <= 260) & (picture.elevation_to_deg <= 50)
    ) & np.isfinite(picture.residual_db)
    outside = ((picture.azimuth_to_deg < 190) | (picture.azimuth_from_deg > 270)) & np.isfinite(picture.residual_db)

    assert picture.residual_db[inside].max() < -2.0
    assert np.median(picture.residual_db[inside]) < -3.0
    assert np.abs(np.median(picture.residual_db[outside])) < 1.0


def test_a_window_sees_its_own_time(blocked):
    """Two hours out of twelve cross fewer cells."""
    part, whole = (values(blocked, span)["coverage_share"] for span in (Span(0, 7_200_000), EVERYTHING))
    assert 0.3 < part < whole


def test_turning_the_sky_turns_the_answers():
    """Everything turned by 90 degrees: the horizon turns along (a property of the method)."""
    one = sky_of(3, hidden=behind_skyline).picture()
    batch = sky_batch(np.arange(0, 3 * 3_600_000, STEP_MS), signals=1, hidden=behind_skyline)
    batch.signals.azimuth_deg[:] = np.mod(batch.signals.azimuth_deg + 90.0, 360.0)
    turned = Sky(Site())
    turned.update(batch)

    np.testing.assert_array_equal(np.roll(one.horizon_deg, 9), turned.picture().horizon_deg)


def test_directions_of_a_minute():
    """Elevation and azimuth of a row are the mean of the minute's, through north as well; whole degrees stay whole."""
    from gnssmon.statistics.grid import grid_of

    batch = sky_batch(np.arange(0, 60_000, 1000), signals=1)
    rows = batch.signals
    rows.azimuth_deg[:] = np.where(rows.epoch < 30, 359.0, 1.0)
    looks = Looks()
    looks.update(grid_of(batch))
    found = looks.within(EVERYTHING)
    for satellite, azimuth, elevation in zip(
        found.satellite.tolist(), found.azimuth_deg.tolist(), found.elevation_deg.tolist(), strict=True
    ):
        own = rows.satellite == satellite
        if own.sum() == 60:
            assert azimuth == 0.0
        assert rows.elevation_deg[own].astype(float).mean() == pytest.approx(elevation, abs=1e-9)
    assert found.listed.sum() == len(rows.epoch)
