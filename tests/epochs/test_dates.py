"""The time axis, against the calendar of Python's datetime and published leap seconds and week rollovers."""

from __future__ import annotations

from datetime import UTC, date, datetime

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gnssmon.epochs.dates import NOWHERE, Placed, days_since_1970, place
from gnssmon.utc import DAY_MS

HOUR_MS = 3_600_000


def days(year: int, month: int, day: int) -> int:
    return int(days_since_1970(*(np.array([float(value)]) for value in (year, month, day)))[0])


def placed(times: list[int], stated: dict[int, int] | None = None) -> Placed:
    day = np.full(len(times), -1, dtype=np.int64)
    for row, value in (stated or {}).items():
        day[row] = value
    return place(NOWHERE, np.array(times, dtype=np.int64), day)


def utc_ms(*moment: int) -> int:
    return int(datetime(*moment, tzinfo=UTC).timestamp() * 1000)  # type: ignore[misc]


@given(st.dates(date(1980, 1, 1), date(2079, 12, 31)))
def test_days_agree_with_datetime(day: date) -> None:
    """Calendar dates from 1980 to 2079 count as datetime counts them."""
    assert days(day.year, day.month, day.day) == (day - date(1970, 1, 1)).days


@given(st.integers(-5, 12000), st.integers(-1, 14), st.integers(-1, 40))
def test_days_that_are_no_dates(year: int, month: int, day: int) -> None:
    """What datetime refuses, and what lies outside the years that two digits can mean, is unknown."""
    try:
        expected = (date(year, month, day) - date(1970, 1, 1)).days if 1980 <= year <= 2079 else -1
    except ValueError:
        expected = -1
    assert days(year, month, day) == expected


def test_empty_date_is_unknown() -> None:
    """A date with an empty field is no date."""
    full, empty = np.array([2024.0]), np.array([np.nan])
    assert days_since_1970(full, full, empty).tolist() == [-1]


def test_midnight_without_date() -> None:
    """Without a date the axis starts at the time of day and goes on through midnight."""
    result = placed([DAY_MS - 2000, DAY_MS - 1000, 0, 1000])
    assert result.axis_ms.tolist() == [DAY_MS - 2000, DAY_MS - 1000, DAY_MS, DAY_MS + 1000]
    assert result.utc_ms.tolist() == [-1] * 4


def test_midnight_rolls_a_carried_date() -> None:
    """A date stated once is carried on and moves at midnight: 2024-02-28 23:59:59 is followed by the 29th."""
    result = placed([DAY_MS - 1000, 0, 1000], {0: days(2024, 2, 28)})
    start = utc_ms(2024, 2, 28, 23, 59, 59)
    assert result.utc_ms.tolist() == [start, start + 1000, start + 2000]
    assert result.axis_ms.tolist() == result.utc_ms.tolist()


@pytest.mark.parametrize(
    "eve", [(1998, 12, 31), (2005, 12, 31), (2008, 12, 31), (2012, 6, 30), (2015, 6, 30), (2016, 12, 31)]
)
def test_leap_second(eve: tuple[int, int, int]) -> None:
    """The day before a leap second (IERS Bulletin C) has 86 401 s: the axis counts them, UTC repeats one number."""
    result = placed([86_399_000, 86_400_000, 0, 1000], {0: days(*eve)})
    assert np.diff(result.axis_ms).tolist() == [1000, 1000, 1000]
    midnight = utc_ms(*eve) + DAY_MS
    assert result.utc_ms.tolist() == [midnight - 1000, midnight, midnight, midnight + 1000]


def test_leap_second_at_ten_hertz() -> None:
    """23:59:60.0 to 23:59:60.9 lie between 23:59:59.9 and 00:00:00.0."""
    times = [*range(86_399_500, 86_401_000, 100), 0, 100]
    assert set(np.diff(placed(times).axis_ms).tolist()) == {100}


