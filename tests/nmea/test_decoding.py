"""Columns against pynmea2, value for value; where pynmea2 is blind, against the standard's rule."""

from __future__ import annotations

import math
from datetime import date

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.chunks import Chunk
from gnssmon.nmea.decoding import decode
from gnssmon.nmea.fields import Kind
from gnssmon.nmea.framing import Framer
from gnssmon.nmea.sentences import SENTENCES
from tests.journeys.program import REAL_LOGS
from tests.nmea.witness import NAMES, PLACES, reads_as, text_of, witness_of
from tests.strategies import bodies, line


def columns(*bodies_: str):
    """Decode bodies as one block."""
    framer = Framer()
    block = framer.feed(Chunk(b"".join(line(body) for body in bodies_)))
    assert len(block) == len(bodies_)
    return decode(block)


def compare(table, witnesses) -> None:
    """Every column of a table against pynmea2's reading of the same lines."""
    names = NAMES[table.formatter]
    kinds = {field.name: field.kind for field in SENTENCES[table.formatter]}
    for name in set(table.fields) - {*PLACES, "minute_decimals", *READ_ELSEWHERE.get(table.formatter, ())}:
        expected = [reads_as(kinds[name], text_of(witness, names[name])) for witness in witnesses]
        same(table.fields[name], expected, name)
    if "latitude_deg" in table.fields:
        for ours, (theirs, raw) in PLACES.items():
            same(table.fields[ours], [getattr(w, theirs) if getattr(w, raw) else math.nan for w in witnesses], ours)
        decimals = [len(w.lat.partition(".")[2]) if w.lat else math.nan for w in witnesses]
        same(table.fields["minute_decimals"], decimals, "minute_decimals")


def same(column, expected, name) -> None:
    values = column.tolist()
    assert len(values) == len(expected)
    wrong = [(v, e) for v, e in zip(values, expected, strict=True) if v != e and not (v != v and e != e)]
    assert wrong == [], name


READ_ELSEWHERE = {"GSV": ("signal_id",), "GSA": ("system_id", "pdop", "hdop", "vdop")}
"""Columns whose place depends on the number of fields; tests of their own below."""


@pytest.mark.parametrize("formatter", SENTENCES)
@settings(max_examples=40, deadline=None)
@given(data=st.data())
def test_every_column_is_what_pynmea2_reads(formatter, data):
    """Numbers to the last digit, times to the millisecond, degrees as degrees + minutes / 60, letters, texts, dates;
    empty, or missing in an older version's sentence, as unknown."""
    made = data.draw(st.lists(bodies(formatter), min_size=1, max_size=6))

    compare(columns(*made).tables[formatter], [witness_of(body) for body in made])


def test_every_column_has_a_witness():
    """A column that is added to the table must be named here."""
    for formatter in SENTENCES:
        table = columns(f"GP{formatter},").tables[formatter]
        named = {*NAMES[formatter], *READ_ELSEWHERE.get(formatter, ())}
        if "latitude_deg" in table.fields:
            named |= {*PLACES, "minute_decimals"}
        assert set(table.fields) == named


@settings(max_examples=100, deadline=None)
@given(st.lists(bodies("GSV"), min_size=1, max_size=5))
def test_satellites_in_view(made):
    """Groups of four from the fourth field on; a single field left over is the signal identifier (IEC 61162-1). There
    pynmea2 1.19 takes the identifier for the next satellite's number, so the fields are split here by hand."""
    decoded = columns(*made)
    expected, signals = [], []
    for row, body in enumerate(made):
        rest = body.split(",")[4:]
        signals.append(ord(rest[-1]) if len(rest) % 4 == 1 else 0)
        for i in range(0, len(rest) - 3, 4):
            elevation, azimuth, level = (reads_as(Kind.NUMBER, text) for text in rest[i + 1 : i + 4])
            expected.append((row, int(rest[i]), elevation, azimuth, level if level > 0 else math.nan))
    rows = decoded.satellites
    found = list(
        zip(
            rows.sentence.tolist(),
            rows.number.tolist(),
            rows.elevation_deg.tolist(),
            rows.azimuth_deg.tolist(),
            rows.cn0_dbhz.tolist(),
            strict=True,
        )
    )

    assert np.array_equal(np.array(expected).reshape(-1, 5), np.array(found).reshape(-1, 5), equal_nan=True)
    assert decoded.tables["GSV"].fields["signal_id"].tolist() == signals


