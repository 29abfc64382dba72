"""Sentences: pynmea2, which has no part in making them, reads back what was told."""

from __future__ import annotations

import math
from dataclasses import replace
from functools import reduce
from operator import xor

import pynmea2
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.simulation.sentences import Listed, Told, Writer, checksum, sentence

ALL = ("GGA", "GNS", "RMC", "GLL", "GSA", "GSV", "GST", "VTG", "ZDA")
SIGNALS = (("G", "1"), ("G", "7"), ("R", "1"), ("E", "7"), ("C", "1"), ("S", "1"))
SATELLITES = (
    Listed("G", 5, 40, 120, True, (44, 46)),
    Listed("G", 7, 3, 359, False, (0, 0)),
    Listed("G", 12, 80, 0, True, (50, 0)),
    Listed("R", 70, 33, 210, True, (41,)),
    Listed("E", 11, 15, 45, True, (39,)),
    Listed("C", 23, 60, 300, True, (47,)),
    Listed("S", 36, 28, 150, False, (36,)),
)
TOLD = Told(
    clock="123519.00",
    date=(1, 3, 2026),
    quality=4,
    latitude_deg=-33.412345678,
    longitude_deg=148.251234567,
    altitude_m=312.3456,
    separation_m=20.4,
    used=5,
    pdop=1.234,
    hdop=0.812,
    vdop=0.93,
    age_s=1.0,
    station=101,
    speed_mps=1.5,
    course_deg=72.0,
    sigma_m=(0.011, 0.012, 0.02),
    satellites=SATELLITES,
)


def written(version: str = "4.11", told: Told = TOLD, kinds: tuple[str, ...] = ALL, decimals: int = 7) -> list[str]:
    return Writer(version, minute_decimals=decimals, signals=SIGNALS).epoch(told, kinds)


def read(lines: list[str], kind: str) -> list[pynmea2.NMEASentence]:
    return [m for m in (pynmea2.parse(line, check=True) for line in lines) if m.sentence_type == kind]


@given(st.binary(max_size=200))
@settings(max_examples=200)
def test_checksum_is_the_xor_of_all_bytes(body):
    """Folding gives what XOR byte by byte gives."""
    assert checksum(body) == reduce(xor, body, 0)


def test_published_checksum():
    """A published sample keeps its checksum (NMEA sheet, section 11, number 1)."""
    body = "GPGGA,092725.00,4717.11399,N,00833.91590,E,1,08,1.01,499.6,M,48.0,M,,"

    assert sentence(body) == f"${body}*5B\r\n"


@pytest.mark.parametrize("version", ["2.3", "3.01", "4.0", "4.11"])
def test_every_sentence_is_read_back(version):
    """Good checksums, line ends, printable characters; the position to the last decimal."""
    lines = written(version)

    for line in lines:
        assert line.endswith("\r\n")
        assert all(" " <= letter <= "~" for letter in line[:-2])
        pynmea2.parse(line, check=True)
    (gga,) = read(lines, "GGA")
    assert gga.latitude == pytest.approx(TOLD.latitude_deg, abs=1e-9)
    assert gga.longitude == pytest.approx(TOLD.longitude_deg, abs=1e-9)
    assert (gga.altitude, float(gga.geo_sep), gga.gps_qual, gga.num_sats) == (312.3456, 20.4, 4, "05")
    assert (gga.horizontal_dil, gga.age_gps_data, gga.ref_station_id) == ("0.81", "1.0", "0101")
    (rmc,) = read(lines, "RMC")
    assert rmc.datetime.isoformat() == "2026-03-01T12:35:19+00:00"
    assert float(rmc.spd_over_grnd) == pytest.approx(1.5 / 0.514444, abs=1e-3)
    (gst,) = read(lines, "GST")
    assert (gst.std_dev_latitude, gst.std_dev_longitude, gst.std_dev_altitude) == (0.012, 0.011, 0.02)
    (vtg,) = read(lines, "VTG")
    assert float(vtg.spd_over_grnd_kmph) == pytest.approx(5.4)
    (zda,) = read(lines, "ZDA")
    assert (zda.day, zda.month, zda.year) == (1, 3, 2026)


