"""From times of day and now and then a date to a time axis and UTC.

A date is known where RMC or ZDA of the same epoch states one; it is carried on from there and rolled at midnight.
The axis is what statistics run on: it starts at the first epoch's UTC, or at its time of day where no date is known,
and never jumps because a date becomes known or is corrected.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.utc import DAY_MS

Ints = npt.NDArray[np.int64]

LEAP_SECOND_MS = 1000

BACK_MS = 12 * 3_600_000
"""A time of day that falls by more than this has passed midnight; a smaller step back is the receiver's."""

FORTH_MS = 23 * 3_600_000
"""A time of day that rises by more than this has gone back over midnight: a late sentence or a clock set back."""

LONGEST_PAUSE_DAYS = 366
"""A date further from the last one is a receiver's wrong date put right or gone wrong (a week number off by 1024 is
7168 days), not a pause of the stream: the axis goes on by the time of day."""

EARLIEST_YEAR, LATEST_YEAR = 1980, 2079
"""What two-digit years mean: 80-99 are 1980-1999, 00-79 are 2000-2079. GPS time begins in 1980."""


def days_since_1970(
    year: npt.NDArray[np.float64], month: npt.NDArray[np.float64], day: npt.NDArray[np.float64]
) -> Ints:
    """Return days since 1970-01-01 of calendar dates, -1 where there is no such day or it is before 1980 or after 2079.

    Arguments (n,); NaN where empty.
    """
    given = np.isfinite(year) & np.isfinite(month) & np.isfinite(day)
    given &= (year >= EARLIEST_YEAR) & (year <= LATEST_YEAR) & (month >= 1) & (month <= 12) & (day >= 1)
    months = (np.where(given, year, EARLIEST_YEAR).astype(np.int64) - 1970) * 12
    months += np.where(given, month, 1).astype(np.int64) - 1
    first = months.astype("datetime64[M]").astype("datetime64[D]").astype(np.int64)
    next_first = (months + 1).astype("datetime64[M]").astype("datetime64[D]").astype(np.int64)
    days = first + np.where(given, day, 1).astype(np.int64) - 1
    return np.where(given & (days < next_first), days, -1)


EARLIEST_DAY = int(np.datetime64("1980-01-01", "D").astype(np.int64))
LATEST_DAY = int(np.datetime64("2079-12-31", "D").astype(np.int64))


def day_of_epoch(stated_day: Ints, stated_ms: Ints, epoch_ms: Ints) -> Ints:
    """Return the day of the epoch's own time, given a sentence's day and time of day: they may lie across midnight."""
    return stated_day + (stated_ms - epoch_ms > BACK_MS) - (epoch_ms - stated_ms > BACK_MS)


@dataclass(frozen=True, slots=True)
class Placed:
    """Where epochs lie in time; arrays of shape (n,)."""

    time_ms: Ints
    """Time of day, 86 400 000 and more in a leap second; that of the epoch before where an epoch has none, -1 before
    any is known."""
    axis_ms: Ints
    day: Ints
    """Since 1970; -1 not known."""

    @property
    def utc_ms(self) -> Ints:
        """UTC since 1970, ms; -1 not known."""
        return np.where(self.day >= 0, self.day * DAY_MS + self.time_ms, -1)

    def before(self, count: int) -> Placed:
        """Return what the epochs behind the first ``count`` have to go on from: the last of those, as arrays (1,)."""
        last = slice(count - 1, count)
        return Placed(self.time_ms[last], self.axis_ms[last], self.day[last])


_NOTHING = np.empty(0, dtype=np.int64)
NOWHERE = Placed(_NOTHING, _NOTHING, _NOTHING)
"""What the first epoch of a stream has to go on from."""


def place(before: Placed, time_ms: Ints, stated_day: Ints) -> Placed:
    """Place epochs on the axis and in UTC.

    ``before`` is the last epoch placed earlier in the stream; ``time_ms`` (n,) is each epoch's time of day, -1 for one
    without: it shares the place of the one before, and stands at 0 if there is none. ``stated_day`` (n,) is the day
    since 1970 that the epoch's own sentences tell, -1 for none. The result does not depend on how a stream's epochs are
    divided into calls.
    """
    timed = np.flatnonzero(time_ms >= 0)
    known = before if len(before.time_ms) and before.time_ms[0] >= 0 else NOWHERE
    placed = _place_timed(known, time_ms[timed], stated_day[timed])
    if len(timed) == len(time_ms):
        return placed
    latest = np.cumsum(time_ms >= 0)  # 0: no time yet, so what was known before
    return Placed(
        np.concatenate((known.time_ms if len(known.time_ms) else [-1], placed.time_ms))[latest],
        np.concatenate((known.axis_ms if len(known.time_ms) else [0], placed.axis_ms))[latest],
        np.concatenate((known.day if len(known.time_ms) else [-1], placed.day))[latest],
    )


def _place_timed(known: Placed, time_ms: Ints, stated_day: Ints) -> Placed:
    if not len(time_ms):
        return NOWHERE
    started = len(known.time_ms) > 0
    earlier_ms = np.concatenate((known.time_ms if started else time_ms[:1], time_ms[:-1]))
    change_ms = time_ms - earlier_ms
    roll = (change_ms < -BACK_MS).astype(np.int64) - (change_ms > FORTH_MS)
    leap = ((roll > 0) & (earlier_ms >= DAY_MS)).astype(np.int64) - ((roll < 0) & (time_ms >= DAY_MS))
    day = _carried(int(known.day[0]) if started else -1, stated_day, roll)
    earlier_day = np.concatenate((known.day if started else day[:1], day[:-1]))
    pause = np.where((day >= 0) & (earlier_day >= 0), day - earlier_day - roll, 0)
    pause[np.abs(pause) > LONGEST_PAUSE_DAYS] = 0
    step_ms = change_ms + (roll + pause) * DAY_MS + leap * LEAP_SECOND_MS
    if started:
        start_ms = int(known.axis_ms[0])
    else:
        start_ms = int(time_ms[0] + max(day[0], 0) * DAY_MS)
        step_ms[0] = 0
    return Placed(time_ms, start_ms + np.cumsum(step_ms), day)


def _carried(known_day: int, stated_day: Ints, roll: Ints) -> Ints:
    """Return every epoch's day: what it states, else the last stated one moved on by the midnights since."""
    midnights = np.cumsum(roll)
    source = np.maximum.accumulate(np.where(stated_day >= 0, np.arange(len(roll)), -1))
    since_known = known_day + midnights if known_day >= 0 else np.full(len(roll), -1)
    since_stated = stated_day[source] + midnights - midnights[source]
    return np.where(source >= 0, since_stated, since_known)