@settings(max_examples=100, deadline=None)
@given(st.lists(bodies("GSA"), min_size=1, max_size=5))
def test_satellites_used(made):
    """Twelve places, three DOPs, and since 4.10 the system identifier behind them."""
    decoded = columns(*made)
    table = decoded.tables["GSA"]
    for row, body in enumerate(made):
        fields = body.split(",")[1:]
        assert decoded.used[row, :12].tolist() == [int(f) if f else -1 for f in fields[2:14]]
        for name, text in zip(("pdop", "hdop", "vdop"), fields[14:17], strict=True):
            assert np.array_equal(table.fields[name][row], reads_as(Kind.NUMBER, text), equal_nan=True)
        assert table.fields["system_id"][row] == (ord(fields[17]) if len(fields) > 17 else 0)


def test_every_entry_of_the_table_is_read():
    """Each formatter's columns come out for an empty sentence, all of them unknown, and none raises."""
    for formatter, fields in SENTENCES.items():
        body = f"GP{formatter}" + "," * 19
        table = columns(body).tables[formatter]
        for name in table.fields:
            column = table.fields[name]
            assert len(column) == 1
            value = column[0]
            unknown = value in (-1, 0, b"") or (isinstance(value, np.floating) and np.isnan(value))
            assert unknown, (formatter, name, value)
        assert {field.name for field in fields if field.name} <= set(table.fields)


@pytest.mark.parametrize("path", sorted(REAL_LOGS.glob("*.nmea")), ids=lambda path: path.name)
def test_real_logs_against_pynmea2(path):
    """Every column of the real logs is what pynmea2 reads; the satellites of GSV where it is not blind, in sentences
    whose four groups are all there."""
    framer = Framer()
    block = framer.feed(Chunk(path.read_bytes()))
    decoded = decode(block)
    lines: dict[str, list[str]] = {}
    for start, end in zip(block.start.tolist(), block.end.tolist(), strict=True):
        text = block.buffer[start:end].tobytes().decode("ascii")
        if text[2:5] in SENTENCES and text[5:6] == "," and (text[0] != "P" or text[1] == "Q"):
            lines.setdefault(text[2:5], []).append(text)
    assert set(lines) == set(decoded.tables) >= {"GGA", "RMC"}
    witnesses = {formatter: [witness_of(text) for text in texts] for formatter, texts in lines.items()}
    for formatter, theirs in witnesses.items():
        compare(decoded.tables[formatter], theirs)
    if "GSA" in witnesses:
        table, theirs = decoded.tables["GSA"], witnesses["GSA"]
        assert {len(w.data) for w in theirs} <= {17, 18}
        for name in READ_ELSEWHERE["GSA"]:
            kind = Kind.LETTER if name == "system_id" else Kind.NUMBER
            same(table.fields[name], [reads_as(kind, text_of(w, NAMES["GSA"][name])) for w in theirs], name)
        assert decoded.used.tolist() == [[int(n) if n else -1 for n in w.data[2:14]] for w in theirs]
    if "GSV" in witnesses:
        whole = [row for row, w in enumerate(witnesses["GSV"]) if len(w.data) in (19, 20) and all(w.data[3:19:4])]
        rows = decoded.satellites
        chosen = np.isin(rows.sentence, whole)
        found = np.stack([rows.number, rows.elevation_deg, rows.azimuth_deg, rows.cn0_dbhz], axis=1)[chosen]
        expected = np.array(
            [
                [reads_as(Kind.NUMBER, getattr(witnesses["GSV"][row], f"{name}_{i}")) for name in GSV_NAMES]
                for row in whole
                for i in range(1, 5)
            ]
        )
        expected[~(expected[:, 3] > 0), 3] = math.nan
        assert len(whole) > 50
        assert np.array_equal(found, expected.astype(np.float32), equal_nan=True)


GSV_NAMES = ("sv_prn_num", "elevation_deg", "azimuth", "snr")