@pytest.mark.parametrize(("version", "fields"), [("2.3", 12), ("3.01", 12), ("4.0", 12), ("4.11", 13)])
def test_field_counts_tell_the_version(version, fields):
    """RMC has 12 fields from 2.3 on and 13 from 4.1 on; GSA 17 and 18; GSV a signal id from 4.10 on (sheet, 6, 7)."""
    lines = [line[7 : line.index("*")].split(",") for line in written(version)]
    kinds = [line[3:6] for line in written(version)]

    assert {len(f) for f, kind in zip(lines, kinds, strict=True) if kind == "RMC"} == {fields}
    assert {len(f) for f, kind in zip(lines, kinds, strict=True) if kind == "GSA"} == {fields + 5}
    assert {(len(f) - 3) % 4 for f, kind in zip(lines, kinds, strict=True) if kind == "GSV"} == {fields - 12}


def test_talkers_and_numbers_by_version():
    """Before 4.11 there is no Galileo or BeiDou; 2.3 speaks as GP; a mixed solution speaks as GN."""
    for version, talkers in (
        ("2.3", {"GP"}), ("3.01", {"GN", "GP", "GL"}), ("4.11", {"GN", "GP", "GL", "GA", "GB"})
    ):  # fmt: skip
        assert {line[1:3] for line in written(version)} == talkers
    (gns,) = read(written("4.11"), "GNS")
    assert gns.data[5] == "RRRR"
    assert read(written("3.01"), "GNS")[0].data[5] == "RR"


def test_satellites_in_view_per_signal():
    """One set per system and signal, augmentation satellites with GPS, untracked ones in the first set only."""
    sets = {}
    for line in written(kinds=("GSV",)):
        fields = line[7 : line.index("*")].split(",")
        groups = [tuple(fields[i : i + 4]) for i in range(3, len(fields) - 1, 4)]
        sets.setdefault((line[1:3], fields[-1]), []).extend(groups)
        assert int(fields[2]) == len(groups) or int(fields[0]) > 1

    assert sets == {
        ("GP", "1"): [
            ("05", "40", "120", "44"),
            ("07", "03", "359", ""),
            ("12", "80", "000", "50"),
            ("36", "28", "150", "36"),
        ],
        ("GP", "7"): [("05", "40", "120", "46")],
        ("GL", "1"): [("70", "33", "210", "41")],
        ("GA", "7"): [("11", "15", "045", "39")],
        ("GB", "1"): [("23", "60", "300", "47")],
    }


def test_more_than_twelve_used_fill_a_second_gsa():
    """Twelve slots a sentence; a second one for the same system (sheet, section 6)."""
    many = tuple(Listed("G", n, 30, 10 * n, True, (40, 40)) for n in range(1, 15))
    found = [line.split("*")[0].split(",") for line in written(told=replace(TOLD, satellites=many), kinds=("GSA",))]

    assert [fields[3:15] for fields in found[:2]] == [
        [f"{n:02d}" for n in range(1, 13)],
        ["13", "14", *[""] * 10],
    ]
    assert [fields[-1] for fields in found] == ["1", "1", "2", "3", "4"]


def test_unknown_is_empty():
    """No fix, no time, no directions: empty fields, never zeros, and pynmea2 still reads them."""
    strange = replace(
        TOLD,
        clock="",
        date=None,
        quality=0,
        age_s=math.nan,
        used=0,
        pdop=math.inf,
        hdop=math.inf,
        satellites=(Listed("G", 5, None, None, False, (44, 0)), Listed("G", 6, None, None, False, (0, 0))),
    )
    lines = written(told=strange)
    for line in lines:
        pynmea2.parse(line, check=True)

    assert next(line for line in lines if "GGA" in line).startswith("$GNGGA,,,,,,0,00,99.99,,M,,M,,*")
    assert next(line for line in lines if "RMC" in line).startswith("$GNRMC,,V,,,,,,,,,,N,V*")
    assert [line for line in lines if "GPGSV" in line] == [sentence("GPGSV,1,1,01,05,,,44,1")]


@given(st.floats(-90, 90), st.floats(-180, 180), st.integers(2, 9))
@settings(max_examples=150)
def test_minutes_never_reach_sixty(latitude_deg, longitude_deg, decimals):
    """Whatever the position and the decimals, it is read back within half a step."""
    told = replace(TOLD, latitude_deg=latitude_deg, longitude_deg=longitude_deg)
    (line,) = written(told=told, kinds=("GGA",), decimals=decimals)
    fields = line.split(",")
    gga = pynmea2.parse(line, check=True)

    assert float(fields[2][2:]) < 60.0
    assert float(fields[4][3:]) < 60.0
    assert len(fields[2].split(".")[1]) == decimals
    step_deg = 10.0**-decimals / 60.0
    assert gga.latitude == pytest.approx(latitude_deg, abs=0.51 * step_deg + 1e-12)
    assert gga.longitude == pytest.approx(longitude_deg, abs=0.51 * step_deg + 1e-12)
