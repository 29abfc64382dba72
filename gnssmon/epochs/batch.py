"""EpochBatch: closed epochs as read-only columns, the only thing that statistics ever see."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TypeVar

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class SignalRows:
    """One row per satellite and signal listed in an epoch (a GSV group), sorted by epoch. Arrays of shape (m,)."""

    epoch: npt.NDArray[np.int32]
    """Row of the batch."""
    satellite: npt.NDArray[np.int32]
    """Code from ``constellations.identity``: system index * 1024 + number within the system."""
    signal: npt.NDArray[np.int16]
    """Row of ``constellations.systems.SIGNALS``; -1 where the stream does not say which signal."""
    elevation_deg: npt.NDArray[np.float32]
    """NaN not stated."""
    azimuth_deg: npt.NDArray[np.float32]
    cn0_dbhz: npt.NDArray[np.float32]
    """NaN: listed without a signal."""


@dataclass(frozen=True, slots=True)
class UsedRows:
    """Satellites used in the fix, from GSA, one row each, sorted by epoch. Arrays of shape (k,)."""

    epoch: npt.NDArray[np.int32]
    satellite: npt.NDArray[np.int32]


@dataclass(frozen=True, slots=True, eq=False)
class EpochBatch:
    """Epochs in stream order; arrays of shape (n,) unless said. NaN or -1: not stated."""

    axis_ms: Ints
    """The time axis of all statistics: milliseconds, strictly continuous through midnight and leap seconds, starting
    at the first epoch's time of day (undated stream) or at its UTC since 1970. Steps back only where the receiver's
    own time does. An epoch without any time shares the place of the one before it, or stands at 0 at the start."""
    utc_ms: Ints
    """UTC since 1970-01-01, ms; -1 where no date is known yet."""
    counted: npt.NDArray[np.bool_]
    """The epoch's position sentence (the kind this stream leads with: GGA, else GNS, RMC, GLL) came, with a time.
    Shares, completeness and scatter are over counted epochs; the others are instants known from other sentences."""
    received_s: Floats
    """Host arrival of the epoch's first sentence, s since 1970 UTC."""
    completed_s: Floats
    """Host arrival of the epoch's last sentence."""
    position_received_s: Floats
    """Host arrival of the epoch's position sentence (for the delay between UTC of fix and arrival)."""
    size: Ints
    """Bytes of the epoch's sentences on the line."""
    kinds: Ints
    """Bit per formatter present, ``1 << KINDS.index(formatter)``."""
    quality: npt.NDArray[np.int8]
    """GGA quality indicator 0 to 8, from the mode letters where there is no GGA; -1 not stated."""
    latitude_deg: Floats
    longitude_deg: Floats
    altitude_m: Floats
    """Above the geoid."""
    separation_m: Floats
    """Geoid separation."""
    satellites_used: npt.NDArray[np.int16]
    """As the position sentence states it; some receivers stop at 12."""
    pdop: Floats
    hdop: Floats
    vdop: Floats
    correction_age_s: Floats
    station: npt.NDArray[np.int32]
    """Reference station id."""
    speed_mps: Floats
    course_deg: Floats
    heading_deg: Floats
    sigma_east_m: Floats
    """The receiver's own 1-sigma from GST (longitude, latitude, height)."""
    sigma_north_m: Floats
    sigma_up_m: Floats
    signals: SignalRows
    used: UsedRows

    def __len__(self) -> int:
        return len(self.axis_ms)

    def part(self, start: int, stop: int) -> EpochBatch:
        """Return the epochs from row ``start`` up to, without, ``stop``, with their satellites; nothing is copied
        but the satellites' epoch numbers."""
        values = {f.name: getattr(self, f.name)[start:stop] for f in fields(self) if f.name not in ("signals", "used")}
        return EpochBatch(**values, signals=_part(self.signals, start, stop), used=_part(self.used, start, stop))

    @property
    def minute(self) -> Ints:
        """Key of the tile that each epoch belongs to: ``axis_ms // 60 000``."""
        return self.axis_ms // 60_000

    @property
    def height_m(self) -> Floats:
        """Ellipsoidal height: altitude + geoid separation (an empty separation counts as 0), NaN without altitude."""
        return self.altitude_m + np.nan_to_num(self.separation_m)

    @property
    def fixed_position(self) -> npt.NDArray[np.bool_]:
        """Counted epochs with a position and a quality above 0."""
        return self.counted & (self.quality > 0) & np.isfinite(self.latitude_deg) & np.isfinite(self.longitude_deg)


_Rows = TypeVar("_Rows", SignalRows, UsedRows)


def _part(rows: _Rows, start: int, stop: int) -> _Rows:
    chosen = slice(*np.searchsorted(rows.epoch, (start, stop)))
    values = {f.name: getattr(rows, f.name)[chosen] for f in fields(rows)}
    values["epoch"] = values["epoch"] - np.int32(start)
    return type(rows)(**values)


KINDS = ("GGA", "GNS", "RMC", "GLL", "GSA", "GSV", "GST", "VTG", "ZDA", "GBS", "GRS", "HDT", "THS", "DTM", "TXT")
"""Order of the bits in ``EpochBatch.kinds``."""
