"""The sky from a site: its place on WGS 84, azimuth and elevation of satellites, dilution of precision."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]

EARTH_RADIUS_M = 6_378_137.0
FLATTENING = 1 / 298.257223563
E2 = FLATTENING * (2 - FLATTENING)


def geocentric(latitude_deg: float, longitude_deg: float, height_m: float) -> Floats:
    """Earth-fixed position of a site on WGS 84, m, shape (3,)."""
    latitude, longitude = math.radians(latitude_deg), math.radians(longitude_deg)
    n = EARTH_RADIUS_M / math.sqrt(1 - E2 * math.sin(latitude) ** 2)
    return np.array(
        [
            (n + height_m) * math.cos(latitude) * math.cos(longitude),
            (n + height_m) * math.cos(latitude) * math.sin(longitude),
            (n * (1 - E2) + height_m) * math.sin(latitude),
        ]
    )


def local_axes(latitude_deg: float, longitude_deg: float) -> Floats:
    """Rows: unit vectors east, north, up in the earth-fixed frame, shape (3, 3)."""
    latitude, longitude = math.radians(latitude_deg), math.radians(longitude_deg)
    sine, cosine = math.sin(latitude), math.cos(latitude)
    return np.array(
        [
            [-math.sin(longitude), math.cos(longitude), 0.0],
            [-sine * math.cos(longitude), -sine * math.sin(longitude), cosine],
            [cosine * math.cos(longitude), cosine * math.sin(longitude), sine],
        ]
    )


def metres_per_degree(latitude_deg: float, height_m: float) -> tuple[float, float]:
    """Metres per degree of latitude and of longitude: radii of curvature of WGS 84 at this height."""
    latitude = math.radians(latitude_deg)
    w2 = 1 - E2 * math.sin(latitude) ** 2
    meridian = EARTH_RADIUS_M * (1 - E2) / w2**1.5
    prime = EARTH_RADIUS_M / math.sqrt(w2)
    return math.radians(1) * (meridian + height_m), math.radians(1) * (prime + height_m) * math.cos(latitude)


def directions(satellites_m: Floats, site_m: Floats, axes: Floats) -> tuple[Floats, Floats]:
    """Azimuth (0 to 360) and elevation, degrees, shape as ``satellites_m`` without its last axis."""
    local = (satellites_m - site_m) @ axes.T
    azimuth = np.degrees(np.arctan2(local[..., 0], local[..., 1])) % 360.0
    elevation = np.degrees(np.arctan2(local[..., 2], np.hypot(local[..., 0], local[..., 1])))
    return azimuth, elevation


def dops(azimuth_deg: Floats, elevation_deg: Floats) -> tuple[float, float, float]:
    """EDOP, NDOP, VDOP of satellites with one receiver clock; infinite where they do not suffice."""
    azimuth, elevation = np.radians(azimuth_deg), np.radians(elevation_deg)
    cosine = np.cos(elevation)
    design = np.column_stack(
        [cosine * np.sin(azimuth), cosine * np.cos(azimuth), np.sin(elevation), np.ones(len(azimuth))]
    )
    if len(azimuth) < 4:
        return math.inf, math.inf, math.inf
    try:
        q = np.diag(np.linalg.inv(design.T @ design))
    except np.linalg.LinAlgError:
        return math.inf, math.inf, math.inf
    if not (q > 0.0).all():
        return math.inf, math.inf, math.inf
    return math.sqrt(q[0]), math.sqrt(q[1]), math.sqrt(q[2])
