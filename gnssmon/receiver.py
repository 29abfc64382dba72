"""The state store: the latest of everything a receiver has said, with a bounded history of its sentences."""

from __future__ import annotations

from dataclasses import dataclass, field


@dataclass(frozen=True, slots=True)
class SatelliteNow:
    """One satellite as last listed."""

    satellite: str
    """``G07``; ``?58`` where the system is not known."""
    elevation_deg: float | None
    azimuth_deg: float | None
    used: bool
    cn0_dbhz: dict[str, float] = field(default_factory=dict)
    """By signal label (``G1``); a signal listed without a level is not in it."""


@dataclass(frozen=True, slots=True)
class LineNow:
    """One sentence of the bounded history, for the inspector."""

    sequence: int
    raw: bytes
    """Address to last field, without start character and checksum; untrusted: show through ``printable``."""


@dataclass(frozen=True, slots=True, kw_only=True)
class ReceiverState:
    """Frozen view of the latest values; None: never stated, or empty when last stated."""

    axis_ms: int | None = None
    utc_ms: int | None = None
    dated: bool = False
    received_s: float | None = None
    """Host arrival of the last byte."""
    quality: int | None = None
    latitude_deg: float | None = None
    longitude_deg: float | None = None
    altitude_m: float | None = None
    separation_m: float | None = None
    satellites_used: int | None = None
    pdop: float | None = None
    hdop: float | None = None
    vdop: float | None = None
    correction_age_s: float | None = None
    station: int | None = None
    speed_mps: float | None = None
    course_deg: float | None = None
    heading_deg: float | None = None
    last_fix_axis_ms: int | None = None
    """Time of the latest epoch with a fix."""
    satellites: tuple[SatelliteNow, ...] = ()
    """By system, then number."""
    lines: tuple[LineNow, ...] = ()
    """The latest sentences, oldest first, at most 200."""
    texts: tuple[str, ...] = ()
    """The latest TXT messages, made printable, at most 20."""
    datum: str | None = None
    """From DTM."""
