"""The short text for a terminal, and the words that it shares with the page."""

from __future__ import annotations

import pytest

from gnssmon.diagnosis.finding import Finding
from gnssmon.report import result as results
from gnssmon.report import text, words
from gnssmon.snapshot import SourceFacts
from tests.report.hand_made import HOSTILE, empty_pictures, snapshot


@pytest.mark.parametrize("criteria", ["default", "autonomous", "differential", "rtk-rover", "reference-station"])
def test_no_line_is_wider_than_a_terminal(criteria):
    """80 columns hold every preset, and the verdict stands in the first line."""
    shown = text.lines(results.result(snapshot(criteria)))

    assert max(map(len, shown)) <= 80
    assert shown[0].startswith(("ACCEPTED", "REJECTED", "NOT ENOUGH DATA YET"))
    assert "Not a navigation or safety-of-life device." in shown[-1]


def test_nothing_of_the_stream_reaches_the_terminal_as_a_control():
    """A hostile label and finding come out as printable text."""
    hostile = snapshot(
        source=SourceFacts(label=HOSTILE, kind="log"),
        findings=(Finding(code="a", severity="info", summary=HOSTILE * 20),),
    )

    shown = text.lines(results.result(hostile))

    assert all(line.isprintable() for line in shown)
    assert max(map(len, shown)) <= 80


def test_default_set_is_said_to_be_the_default():
    """Who named no criteria is told what was judged."""
    assert "default set: none was named" in " ".join(text.lines(results.result(snapshot("default"))))


def test_undecided_says_why_and_how_long():
    """An undecided run tells what is missing; a stream without anything is undecided, not accepted."""
    shown = " ".join(text.lines(results.result(snapshot("default", estimates={}, pictures=empty_pictures()))))

    assert shown.startswith("NOT ENOUGH DATA YET")
    assert "could not be computed from what the stream holds" in shown


@pytest.mark.parametrize(
    ("value", "unit", "expected"),
    [
        (0.99, "share", "99.00 %"),
        (0.00001, "share", "< 0.01 %"),
        (0.99999, "share", "> 99.99 %"),
        (1.0, "share", "100.00 %"),
        (2.3456, "m", "2.346 m"),
        (-0.0001, "m", "0.000 m"),
        (14.0, "count", "14"),
        (19.25, "count", "19.2"),
        (300.0, "s", "300 s"),
        (12.5, "deg", "12.5°"),
        (None, "m", "–"),
    ],
)
def test_numbers_have_the_digits_their_unit_deserves(value, unit, expected):
    """A share that is nearly nothing or nearly all is not rounded to it; nothing is printed as minus zero."""
    assert words.with_unit(value, unit) == expected


def test_limits_are_printed_as_they_were_written():
    """A limit is never rounded: 99.975 % stays so."""
    at_least = {"comparison": "at_least", "limit": 0.99975, "within": None, "unit": "share"}
    equals = {"comparison": "equals", "limit": 0.0, "within": 0.1, "unit": "m"}

    assert words.limit(at_least) == "≥ 99.975 %"
    assert words.limit(equals) == "0 ± 0.1 m"


def test_spans_of_time():
    """The date is printed once where it is the same; a stream without date shows times of day."""
    assert words.span("2025-05-20T05:30:00.000Z", "2025-05-20T06:00:00.000Z") == "2025-05-20 05:30:00 to 06:00:00 UTC"
    assert words.span("T05:30:00.000Z", "T06:00:00.000Z") == "05:30:00 to 06:00:00 UTC"
    assert words.span(None, None) == "time unknown"
