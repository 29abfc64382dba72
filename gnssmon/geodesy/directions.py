"""Directions in the sky: equal-area cells, and which of them satellites can reach.

Nine rings of 10 degrees of zenith distance, with cells in proportion to each ring's area: 263 cells whose areas agree
within 2 %. Idea of congruent cells: T. Fuhrmann et al., GPS Solutions 19 (2015).
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]

RING_DEG = 10.0
CELLS_OF_RING = (4, 12, 19, 26, 32, 38, 42, 44, 46)
"""From the zenith down to the horizon."""
CELLS = sum(CELLS_OF_RING)

EARTH_RADIUS_M = 6_378_137.0
MARGIN_DEG = 0.5
"""Orbits are inclined a little more or less than the nominal."""

_COUNT = np.array(CELLS_OF_RING)
_FIRST = np.concatenate([[0], np.cumsum(_COUNT)[:-1]])


def cell_of(azimuth_deg: Floats, elevation_deg: Floats) -> npt.NDArray[np.intp]:
    """Number of the cell that holds each direction, shape as given; elevations below 0 count as 0."""
    zenith_deg = 90.0 - np.clip(elevation_deg, 0.0, 90.0)
    ring = np.minimum((zenith_deg // RING_DEG).astype(np.intp), len(CELLS_OF_RING) - 1)
    count = _COUNT[ring]
    place = np.minimum((np.mod(azimuth_deg, 360.0) / 360.0 * count).astype(np.intp), count - 1)
    cell: npt.NDArray[np.intp] = _FIRST[ring] + place
    return cell


def cell_edges() -> tuple[Floats, Floats, Floats, Floats]:
    """Azimuth from and to, elevation from and to of every cell, degrees, shape (CELLS,) each."""
    ring = np.repeat(np.arange(len(_COUNT)), _COUNT)
    place = np.arange(CELLS) - _FIRST[ring]
    width = 360.0 / _COUNT[ring]
    high = 90.0 - ring * RING_DEG
    edges = (place * width, (place + 1) * width, high - RING_DEG, high)
    low_azimuth, high_azimuth, low, high = (np.asarray(edge, dtype=np.float64) for edge in edges)
    return low_azimuth, high_azimuth, low, high


def cell_centres() -> tuple[Floats, Floats]:
    """Azimuth and elevation of every cell's middle, degrees."""
    low_azimuth, high_azimuth, low, high = cell_edges()
    return (low_azimuth + high_azimuth) / 2.0, (low + high) / 2.0


def reachable(latitude_deg: float, orbit_radius_m: float, inclination_deg: float) -> npt.NDArray[np.bool_]:
    """Which cells a system's satellites can ever pass, seen from a latitude, shape (CELLS,).

    The ray from the station meets the sphere of the orbit's radius; no satellite goes beyond its inclination in
    (geocentric) latitude there. The earth is taken as a sphere: half a degree at most. A cell counts as reachable when
    any of nine points in it is.
    """
    low_azimuth, high_azimuth, low, high = cell_edges()
    latitude = np.radians(latitude_deg)
    within = np.zeros(CELLS, dtype=bool)
    for a in (0.1, 0.5, 0.9):
        for e in (0.1, 0.5, 0.9):
            azimuth = np.radians(low_azimuth + a * (high_azimuth - low_azimuth))
            elevation = np.radians(low + e * (high - low))
            along = -EARTH_RADIUS_M * np.sin(elevation) + np.sqrt(
                orbit_radius_m**2 - (EARTH_RADIUS_M * np.cos(elevation)) ** 2
            )
            z = (
                EARTH_RADIUS_M * np.sin(latitude)
                + along * np.cos(elevation) * np.cos(azimuth) * np.cos(latitude)
                + along * np.sin(elevation) * np.sin(latitude)
            )
            within |= np.abs(np.degrees(np.arcsin(np.clip(z / orbit_radius_m, -1, 1)))) <= inclination_deg + MARGIN_DEG
    return within
