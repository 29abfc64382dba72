"""Columns of ASCII → numbers, times, dates, angles.

Strategy. A column of fields (starts and ends in the block) becomes a matrix of characters, one row a field. A digit's
weight is ten to the number of digits to its right, so the digits' sum is the number without its point; dividing by the
power of ten of its decimals rounds once, as Python's ``float`` does (both are exact below 2**53). What is no number is
absent, never an error.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Bytes = npt.NDArray[np.uint8]
Offsets = npt.NDArray[np.int64]
Floats = npt.NDArray[np.float64]

MOST_DIGITS = 18
"""More do not fit into 63 bits; 15 are exact."""

EXACT_DIGITS = 15
"""So many are exact in double precision."""

SMALL_DIGITS = 3

LONGEST_NUMBER = 24
LONGEST_TEXT = 64
"""Characters kept of a field: texts are 61 at most by the standard."""

DAY_MS = 86_400_000

_TEN = np.array([10**i for i in range(MOST_DIGITS + 1)], dtype=np.int64)
_TEN_FLOAT = np.array([10.0**i for i in range(LONGEST_NUMBER + 1)])
_ZERO, _NINE, _POINT, _PLUS, _MINUS = (ord(c) for c in "09.+-")
_POINT_DIGIT = (_POINT - _ZERO) % 256
"""A point, read as if it were a digit."""


@dataclass(frozen=True, slots=True)
class Digits:
    """Numbers as read, before division; shapes (n,)."""

    mantissa: npt.NDArray[np.int64]
    """All digits in a row, without sign."""
    decimals: npt.NDArray[np.int64]
    """Digits behind the point."""
    whole: npt.NDArray[np.int64]
    """Digits before it."""
    negative: npt.NDArray[np.bool_]
    valid: npt.NDArray[np.bool_]
    """Digits with at most one point and a leading sign; nothing else, and not empty."""

    def floats(self) -> Floats:
        """The numbers; NaN where not valid."""
        value = self.mantissa / _TEN_FLOAT[self.decimals]
        return np.where(self.valid, np.where(self.negative, -value, value), np.nan)


def characters(buffer: Bytes, start: Offsets, end: Offsets, longest: int) -> Bytes:
    """The fields' characters, shape (n, w), w at most ``longest``; zeros behind a field's end."""
    length = end - start
    width = int(min(length.max(initial=0), longest))
    column = np.arange(width)
    at = start[:, None] + column
    inside = column < length[:, None]
    return np.where(inside, buffer[np.where(inside, at, 0)], np.uint8(0))


def digits(buffer: Bytes, start: Offsets, end: Offsets) -> Digits:
    """Read each field as a decimal number."""
    length = end - start
    width = int(length.max(initial=0))
    if not width:
        nothing = np.zeros(len(start), dtype=np.int64)
        return Digits(nothing, nothing, nothing, np.zeros(len(start), dtype=bool), np.zeros(len(start), dtype=bool))
    usual = _aligned_digits(buffer, start, end) if width <= EXACT_DIGITS else None
    return usual or _any_digits(buffer, start, end)


def _aligned_digits(buffer: Bytes, start: Offsets, end: Offsets) -> Digits | None:
    """The same for a column whose numbers have all the same number of decimals, as a receiver's have; else None.

    Right-aligned, their points stand in one row of the matrix and all digits have their weight by row.
    """
    length = end - start
    width, shortest = int(length.max()), int(length.min())
    if int(end.min()) < width:
        return None
    text = records(buffer, end - width, width)
    # Of a shorter number, what stands before it is not its own.
    head = text[0] if shortest == width else buffer[np.minimum(start, len(buffer) - 1)]
    negative = (head == _MINUS) & (length > 0)
    signed = negative | ((head == _PLUS) & (length > 0))
    filled = length > signed
    text -= np.uint8(_ZERO)
    empty = width - length + signed
    for place in range(int(empty.max())):
        text[place] *= place >= empty
    count = np.count_nonzero(text > 9, axis=1)
    places = np.flatnonzero(count)
    decimals = point = 0
    weight = _TEN_FLOAT[np.arange(width - 1, -1, -1)]
    if len(places) > 1:
        return None
    if len(places):
        place = int(places[0])
        point, decimals = 1, width - 1 - place
        if np.count_nonzero(text[place] == _POINT_DIGIT) != np.count_nonzero(filled):
            return None
        weight[:place] /= 10.0
        weight[place] = 0.0
    mantissa = (weight @ text.astype(np.float64)).astype(np.int64)
    whole = length - signed - decimals - point
    valid = filled & (whole + decimals > 0)
    return Digits(mantissa, np.full(len(start), decimals), whole, negative, valid)


def _any_digits(buffer: Bytes, start: Offsets, end: Offsets) -> Digits:
    """Read fields of any make-up."""
    text = characters(buffer, start, end, LONGEST_NUMBER)
    digit = (text >= _ZERO) & (text <= _NINE)
    point = text == _POINT
    signed = (text[:, 0] == _MINUS) | (text[:, 0] == _PLUS)
    number = digit.sum(axis=1)
    right = number[:, None] - np.cumsum(digit, axis=1)
    weight = _TEN[np.minimum(right, MOST_DIGITS)]
    mantissa = np.where(digit, (text - np.uint8(_ZERO)).astype(np.int64) * weight, 0).sum(axis=1)
    behind = digit & (np.cumsum(point, axis=1) > 0)
    decimals = behind.sum(axis=1)
    length = end - start
    valid = (number + point.sum(axis=1) + signed == length) & (point.sum(axis=1) <= 1)
    valid &= (number > 0) & (number <= MOST_DIGITS)
    return Digits(np.where(valid, mantissa, 0), decimals, number - decimals, text[:, 0] == _MINUS, valid)


def decimals(buffer: Bytes, start: Offsets, end: Offsets) -> Floats:
    """Decimal numbers, NaN where empty or no number."""
    return digits(buffer, start, end).floats()


def small_numbers(buffer: Bytes, start: Offsets, end: Offsets) -> npt.NDArray[np.float32]:
    """The same for columns that nearly always hold one to three digits: satellite numbers, angles, levels."""
    length = end - start
    shortest, longest = int(length.min(initial=1)), int(length.max(initial=0))
    value = np.zeros(len(start), dtype=np.float32)
    largest = np.zeros(len(start), dtype=np.uint8)
    for place in range(min(longest, SMALL_DIGITS)):
        digit = buffer[end - (place + 1)] - np.uint8(_ZERO)
        if place >= shortest:
            digit *= length > place
        np.maximum(largest, digit, out=largest)
        value += digit * np.float32(10**place)
    if shortest > 0 and longest <= SMALL_DIGITS and int(largest.max(initial=0)) <= 9:
        return value
    usual = (length > 0) & (length <= SMALL_DIGITS) & (largest <= 9)
    value[~usual] = np.nan
    odd = np.flatnonzero(~usual & (length > 0))
    if len(odd):
        value[odd] = decimals(buffer, start[odd], end[odd])
    return value


def records(buffer: Bytes, start: Offsets, size: int) -> Bytes:
    """The ``size`` bytes from each start on, shape (size, n); all must lie inside."""
    if not len(start):
        return np.empty((size, 0), dtype=np.uint8)
    # A view of what begins at every byte: whole items of it are copied far quicker than byte by byte.
    items = np.ndarray((len(buffer) - size + 1,), dtype=f"V{size}", buffer=buffer.data, strides=(1,))
    return np.ascontiguousarray(items[start].view(np.uint8).reshape(-1, size).T)


def times_of_day(buffer: Bytes, start: Offsets, end: Offsets) -> npt.NDArray[np.int64]:
    """``hhmmss.sss`` → ms of the day, -1 where empty or impossible. A second 60 is a leap second."""
    read = digits(buffer, start, end)
    scale = _TEN[np.minimum(read.decimals, MOST_DIGITS)]
    clock, fraction = np.divmod(read.mantissa, scale)
    hour, minute, second = clock // 10_000, clock // 100 % 100, clock % 100
    valid = read.valid & ~read.negative & (read.whole == 6) & (hour < 24) & (minute < 60) & (second <= 60)
    # Rounded half up in integers: 18 digits of mantissa leave no room for more than 9 decimals.
    valid &= read.decimals <= 9
    milliseconds = (fraction * 1000 + scale // 2) // scale
    value = (hour * 3600 + minute * 60 + second) * 1000 + milliseconds
    # Rounding must not make the day's last half millisecond a leap second.
    value = np.where((second < 60) & (value == DAY_MS), DAY_MS - 1, value)
    return np.where(valid, value, -1)


def dates(buffer: Bytes, start: Offsets, end: Offsets) -> npt.NDArray[np.int32]:
    """``ddmmyy`` → days since 1970-01-01, -1 where empty or impossible. Years 80-99 are 1980-1999 (common practice)."""
    read = digits(buffer, start, end)
    day, month, year = read.mantissa // 10_000, read.mantissa // 100 % 100, read.mantissa % 100
    year = np.where(year >= 80, 1900, 2000) + year
    valid = read.valid & ~read.negative & (read.whole == 6) & (read.decimals == 0) & (month >= 1) & (month <= 12)
    months = np.where(valid, (year - 1970) * 12 + month - 1, 0)
    first, following = ((months + i).astype("datetime64[M]").astype("datetime64[D]").astype(np.int64) for i in (0, 1))
    valid &= (day >= 1) & (day <= following - first)
    return np.where(valid, first + day - 1, -1).astype(np.int32)


def angles(
    buffer: Bytes, start: Offsets, end: Offsets, hemisphere: Bytes, *, positive: str, negative: str, most_deg: int
) -> tuple[Floats, npt.NDArray[np.float64]]:
    """``dddmm.mmmm`` with its hemisphere letter → signed degrees (NaN absent), and the number of minute decimals.

    Minutes of 60 and more, or an angle beyond ``most_deg``, are absent.
    """
    read = digits(buffer, start, end)
    scale = _TEN[np.minimum(read.decimals, MOST_DIGITS)] * np.int64(100)
    valid = read.valid & ~read.negative & (read.decimals <= 12) & (read.whole >= 3)
    degrees, minutes = np.divmod(read.mantissa, np.where(valid, scale, 1))
    minutes_float = minutes / _TEN_FLOAT[read.decimals]
    value = degrees + minutes_float / 60.0
    valid &= (minutes_float < 60.0) & (value <= most_deg)
    south = hemisphere == ord(negative)
    valid &= south | (hemisphere == ord(positive))
    places = np.where(valid, read.decimals, np.nan)
    return np.where(valid, np.where(south, -value, value), np.nan), places


def letters(buffer: Bytes, start: Offsets, end: Offsets) -> Bytes:
    """Fields of one character → its ASCII code, 0 where empty or longer."""
    return np.where(end - start == 1, buffer[np.minimum(start, len(buffer) - 1)], np.uint8(0))


def texts(buffer: Bytes, start: Offsets, end: Offsets) -> npt.NDArray[np.bytes_]:
    """Fields as fixed-width bytes."""
    text = characters(buffer, start, end, LONGEST_TEXT)
    width = max(1, text.shape[1])
    if not text.shape[1]:
        return np.zeros(len(start), dtype="S1")
    return np.ascontiguousarray(text).view(f"S{width}")[:, 0]
