"""Sentences taken apart for people: always something, never a control character."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.nmea.inspection import inspect
from gnssmon.nmea.sentences import SENTENCES


@settings(max_examples=200)
@given(st.binary(max_size=300))
def test_anything_can_be_shown(line):
    """No bytes raise, and no control character, escape sequence or line break comes out."""
    shown = inspect(line)
    texts = [shown.address, shown.meaning, *(t for f in shown.fields for t in (f.name, f.text, f.unit))]

    assert all(c.isprintable() for text in texts for c in text)


def test_fields_have_names_and_units():
    """A GGA's altitude is named, with its unit, and its place in the sentence is kept."""
    shown = inspect(b"GPGGA,092725.00,4717.11399,N,00833.91590,E,1,08,1.01,499.6,M,48.0,M,,")
    by_name = {field.name: (field.text, field.unit) for field in shown.fields}

    assert by_name["altitude"] == ("499.6", "m")
    assert by_name["latitude"] == ("4717.11399", "")
    assert len(shown.fields) == 14


def test_every_known_sentence_has_a_meaning():
    """Each formatter of the table is said in words."""
    assert all(inspect(f"GP{formatter},".encode()).meaning for formatter in SENTENCES)


def test_rare_sentences_are_named_by_pynmea2():
    """A waypoint sentence (BOD) that our table does not know has pynmea2's names."""
    assert inspect(b"GPBOD,097.0,T,103.2,M,POINTB,POINTA").fields[0].name == "Bearing True"


def test_makers_own_sentences_are_named_by_pynmea2():
    """What follows the maker's three letters in the address is no field."""
    shown = inspect(
        b"PUBX,00,081350.00,4717.113210,N,00833.915187,E,546.589,G3,2.1,2.0,0.007,77.52,0.007,,0.92,1.19,0.77,9"
    )

    assert (shown.address, shown.fields[0].text, shown.fields[1].name) == ("PUBX", "00", "Timestamp (UTC)")
    assert [f.name for f in inspect(b"PGRME,15.0,M").fields] == [
        "Estimated Horiz. Position Error",
        "Estimated Horiz. Position Error Unit (M)",
    ]
    assert [f.name for f in inspect(b"PGGGA,1").fields] == ["field 1"]


def test_a_whole_line_may_be_given():
    """Start character, checksum and line end are no part of the fields."""
    assert inspect(b"$HEHDT,119.9,T*2F\r\n") == inspect(b"HEHDT,119.9,T")


def test_escaped_characters_of_a_text():
    """`^2C` is a comma inside a text (NMEA 0183 v4.00), read after the fields were split; a control stays harmless."""
    fields = inspect(b"GPTXT,01,01,02,ANT^2COK ^1B[2J").fields

    assert [f.text for f in fields] == ["01", "01", "02", "ANT,OK \\x1b[2J"]


@pytest.mark.parametrize(
    ("line", "places", "last"),
    [
        (b"GPGSA,A,3,,,,,,,,,,,,,1.5,0.9,1", 12, "VDOP"),
        (b"GNGSA,A,3,,,,,,,,,,,,,1.5,0.9,1.2,4", 12, "system id"),
        (b"GNGSA,A,3,01,02,03,04,,,,,,,1.5,0.9,1.2,4", 10, "system id"),
        (b"GNGSA,A,3,,,,,,,,,,,,,,1.5,0.9,1.2,4", 13, "system id"),
        (b"GNGSA,A,3,,,,,,,,,,,,,1.5,0.9,1.2,4,1", 12, "signal id"),
    ],
)
def test_fields_behind_the_satellites_used(line, places, last):
    """However many places a GSA has for satellites, its DOPs and identifiers are named as such."""
    names = [field.name for field in inspect(line).fields]

    assert sum(name.startswith("satellite") for name in names) == places
    assert names[-1] == last