def test_date_that_comes_late_does_not_move_the_axis() -> None:
    """The axis stays on the time of day where it began there; UTC is known from the date on."""
    result = placed([1000, 2000, 3000, 4000], {2: days(2025, 5, 20)})
    assert result.axis_ms.tolist() == [1000, 2000, 3000, 4000]
    midnight = utc_ms(2025, 5, 20)
    assert result.utc_ms.tolist() == [-1, -1, midnight + 3000, midnight + 4000]


@pytest.mark.parametrize("weeks", [1024, -1024, 2048])
def test_week_rollover_does_not_move_the_axis(weeks: int) -> None:
    """A date wrong by 1024 GPS weeks (2005-05-22 for 2025-01-05, 7168 days) shows in UTC alone."""
    day = days(2025, 1, 5)
    assert day - days(2005, 5, 22) == 1024 * 7
    result = placed([1000, 2000, 3000], {0: day, 1: day - 7 * weeks, 2: day - 7 * weeks})
    assert np.diff(result.axis_ms).tolist() == [1000, 1000]
    assert np.diff(result.utc_ms).tolist() == [1000 - weeks * 7 * DAY_MS, 1000]


def test_pause_over_days() -> None:
    """Dates tell a pause of two days and an hour; without them only the time of day is left of it."""
    day = days(2025, 5, 20)
    result = placed([HOUR_MS, 2 * HOUR_MS], {0: day, 1: day + 2})
    assert np.diff(result.axis_ms).tolist() == [2 * DAY_MS + HOUR_MS]
    assert np.diff(placed([HOUR_MS, 2 * HOUR_MS]).axis_ms).tolist() == [HOUR_MS]


def test_clock_set_back_and_forth() -> None:
    """Steps of the receiver's clock below half a day are steps of the axis."""
    result = placed([10 * HOUR_MS, 7 * HOUR_MS, 7 * HOUR_MS + 1000, 11 * HOUR_MS])
    assert np.diff(result.axis_ms).tolist() == [-3 * HOUR_MS, 1000, 4 * HOUR_MS - 1000]


def test_back_over_midnight_is_not_a_day_forth() -> None:
    """A late 23:59:59.8 behind 00:00:00.1 steps back by 0.3 s, and the date with it."""
    result = placed([DAY_MS - 100, 100, DAY_MS - 200, 200], {0: days(2025, 1, 1)})
    assert np.diff(result.axis_ms).tolist() == [200, -300, 400]
    assert np.diff(result.utc_ms).tolist() == [200, -300, 400]


def test_epochs_without_time_share_the_place_before_them() -> None:
    """Without a time an epoch stands where the last one stood; before any time, at 0 without a date."""
    result = placed([-1, 5000, -1, 6000], {1: days(2025, 1, 1)})
    start = utc_ms(2025, 1, 1) + 5000
    assert result.axis_ms.tolist() == [0, start, start, start + 1000]
    assert result.utc_ms.tolist() == [-1, start, start, start + 1000]


@given(
    st.lists(
        st.tuples(
            st.one_of(st.just(-1), st.integers(0, DAY_MS + 999), st.sampled_from([0, DAY_MS - 1, DAY_MS, 43_200_000])),
            st.one_of(st.just(-1), st.just(20_000), st.integers(19_990, 20_010), st.integers(3652, 40_000)),
        ),
        max_size=12,
    ),
    st.data(),
)
def test_any_division_gives_the_same_places(epochs: list[tuple[int, int]], data: st.DataObject) -> None:
    """Placing epochs in several calls gives what one call gives."""
    time, day = (np.array([e[i] for e in epochs], dtype=np.int64) for i in (0, 1))
    whole = place(NOWHERE, time, day)
    before, parts, start = NOWHERE, [], 0
    while start < len(epochs):
        stop = data.draw(st.integers(start + 1, len(epochs)))
        part = place(before, time[start:stop], day[start:stop])
        parts.append(part)
        before, start = part.before(stop - start), stop
    for name in ("time_ms", "axis_ms", "day", "utc_ms"):
        pieces = [getattr(part, name) for part in parts]
        assert getattr(whole, name).tolist() == (np.concatenate(pieces).tolist() if pieces else [])