PUBLISHED = [
    # UBX-18010854 R04, 4.2.4
    ("GPGGA,092725.00,4717.11399,N,00833.91590,E,1,08,1.01,499.6,M,48.0,M,,", "GGA", "latitude_deg", 47.2852331667),
    ("GPGGA,092725.00,4717.11399,N,00833.91590,E,1,08,1.01,499.6,M,48.0,M,,", "GGA", "longitude_deg", 8.5652650000),
    # public samples of a receiver with long fields
    (
        "GNGGA,015111.00,3412.76134514,N,10849.67440085,E,1,28,0.6,399.1382,M,-33.6324,M,,",
        "GGA",
        "separation_m",
        -33.6324,
    ),
    # JRC JR-8600, appendix 5
    ("GPZDA,234500,09,06,1995,-12,45", "ZDA", "zone_hours", -12.0),
    ("HEHDT,119.9,T", "HDT", "heading_deg", 119.9),
    ("GPGBS,235503.00,1.6,1.4,3.2,,,,,,", "GBS", "error_altitude_m", 3.2),
    ("GPGST,082356.00,1.8,,,,1.7,1.3,2.2", "GST", "sigma_height_m", 2.2),
]


@pytest.mark.parametrize(("body", "formatter", "name", "value"), PUBLISHED)
def test_published_samples(body, formatter, name, value):
    """Values printed beside published samples."""
    assert columns(body).tables[formatter].fields[name][0] == pytest.approx(value, abs=1e-10)


def test_published_satellite_sentences():
    """Padded form with one satellite and no signal; a short last part with a signal; QZSS with levels missing; an
    elevation below zero; levels without directions; a level without a number (public samples and test data)."""
    padded = columns("QZGSV,1,1,01,193,09,300,26,,,,,,,,,,,,")
    assert padded.satellites.number.tolist() == [193]
    assert padded.tables["GSV"].fields["signal_id"].tolist() == [0]

    short = columns("GPGSV,3,3,09,26,68,223,,1", "GPGSV,1,1,01,32,40,140,26,8")
    assert short.satellites.number.tolist() == [26, 32]
    assert [chr(c) for c in short.tables["GSV"].fields["signal_id"]] == ["1", "8"]
    assert np.isnan(short.satellites.cn0_dbhz[0])

    low = columns("GPGSV,4,1,13,02,02,213,,03,-3,000,,11,00,121,,14,13,172,05")
    assert low.satellites.elevation_deg.tolist() == [2.0, -3.0, 0.0, 13.0]
    assert low.tables["GSV"].fields["signal_id"].tolist() == [0]

    bare = columns("GPGSV,1,1,03,10,,,25,12,,,28,15,,,16,,,,")
    assert bare.satellites.cn0_dbhz.tolist() == [25.0, 28.0, 16.0]
    assert np.isnan(bare.satellites.elevation_deg).all()

    unnumbered = columns("GLGSV,1,1,01,,,,26.9,1")
    assert unnumbered.satellites.number.tolist() == [-1]
    assert unnumbered.satellites.cn0_dbhz[0] == pytest.approx(26.9, abs=1e-6)

    nothing = columns("GPGSV,1,1,00,1", "GPGSV,1,1,0,0", "GPGSV,1,1,00", "GPGSV,1,1,00,00,00,000,00,,,,")
    assert len(nothing.satellites.number) == 0

    untracked = columns("GLGSV,1,1,04,73,12,066,,76,07,251,,82,07,354,,84,15,099,,0")
    assert untracked.satellites.number.tolist() == [73, 76, 82, 84]
    assert np.isnan(untracked.satellites.cn0_dbhz).all()


