"""Instants and durations as users type them and as streams print them; the witness is Python's own datetime."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta

import pytest
from hypothesis import given
from hypothesis import strategies as st

from gnssmon import utc
from gnssmon.errors import ConfigurationError

MOMENTS = st.datetimes(datetime(1970, 1, 1), datetime(2099, 12, 31)).map(
    lambda t: t.replace(microsecond=t.microsecond // 1000 * 1000, tzinfo=UTC)
)


@given(MOMENTS)
def test_print_agrees_with_datetime(moment: datetime) -> None:
    """UTC milliseconds print as datetime prints the same moment, with three decimals and Z."""
    ms = (moment - datetime(1970, 1, 1, tzinfo=UTC)) // timedelta(milliseconds=1)
    expected = moment.isoformat(timespec="milliseconds").replace("+00:00", "Z")
    assert utc.iso(ms) == expected
    assert utc.time_of_day(ms) == expected[10:]
    assert utc.parse_instant(expected) == utc.Instant(ms, dated=True)


@pytest.mark.parametrize(
    ("text", "ms"),
    [
        ("2025-05-20T05:30:00Z", 1_747_719_000_000),  # date -u -d 2025-05-20T05:30:00Z +%s
        ("2025-05-20 05:30", 1_747_719_000_000),
        ("2025-05-20T07:30:00+02:00", 1_747_719_000_000),
        ("1999-08-22T00:00:00Z", 935_280_000_000),  # first GPS week rollover, 1024 weeks after 1980-01-06
    ],
)
def test_dated_instant(text: str, ms: int) -> None:
    """A date with a time is UTC unless an offset is written."""
    assert utc.parse_instant(text) == utc.Instant(ms, dated=True)


def test_first_week_rollover_is_1024_weeks_after_the_gps_epoch() -> None:
    """1024 weeks of 7 days lie between 1980-01-06 and 1999-08-22 (IS-GPS-200: week number modulo 1024)."""
    first = utc.parse_instant("1980-01-06T00:00:00Z").ms
    assert utc.parse_instant("1999-08-22T00:00:00Z").ms - first == 1024 * 7 * utc.DAY_MS
    assert utc.parse_instant("2019-04-07T00:00:00Z").ms - first == 2048 * 7 * utc.DAY_MS


@pytest.mark.parametrize(
    ("text", "ms"),
    [("05:30", 19_800_000), ("5:30:00", 19_800_000), ("23:59:59.999", 86_399_999), ("00:00:00Z", 0)],
)
def test_time_of_day_instant(text: str, ms: int) -> None:
    """A bare time of day has no date."""
    assert utc.parse_instant(text) == utc.Instant(ms, dated=False)


@pytest.mark.parametrize("text", ["", "noon", "24:00", "05:60", "2025-13-01T00:00", "05", "1:2:3:4", "٠٥:٣٠"])
def test_bad_instant_names_what_was_given_and_what_is_expected(text: str) -> None:
    """The message repeats the input and shows the accepted forms."""
    with pytest.raises(ConfigurationError, match="05:30:00Z") as error:
        utc.parse_instant(text)
    assert repr(text) in str(error.value)


def test_instant_on_axis() -> None:
    """A time of day is its first occurrence after the stream's start, or at most an hour before; a date needs one."""
    start = 22 * 3_600_000
    assert utc.parse_instant("23:00").on_axis(start, None) == 23 * 3_600_000
    assert utc.parse_instant("05:30").on_axis(start, None) == utc.DAY_MS + 19_800_000
    assert utc.parse_instant("21:30").on_axis(start, None) == 21 * 3_600_000 + 1_800_000
    assert utc.parse_instant("2025-05-20T05:30Z").on_axis(start, None) is None
    assert utc.parse_instant("2025-05-20T05:30Z").on_axis(start, 1_747_612_800_000) == 106_200_000
    assert utc.parse_instant("05:30").on_axis(1_747_719_000_000, 0) == 1_747_719_000_000


@pytest.mark.parametrize(
    ("text", "seconds"),
    [
        ("90", 90),
        ("30s", 30),
        ("10m", 600),
        ("1h30m", 5400),
        ("24h", 86_400),
        ("2d", 172_800),
        ("1.5h", 5400),
        ("0", 0),
    ],
)
def test_duration(text: str, seconds: float) -> None:
    """Parts add up, largest unit first; a bare number is seconds."""
    assert utc.parse_duration_s(text) == seconds


@pytest.mark.parametrize("text", ["", "h", "10x", "-5s", "30s10m", "1e9", "nan", "9999999999999999h"])
def test_bad_duration(text: str) -> None:
    """The message repeats the input and shows the accepted forms."""
    with pytest.raises(ConfigurationError, match="1h30m") as error:
        utc.parse_duration_s(text)
    assert repr(text) in str(error.value)
