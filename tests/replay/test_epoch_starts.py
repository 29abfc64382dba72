"""Where epochs start: any cut of the stream gives the same, times are continuous, noise starts nothing."""

from __future__ import annotations

from functools import reduce
from operator import xor
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.replay.epoch_starts import LONGEST_LINE, EpochStart, EpochStarts
from gnssmon.utc import DAY_MS
from tests.sources.sentences import burst, stream

REAL_LOGS = Path(__file__).parents[3] / "shared" / "logs"


def sentence(body: str) -> bytes:
    """Body with start character, checksum and line end (NMEA 0183, 5.2.3: XOR of all between $ and *)."""
    return b"$%b*%02X\r\n" % (body.encode(), reduce(xor, body.encode()))


def starts(data: bytes, cuts: list[int] | None = None) -> tuple[list[EpochStart], int | None]:
    finder = EpochStarts()
    found = []
    at = 0
    for cut in sorted({*(cuts or []), len(data)}):
        found += finder.feed(data[at:cut])
        assert finder.certain <= cut
        assert cut - finder.certain <= LONGEST_LINE
        at = cut
    return found + finder.finish(), finder.utc_offset_ms


def test_each_burst_starts_an_epoch() -> None:
    """The first sentence with a new time opens; others of that time, and sentences without one, do not."""
    data = stream(5)

    found, offset_ms = starts(data)

    begins = [len(stream(second)) for second in range(5)]
    assert [s.offset for s in found] == begins
    assert [s.axis_ms for s in found] == [36_000_000 + 1000 * second for second in range(5)]
    # 2031-05-04 is day 22 403 since 1970 (date.toordinal of the standard library).
    assert offset_ms == 22_403 * DAY_MS


@settings(max_examples=60, deadline=None)
@given(st.lists(st.integers(0, len(stream(4))), max_size=12), st.binary(max_size=40))
def test_no_cut_changes_the_answer(cuts: list[int], noise: bytes) -> None:
    """However the stream is cut, and whatever stands before it, the same starts are found."""
    data = noise + b"\r\n" + stream(4)

    assert starts(data, cuts) == starts(data)


@pytest.mark.parametrize("ending", [b"\r\n", b"\n", b"\r"])
def test_line_ends_of_all_kinds(ending: bytes) -> None:
    """CR LF, LF and CR alone end a line; the last line may have none."""
    data = stream(3).replace(b"\r\n", ending).removesuffix(ending)

    assert [s.axis_ms for s in starts(data)[0]] == [36_000_000, 36_001_000, 36_002_000]


def test_prefixes_belong_to_the_line() -> None:
    """A TAG block or a host's stamp before a sentence is cut together with it."""
    lines = burst(0).splitlines(keepends=True)
    data = b"noise\r\n" + b"\\c:1999999999*5A\\" + lines[0] + b"2031-05-04 10:00:01 " + burst(1)

    found, _ = starts(data)

    assert [data[s.offset :][:3] for s in found] == [b"\\c:", b"203"]


def test_midnight_with_and_without_a_date() -> None:
    """Time runs on through midnight, also where no sentence ever tells a date."""
    undated = sentence("GPGGA,235959.00,,,,,0,,,,,,,,") + sentence("GPGGA,000000.00,,,,,0,,,,,,,,")
    dated = (
        sentence("GPRMC,235959.00,V,,,,,,,280228,,,N")
        + sentence("GPRMC,000000.00,V,,,,,,,290228,,,N")
        + sentence("GPZDA,000001.00,29,02,2028,00,00")
    )

    assert [s.axis_ms for s in starts(undated)[0]] == [DAY_MS - 1000, DAY_MS]
    assert [s.axis_ms for s in starts(dated)[0]] == [DAY_MS - 1000, DAY_MS, DAY_MS + 1000]


def test_a_gap_of_days_is_seen_by_the_date() -> None:
    """A log that stops for three days runs on three days later."""
    data = sentence("GPRMC,120000.00,V,,,,,,,010228,,,N") + sentence("GPRMC,110000.00,V,,,,,,,040228,,,N")

    first, second = starts(data)[0]

    assert second.axis_ms - first.axis_ms == 3 * DAY_MS - 3_600_000


@pytest.mark.parametrize(
    "line",
    [
        b"$GPGGA,100000.00,,,,,0,,,,,,,,*00\r\n",
        sentence("GPGGA,250000.00,,,,,0,,,,,,,,"),
        sentence("GPGGA,106000.00,,,,,0,,,,,,,,"),
        sentence("GPGGA,,,,,,0,,,,,,,,"),
        sentence("GPGSV,1,1,01,07,40,123,45"),
        sentence("GPTXT,01,01,02,$GPGGA 100000"),
        b"$GPGGA,100000.00" + bytes(range(128, 200)) + b"*00\r\n",
    ],
)
def test_what_tells_no_time_starts_nothing(line: bytes) -> None:
    """Wrong checksums, impossible times, empty ones, other sentences, text that looks like one."""
    assert starts(line)[0] == []


def test_sentences_of_one_epoch_may_differ_a_little() -> None:
    """A GST 10 ms behind its GGA is of the same epoch; at 50 Hz a sentence 20 ms later is of the next."""
    slow = sentence("GPGGA,100000.00,,,,,0,,,,,,,,") + sentence("GPGST,100000.01,,,,,,,")
    fast = b"".join(sentence(f"GPGGA,100000.{cs:02d},,,,,0,,,,,,,,") for cs in range(0, 20, 2))

    assert len(starts(slow)[0]) == 1
    assert len(starts(fast)[0]) == 10


def test_a_straggler_does_not_open_its_epoch_again() -> None:
    """A late sentence of the epoch before belongs there; the epoch that is open stays open."""
    data = (
        b"".join(sentence(f"GPGGA,10000{s}.00,,,,,0,,,,,,,,") for s in (0, 1))
        + sentence("GPGST,100000.00,,,,,,,")
        + sentence("GPGST,100001.00,,,,,,,")
    )

    assert len(starts(data)[0]) == 2


@pytest.mark.skipif(not REAL_LOGS.is_dir(), reason="the folder of real logs is not beside the project")
def test_real_log() -> None:
    """The snowfield log has an epoch for each of its reference epochs (REFERENCE.json: 2178)."""
    assert len(starts((REAL_LOGS / "snowfield_static_2025.nmea").read_bytes())[0]) == 2178
