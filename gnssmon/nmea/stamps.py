"""Host times in the text around sentences: how they are written, one by one and many of one make-up at once.

Strategy. A logger writes all its stamps alike: the same characters in the same places, only the digits differ. So one
text is read with patterns, and where that one's time was found, the times of all texts of the same make-up are read
down the columns, to the same bits.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from datetime import UTC, datetime
from functools import lru_cache

import numpy as np
import numpy.typing as npt

Bytes = npt.NDArray[np.uint8]
Floats = npt.NDArray[np.float64]

MILLISECONDS = 1e11
"""Unix times above this are milliseconds: as seconds they would lie beyond the year 5000."""

EXACT_DIGITS = 15
"""So many are exact in double precision."""

_UNIX_DIGITS = rb"(\d{9,10}(?:\.\d{1,9})?|\d{13}(?:\.\d{1,6})?)"
_ISO_BEFORE = re.compile(rb"\[?(\d{4}-\d\d-\d\d[T ]\d\d:\d\d):(\d\d(?:[.,]\d{1,9})?)(Z|[+-]\d\d:?\d\d)?\]?[\s,;:|>]*\Z")
_UNIX_BEFORE = re.compile(rb"(?<!\d)" + _UNIX_DIGITS + rb"[\s,;:|>]*\Z")
_UNIX_BEHIND = re.compile(rb"\A[ \t,;|]*" + _UNIX_DIGITS + rb"[ \t]*(?=[\r\n])")

_TEN = np.array([10.0**i for i in range(EXACT_DIGITS + 1)])
_ZERO, _NINE = ord("0"), ord("9")


@dataclass(frozen=True, slots=True)
class Stamp:
    """A host's time in a text, and where it stands there."""

    time_s: float
    """Seconds since 1970-01-01 UTC."""
    span: tuple[int, int]
    """Of the whole stamp, with the punctuation that goes with it."""
    number: tuple[int, int]
    """Of the Unix time, or of the seconds within the minute."""
    minute: tuple[int, int] | None = None
    """Of date, hour and minute; None of a Unix time."""
    zone: tuple[int, int] | None = None
    """Of the offset from UTC; without one the time is UTC."""


def stamp_before(text: bytes) -> Stamp | None:
    """The host's time at the end of ``text``, if any."""
    if match := _ISO_BEFORE.search(text):
        minute_s, second_s = _minute_s(match[1], match[3] or b"Z"), float(match[2].replace(b",", b"."))
        if minute_s is None or second_s >= 61.0:
            return None
        zone = match.span(3) if match[3] else None
        return Stamp(minute_s + second_s, match.span(), match.span(2), match.span(1), zone)
    match = _UNIX_BEFORE.search(text)
    return Stamp(unix_s(match[1]), match.span(), match.span(1)) if match else None


def stamp_behind(text: bytes) -> Stamp | None:
    """The Unix time at the beginning of ``text``, if nothing but it stands before the line end."""
    match = _UNIX_BEHIND.match(text)
    return Stamp(unix_s(match[1]), match.span(), match.span(1)) if match else None


def unix_s(digits: bytes) -> float:
    """A Unix time, s or ms by its size, in s."""
    value = float(digits)
    return value / 1000.0 if value > MILLISECONDS else value


@lru_cache(maxsize=4096)
def _minute_s(minute: bytes, zone: bytes) -> float | None:
    text = minute.decode("ascii") + zone.decode("ascii").replace("Z", "+00:00")
    try:
        return datetime.fromisoformat(text).astimezone(UTC).timestamp()
    except (ValueError, OverflowError):
        return None


def alike(texts: Bytes, template: bytes) -> npt.NDArray[np.bool_]:
    """Which rows of ``texts``, of shape (n, w), are made up as the template of w bytes: digits for digits, all other
    characters the same."""
    same: npt.NDArray[np.bool_] = (_make_up(texts) == _make_up(np.frombuffer(template, dtype=np.uint8))).all(axis=1)
    return same


def times_of(texts: Bytes, stamp: Stamp) -> Floats:
    """The times in texts that are ``alike`` the one ``stamp`` was found in; NaN where one must be read by itself."""
    digits = texts[:, slice(*stamp.number)]
    points = np.flatnonzero((digits[0] < _ZERO) | (digits[0] > _NINE))
    decimals = digits.shape[1] - 1 - int(points[0]) if len(points) else 0
    digits = np.delete(digits, points, axis=1)
    if digits.shape[1] > EXACT_DIGITS:
        return np.full(len(texts), np.nan)
    number = (digits - np.uint8(_ZERO)) @ _TEN[digits.shape[1] - 1 :: -1] / _TEN[decimals]
    if stamp.minute is None:
        unix: Floats = np.where(number > MILLISECONDS, number / 1000.0, number)
        return unix
    minutes, which = np.unique(_column(texts, stamp.minute), return_inverse=True)
    zones = _column(texts, stamp.zone) if stamp.zone else np.array([b"Z"])
    if (zones != zones[0]).any():
        return np.full(len(texts), np.nan)
    read = [_minute_s(minute, bytes(zones[0])) for minute in minutes.tolist()]
    minute_s = np.array([np.nan if value is None else value for value in read])[which]
    return np.where(number < 61.0, minute_s + number, np.nan)


def _make_up(text: Bytes) -> Bytes:
    return np.where((text >= _ZERO) & (text <= _NINE), np.uint8(_ZERO), text)


def _column(texts: Bytes, span: tuple[int, int]) -> npt.NDArray[np.bytes_]:
    part = np.ascontiguousarray(texts[:, slice(*span)])
    return part.view(f"S{part.shape[1]}")[:, 0]
