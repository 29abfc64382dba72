"""Equal-area cells of the sky, and which of them satellites reach."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gnssmon.geodesy import directions


def test_cells_have_equal_area():
    """A cell's area on the unit sphere, Δaz · Δ(sin e), is nearly the same for all (Fuhrmann et al. 2015, the idea)."""
    low_azimuth, high_azimuth, low, high = directions.cell_edges()
    area = np.radians(high_azimuth - low_azimuth) * (np.sin(np.radians(high)) - np.sin(np.radians(low)))

    assert area.sum() == pytest.approx(2 * np.pi, abs=1e-12)
    assert area.max() / area.min() < 1.04
    assert len(area) == directions.CELLS == 263


@given(azimuth_deg=st.floats(0.0, 359.99), elevation_deg=st.floats(0.0, 90.0))
def test_every_direction_lies_in_its_cell(azimuth_deg, elevation_deg):
    """The cell that a direction is given holds it."""
    cell = int(directions.cell_of(np.array([azimuth_deg]), np.array([elevation_deg]))[0])
    low_azimuth, high_azimuth, low, high = (float(edge[cell]) for edge in directions.cell_edges())

    assert low_azimuth - 1e-9 <= azimuth_deg <= high_azimuth + 1e-9
    assert low - 1e-9 <= elevation_deg <= high + 1e-9


def test_below_the_horizon_counts_as_the_horizon():
    """Some receivers list elevations of a few degrees below zero."""
    assert directions.cell_of(np.array([10.0]), np.array([-3.0])) == directions.cell_of(
        np.array([10.0]), np.array([0.0])
    )


def test_hole_about_the_pole():
    """GPS satellites (inclination 55 degrees) never cross the sky due north at 30 degrees elevation from 60° N, do so
    due south; from 60° S it is the other way round."""
    north, south = (int(directions.cell_of(np.array([azimuth]), np.array([30.0]))[0]) for azimuth in (0.5, 180.5))
    at_60_north = directions.reachable(60.0, 26_559_700.0, 55.0)
    at_60_south = directions.reachable(-60.0, 26_559_700.0, 55.0)

    assert (bool(at_60_north[north]), bool(at_60_north[south])) == (False, True)
    assert (bool(at_60_south[north]), bool(at_60_south[south])) == (True, False)


@pytest.mark.parametrize(("latitude_deg", "share"), [(0.0, 0.08), (20.0, 0.12), (48.0, 0.26), (60.0, 0.29)])
def test_share_of_sky_that_gps_never_visits(latitude_deg, share):
    """Shares above 5 degrees, simulated elsewhere over a day: .08, .12, .26, .29. Cells that are only
    partly reachable count as reachable here, so ours is at most that, and not much less."""
    reach = directions.reachable(latitude_deg, 26_559_700.0, 55.0)
    _, _, low, high = directions.cell_edges()
    area = np.sin(np.radians(high)) - np.sin(np.radians(np.maximum(low, 5.0)))
    low_azimuth, high_azimuth, _, _ = directions.cell_edges()
    area = area * (high_azimuth - low_azimuth)
    never = float(area[~reach].sum() / area.sum())

    assert share - 0.12 < never <= share + 0.01
