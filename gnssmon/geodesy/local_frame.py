"""Geographic ↔ geocentric ↔ east, north, up, by PROJ.

Strategy. PROJ turns latitude, longitude and height into east, north, up about an origin (EPSG method 9837). Two local
frames differ by a rotation and a shift (EPSG method 9836 twice), so positions converted once about any origin are
moved to another by one small matrix, exactly: no series, no flat Earth.
"""

from __future__ import annotations

import functools
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

if TYPE_CHECKING:
    from pyproj import Transformer

Floats = npt.NDArray[np.float64]
Geographic = tuple[float, float, float]
"""Latitude and longitude in degrees, ellipsoidal height in metres (WGS 84)."""


def _plain(value: float) -> str:
    # A NumPy scalar prints as "np.float64(5.0)" inside a pipeline, which PROJ reads as something else.
    return repr(float(value))


@functools.lru_cache(maxsize=1)
def _geocentric() -> Transformer:
    from pyproj import Transformer

    return Transformer.from_pipeline(
        "+proj=pipeline +step +proj=unitconvert +xy_in=deg +xy_out=rad +step +proj=cart +ellps=WGS84"
    )


@functools.lru_cache(maxsize=8)
def _topocentric(origin: Geographic) -> Transformer:
    from pyproj import Transformer

    latitude_deg, longitude_deg, height_m = map(_plain, origin)
    return Transformer.from_pipeline(
        "+proj=pipeline +step +proj=unitconvert +xy_in=deg +xy_out=rad +step +proj=cart +ellps=WGS84"
        f" +step +proj=topocentric +ellps=WGS84 +lon_0={longitude_deg} +lat_0={latitude_deg} +h_0={height_m}"
    )


def to_geocentric(latitude_deg: Floats, longitude_deg: Floats, height_m: Floats) -> Floats:
    """Geocentric X, Y, Z in metres, shape (n, 3), of points of shape (n,)."""
    return np.column_stack(_geocentric().transform(longitude_deg, latitude_deg, height_m))


def to_enu(latitude_deg: Floats, longitude_deg: Floats, height_m: Floats, origin: Geographic) -> Floats:
    """East, north, up in metres about ``origin``, shape (n, 3), of points of shape (n,)."""
    if not len(latitude_deg):
        return np.empty((0, 3))
    return np.column_stack(_topocentric(origin).transform(longitude_deg, latitude_deg, height_m))


def to_geographic(enu_m: Floats, origin: Geographic) -> Geographic:
    """The geographic position of one point, shape (3,), given as east, north, up about ``origin``."""
    east_m, north_m, up_m = map(float, enu_m)
    longitude_deg, latitude_deg, height_m = _topocentric(origin).transform(east_m, north_m, up_m, direction="INVERSE")
    return float(latitude_deg), float(longitude_deg), float(height_m)


def axes(origin: Geographic) -> Floats:
    """Unit vectors east, north, up at ``origin`` as rows, in geocentric axes; shape (3, 3).

    Source: EPSG guidance note 7-2, method 9836, matrix R.
    """
    latitude, longitude = np.radians(origin[0]), np.radians(origin[1])
    sin_lat, cos_lat, sin_lon, cos_lon = np.sin(latitude), np.cos(latitude), np.sin(longitude), np.cos(longitude)
    return np.array(
        [
            [-sin_lon, cos_lon, 0.0],
            [-sin_lat * cos_lon, -sin_lat * sin_lon, cos_lat],
            [cos_lat * cos_lon, cos_lat * sin_lon, sin_lat],
        ]
    )


def change_of_origin(old: Geographic, new: Geographic) -> tuple[Floats, Floats]:
    """Rotation (3, 3) and shift (3,) with ``enu_about_new = enu_about_old @ rotation + shift``, exact."""
    rotation = axes(old) @ axes(new).T
    shift = to_enu(np.array([old[0]]), np.array([old[1]]), np.array([old[2]]), new)[0]
    return rotation, shift


def metres_per_degree(origin: Geographic) -> tuple[float, float]:
    """Length of a degree of latitude and of longitude at ``origin``, metres, from one thousandth of a degree."""
    step = 1e-3
    toward = -step if origin[0] > 89.0 else step
    enu = to_enu(
        np.array([origin[0] + toward, origin[0]]),
        np.array([origin[1], origin[1] + step]),
        np.full(2, origin[2]),
        origin,
    )
    return abs(float(enu[0, 1])) / step, abs(float(enu[1, 0])) / step