def test_published_used_sentences():
    """Numbers of QZSS under the GPS identifier; more and fewer than twelve places; a signal behind the system."""
    decoded = columns(
        "GNGSA,A,3,03,04,08,16,27,28,29,31,195,199,,,1.13,0.61,0.94,1",
        "GNGSA,A,3,01,02,03,04,05,06,07,08,09,10,11,12,13,1.5,0.9,1.2,3",
        "GNGSA,A,3,01,02,03,04,,,,,,,1.5,0.9,1.2,4",
        "GNGSA,A,3,01,02,,,,,,,,,,,1.5,0.9,1.2,1,5",
        "GPGSA,A,1,,,,,,,,,,,,,,,",
        "GPGSA,A,3,01,02,03,04,05,06,07,08,09,10,11,12,13,1.5,0.9,1.2",
        "GPGSA,A,3,01,02,03,04,05,,,,,,,,1.5,0.9,1",
        "GNGSA,A,3,01,02,03,04,05,,,,,,,1.5,0.9,1.2,2",
        "GNGSA,A,3,01,02,00,00,00,00,00,00,00,00,00,00,2,1,1,2",
    )
    table = decoded.tables["GSA"]

    assert decoded.used[0, 8:10].tolist() == [195, 199]
    assert (decoded.used[1] > 0).sum() == 13
    assert (decoded.used[2] > 0).sum() == 4
    assert [chr(c) if c else "" for c in table.fields["system_id"]] == ["1", "3", "4", "1", "", "", "", "2", "2"]
    assert table.fields["vdop"][[0, 1, 2, 3, 5, 6, 7, 8]].tolist() == [0.94, 1.2, 1.2, 1.2, 1.2, 1.0, 1.2, 1.0]
    assert np.isnan(table.fields["vdop"][4])
    assert (decoded.used > 0).sum(axis=1).tolist() == [10, 13, 4, 2, 0, 13, 5, 5, 2]


def test_leap_second_and_dates():
    """23:59:60 is a time, and rounding makes none; two-digit years are 1980 to 2079 (common practice); impossible ones
    are unknown."""
    made = [
        f"GNRMC,{time},A,4807.03810,N,01131.00000,E,0.02,,{day},,,A,V"
        for time, day in (
            ("235960.00", "311216"),
            ("235961.00", "300299"),
            ("240000.00", "010180"),
            ("120000.9996", "290224"),
            ("12:00:00", "320101"),
            ("235959.9999", "010100"),
        )
    ]
    table = columns(*made).tables["RMC"]
    epoch = date(1970, 1, 1)
    days = [
        (date(2016, 12, 31) - epoch).days,
        -1,
        (date(1980, 1, 1) - epoch).days,
        (date(2024, 2, 29) - epoch).days,
        -1,
        (date(2000, 1, 1) - epoch).days,
    ]

    assert table.fields["utc_ms"].tolist() == [86_400_000, -1, -1, 43_201_000, -1, 86_399_999]
    assert table.fields["date_days"].tolist() == days


@pytest.mark.parametrize(
    "place",
    ["4760.000,N,00833.9,E", "9001.0,N,00833.9,E", "4717.1,X,00833.9,E", "47a7.1,N,00833.9,E", "4717.1,N,18100.0,E"],
)
def test_impossible_places_are_unknown(place):
    """Minutes of 60, beyond the pole, no such letter, no number, beyond 180 degrees: unknown, never bent to fit."""
    table = columns(f"GPGGA,092725.00,{place},1,08,1.0,499.6,M,48.0,M,,").tables["GGA"]

    assert np.isnan(table.fields["latitude_deg"][0]) or np.isnan(table.fields["longitude_deg"][0])


@settings(max_examples=100, deadline=None)
@given(st.lists(st.text(st.characters(min_codepoint=0x20, max_codepoint=0x7E), max_size=60), min_size=1, max_size=6))
def test_hostile_fields_are_survived(texts):
    """Whatever stands in the fields of a known sentence, reading every column raises nothing."""
    clean = [text.translate({ord(c): None for c in "$*!"}) for text in texts]
    for formatter in SENTENCES:
        decoded = columns(*[f"GP{formatter},{text}" for text in clean])
        for name in decoded.tables[formatter].fields:
            assert len(decoded.tables[formatter].fields[name]) == len(clean)


def test_talker_and_makers_own_sentences():
    """PQ is a talker; any other P opens a maker's own sentence, which is handed on undecoded."""
    decoded = columns("PQGSV,1,1,01,193,09,300,26", "PTNLGGA,1,2", "PGGGA,1")

    assert decoded.tables["GSV"].talker.tolist() == [b"PQ"]
    assert len(decoded.others) == 2
    assert "GGA" not in decoded.tables
