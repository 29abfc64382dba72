"""Instants and durations: what a user types, what a stream's milliseconds look like in print.

Instants are milliseconds of UTC since 1970-01-01 without leap seconds (the second 23:59:60 shares its number with the
first second of the next day), or milliseconds since midnight where no date is known.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta

import numpy as np

from gnssmon.errors import ConfigurationError

DAY_MS = 86_400_000
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)

EARLY_MS = 3_600_000
"""A bare time of day up to this much before a stream's start is meant as that one, not as tomorrow's: people write
``--from 05:20`` for a log that begins at 05:20:41."""


@dataclass(frozen=True, slots=True)
class Instant:
    """A point in time as a user gave it."""

    ms: int
    """Milliseconds since 1970-01-01 UTC, or since midnight UTC where ``dated`` is False."""
    dated: bool

    def on_axis(self, start_axis_ms: int, utc_offset_ms: int | None) -> int | None:
        """Return where it lies on a stream's time axis, ms; None for a dated instant in a stream without date.

        ``start_axis_ms`` is the first instant of the stream; ``utc_offset_ms`` is what to add to the axis to get UTC.
        A time of day is its first occurrence at or after the stream's start, or up to EARLY_MS before it.
        """
        if self.dated:
            return None if utc_offset_ms is None else self.ms - utc_offset_ms
        earliest = start_axis_ms - EARLY_MS
        return earliest + (self.ms - (earliest + (utc_offset_ms or 0))) % DAY_MS


_TIME_OF_DAY = re.compile(r"([01]?\d|2[0-3]):([0-5]\d)(?::([0-5]\d)(?:\.(\d{1,3}))?)?Z?", re.IGNORECASE | re.ASCII)


def parse_instant(text: str) -> Instant:
    """Read ``2025-05-20T05:30:00Z`` (any ISO 8601 form with a date), ``05:30`` or ``05:30:00``.

    UTC is meant where no offset is given. Raises ConfigurationError for anything else.
    """
    given = text.strip()
    if match := _TIME_OF_DAY.fullmatch(given):
        hour, minute, second, fraction = match.groups()
        ms = int((fraction or "0").ljust(3, "0"))
        return Instant(((int(hour) * 60 + int(minute)) * 60 + int(second or 0)) * 1000 + ms, dated=False)
    try:
        moment = datetime.fromisoformat(given)
        if moment.tzinfo is None:
            moment = moment.replace(tzinfo=UTC)
        ms = (moment - _EPOCH) // timedelta(milliseconds=1)
    except (ValueError, OverflowError):
        raise ConfigurationError(
            f"{text!r} is not a time; write UTC as 2025-05-20T05:30:00Z, or a time of day as 05:30 or 05:30:00"
        ) from None
    return Instant(ms, dated=True)


_DURATION = re.compile(
    r"(?:(?P<d>\d+(?:\.\d+)?)d)?(?:(?P<h>\d+(?:\.\d+)?)h)?(?:(?P<m>\d+(?:\.\d+)?)m)?(?:(?P<s>\d+(?:\.\d+)?)s?)?",
    re.ASCII,
)
_SECONDS = {"d": 86_400.0, "h": 3_600.0, "m": 60.0, "s": 1.0}

LONGEST_S = 100 * 366 * 86_400.0
"""A century: a longer duration is a slip of the finger, and would overflow a clock."""


def parse_duration_s(text: str) -> float:
    """Return seconds from ``90``, ``30s``, ``10m``, ``1h30m``, ``24h``, ``2d``; raises ConfigurationError otherwise."""
    match = _DURATION.fullmatch(text.strip().lower().replace(" ", ""))
    parts = {unit: float(number) for unit, number in match.groupdict().items() if number} if match else {}
    seconds = sum(number * _SECONDS[unit] for unit, number in parts.items())
    if not parts or seconds > LONGEST_S:
        raise ConfigurationError(f"{text!r} is not a duration; write seconds as 90 or 30s, or 10m, 1h30m, 24h, 2d")
    return seconds


def iso(ms: int) -> str:
    """Return UTC milliseconds since 1970 as ``2025-05-20T05:30:00.000Z``."""
    return f"{np.datetime64(int(ms), 'ms')}Z"


def time_of_day(ms: int) -> str:
    """Return the time of day of an instant (milliseconds since any midnight UTC) as ``T05:30:00.000Z``."""
    second, thousandth = divmod(int(ms) % DAY_MS, 1000)
    return f"T{second // 3600:02d}:{second // 60 % 60:02d}:{second % 60:02d}.{thousandth:03d}Z"
