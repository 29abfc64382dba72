"""Sentences taken apart for people: always something, never a control character."""

from __future__ import annotations

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
