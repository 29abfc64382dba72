"""Positions of a stream, kept one by one, and any window of them in metres about its own centre.

Strategy. Latitude, longitude and height are kept as the receiver gave them. East, north, up about the first position
is computed by PROJ once per position; a window's own frame differs from that one by a rotation and a shift, which are
applied exactly. So a window costs a matrix product, and its numbers are those of a full conversion.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.epochs.batch import EpochBatch
from gnssmon.estimators.rows import Rows
from gnssmon.estimators.series import Series
from gnssmon.geodesy import local_frame
from gnssmon.geodesy.local_frame import Geographic
from gnssmon.statistics.subject import Span

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]

MOST_POSITIONS = 1_500_000
"""Positions kept, with their local coordinates 57 bytes each, 86 MB: 17 days at 1 Hz in full, a month every 2 s."""
POLAR_LATITUDE_DEG = 89.0
"""Beyond it a mean of longitudes can be far from every one of them: the mean is taken in metres there."""


@dataclass(frozen=True, slots=True)
class Cloud:
    """The positions of a window, in stream order."""

    axis_ms: Ints
    enu_m: Floats
    """East, north, up about ``centre``, shape (n, 3); up is NaN where the stream gave no altitude."""
    quality: npt.NDArray[np.int8]
    centre: Geographic
    """Mean latitude, longitude (deg), ellipsoidal height (m; 0 if no altitude was given at all)."""

    def __len__(self) -> int:
        return len(self.axis_ms)

    def about(self, origin: Geographic) -> Floats:
        """East, north, up about another origin, shape (n, 3)."""
        rotation, shift = local_frame.change_of_origin(self.centre, origin)
        filled = np.nan_to_num(self.enu_m)
        moved = filled @ rotation + shift
        moved[np.isnan(self.enu_m[:, 2]), 2] = np.nan
        return moved


class Positions:
    """Every counted position with a fix, bounded."""

    def __init__(self) -> None:
        self._series = Series(
            {"latitude_deg": np.float64, "longitude_deg": np.float64, "height_m": np.float64, "quality": np.int8},
            most_rows=MOST_POSITIONS,
        )
        self._local = Rows({"east_m": np.float64, "north_m": np.float64, "up_m": np.float64})
        self._local_revision = 0
        self._origin: Geographic | None = None

    def __len__(self) -> int:
        return len(self._series)

    @property
    def grid_ms(self) -> int:
        """Width of the cells of which one position each is kept; 0: all are kept."""
        return self._series.grid_ms

    def update(self, batch: EpochBatch, fixed: npt.NDArray[np.intp]) -> None:
        """Take in the positions of closed epochs, of the rows ``fixed``."""
        self._series.update(
            batch.axis_ms[fixed],
            latitude_deg=batch.latitude_deg[fixed],
            longitude_deg=batch.longitude_deg[fixed],
            height_m=batch.height_m[fixed],
            quality=batch.quality[fixed],
        )

    def merge(self, other: Positions) -> None:
        """Take in the positions of a later part of the stream."""
        self._series.merge(other._series)

    def cloud(self, span: Span) -> Cloud | None:
        """The positions inside ``span``; None where there are none."""
        rows = self._series.within(span.from_ms, span.to_ms)
        axis_ms = self._series.axis_ms[rows]
        if not len(axis_ms):
            return None
        origin = self._convert()
        latitude_deg, longitude_deg, height_m = (
            self._series[name][rows].view(np.float64) for name in ("latitude_deg", "longitude_deg", "height_m")
        )
        local = np.column_stack([self._local[name][rows] for name in ("east_m", "north_m", "up_m")]).view(np.float64)
        centre = _centre(latitude_deg, longitude_deg, height_m, local, origin)
        rotation, shift = local_frame.change_of_origin(origin, centre)
        enu_m = local @ rotation + shift
        unknown = np.isnan(height_m)
        if unknown.any():
            enu_m[unknown, 2] = np.nan
        return Cloud(axis_ms, enu_m, self._series["quality"][rows].view(np.int8), centre)

    def _convert(self) -> Geographic:
        """Bring the local coordinates up to date; returns their origin."""
        series, local = self._series, self._local
        latitude_deg, longitude_deg, height_m = (
            series[name].view(np.float64) for name in ("latitude_deg", "longitude_deg", "height_m")
        )
        if self._origin is None:
            first = float(height_m[0])
            self._origin = (float(latitude_deg[0]), float(longitude_deg[0]), first if math.isfinite(first) else 0.0)
        if self._local_revision != series.revision:
            local.keep(slice(0))
            self._local_revision = series.revision
        new = slice(len(local), len(series))
        if new.start < new.stop:
            # Without an altitude the horizontal part is taken at the origin's height.
            height = np.where(np.isnan(height_m[new]), self._origin[2], height_m[new])
            enu = local_frame.to_enu(latitude_deg[new], longitude_deg[new], height, self._origin)
            local.append(east_m=enu[:, 0], north_m=enu[:, 1], up_m=enu[:, 2])
        return self._origin


def _centre(
    latitude_deg: Floats, longitude_deg: Floats, height_m: Floats, local_m: Floats, origin: Geographic
) -> Geographic:
    """Mean latitude, longitude and height; right across the 180th meridian and at the poles."""
    known = height_m[np.isfinite(height_m)]
    mean_height_m = float(known.mean()) if len(known) else 0.0
    # Longitudes are averaged as differences from the first, so that 179.9 and -179.9 meet at 180.
    off_deg = (longitude_deg - origin[1] + 180.0) % 360.0 - 180.0
    mean_latitude_deg = float(latitude_deg.mean())
    if abs(mean_latitude_deg) > POLAR_LATITUDE_DEG and np.ptp(off_deg) > 1.0:
        latitude, longitude, _ = local_frame.to_geographic(local_m.mean(axis=0), origin)
        return latitude, longitude, mean_height_m
    if np.ptp(longitude_deg) < 180.0:
        return mean_latitude_deg, float(longitude_deg.mean()), mean_height_m
    longitude = (origin[1] + float(off_deg.mean()) + 180.0) % 360.0 - 180.0
    return mean_latitude_deg, longitude, mean_height_m
