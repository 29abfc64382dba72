"""What panels and figures draw: frozen arrays per subject, small enough to hand over twice a second.

Times are ``axis_ms`` (see ``EpochBatch``); minutes are ``axis_ms // 60 000``. Nobody writes to the arrays.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]

MOST_POINTS = 4000
"""Scatter points and track points beyond this are thinned evenly: more cannot be seen."""

CELL_UNKNOWN, CELL_OPEN, CELL_BLOCKED, CELL_MIXED, CELL_UNREACHABLE = range(5)
"""States of a sky cell: nothing seen yet, tracked, in view without a signal, both, no satellite ever passes."""


@dataclass(frozen=True, slots=True)
class ScatterPicture:
    axis_ms: Ints
    east_m: Floats
    north_m: Floats
    up_m: Floats
    quality: npt.NDArray[np.int8]
    """Shapes (k,), k at most MOST_POINTS; metres from ``origin``."""
    origin: tuple[float, float, float] | None
    """Latitude deg, longitude deg, ellipsoidal height m of the centre; None: no position yet."""
    about: str
    """``mean`` or ``reference``: what the origin is."""
    mean_m: tuple[float, float, float] | None
    """East, north, up of the mean from the origin."""
    ellipse_m: tuple[float, float, float] | None
    """1-sigma semi-major, semi-minor (m), azimuth of the major axis (deg)."""
    cep50_m: float
    r95_m: float
    minute: Ints
    minute_mean_m: Floats
    """Mean east, north, up per minute, shape (t, 3)."""


@dataclass(frozen=True, slots=True)
class Track:
    satellite: str
    """``G07``."""
    azimuth_deg: Floats
    elevation_deg: Floats
    tracked: npt.NDArray[np.bool_]
    """Shapes (k,), in time order, about one point a minute."""


@dataclass(frozen=True, slots=True)
class SkyPicture:
    azimuth_from_deg: Floats
    azimuth_to_deg: Floats
    elevation_from_deg: Floats
    elevation_to_deg: Floats
    state: npt.NDArray[np.uint8]
    """Shapes (cells,): equal-area cells and their CELL_ state."""
    residual_db: Floats
    """Mean C/N0 minus the level-against-elevation curve per cell, dB; NaN where unknown."""
    horizon_deg: Floats
    """Estimated horizon per 10 degrees of azimuth, shape (36,), NaN unknown."""
    horizon_low_deg: Floats
    horizon_high_deg: Floats
    """Its interval, shape (36,)."""
    tracks: tuple[Track, ...]
    mask_deg: float


@dataclass(frozen=True, slots=True)
class LevelPicture:
    signals: tuple[str, ...]
    """Labels such as ``G1``, ``E5a``."""
    elevation_deg: Floats
    """Centres of the 5-degree bins, shape (18,)."""
    mean_dbhz: Floats
    low_dbhz: Floats
    high_dbhz: Floats
    """Mean, 5 % and 95 % quantile, shape (signals, 18), NaN empty."""
    count: Ints
    """Shape (signals, 18)."""
    minute: Ints
    level_dbhz: Floats
    """Common-mode level per minute, shape (signals, t): free of satellites rising and setting; NaN empty."""
    spread_db: Floats = field(default_factory=lambda: np.empty((0, 0)))
    """Standard deviation in each bin, shape (signals, 18), NaN with fewer than two."""
    satellites: tuple[str, ...] = ()
    """``G07``; one entry a satellite and signal, k in all."""
    satellite_signal: npt.NDArray[np.intp] = field(default_factory=lambda: np.empty(0, dtype=np.intp))
    """Row of ``signals``, shape (k,)."""
    satellite_count: Ints = field(default_factory=lambda: np.empty(0, dtype=np.int64))
    satellite_mean_dbhz: Floats = field(default_factory=lambda: np.empty(0))
    satellite_offset_db: Floats = field(default_factory=lambda: np.empty(0))
    """What is the satellite's own: its mean against the curve at its elevations. Shapes (k,)."""


@dataclass(frozen=True, slots=True)
class FixPicture:
    minute: Ints
    by_quality: Ints
    """Epochs per minute and GGA quality 0 to 8, shape (t, 9)."""
    used_mean: Floats
    hdop_mean: Floats
    correction_age_max_s: Floats
    """Shapes (t,), NaN empty."""


@dataclass(frozen=True, slots=True)
class StreamPicture:
    minute: Ints
    epochs: Ints
    bytes: Ints
    checksum_failures: Ints
    """Per minute, shapes (t,)."""
    gaps: tuple[tuple[int, float], ...]
    """Start on the time axis (ms) and length (s) of the latest gaps, at most 200."""


@dataclass(frozen=True, slots=True)
class TimingPicture:
    minute: Ints
    delay_median_s: Floats
    delay_95_s: Floats
    """UTC of fix to arrival, per minute, NaN where arrival is not known."""


@dataclass(frozen=True, slots=True)
class Pictures:
    scatter: ScatterPicture
    sky: SkyPicture
    level: LevelPicture
    fix: FixPicture
    stream: StreamPicture
    timing: TimingPicture
