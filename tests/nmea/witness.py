"""pynmea2 as the witness of our columns: which of its fields each column is, and what its text must read as."""

from __future__ import annotations

import math
from datetime import date

import pynmea2

from gnssmon.nmea.fields import Kind

NAMES: dict[str, dict[str, str | int]] = {
    "GGA": {
        "utc_ms": "timestamp",
        "quality": "gps_qual",
        "satellites_used": "num_sats",
        "hdop": "horizontal_dil",
        "altitude_m": "altitude",
        "separation_m": "geo_sep",
        "correction_age_s": "age_gps_data",
        "station_id": "ref_station_id",
    },
    "GNS": {
        "utc_ms": "timestamp",
        "modes": "mode_indicator",
        "satellites_used": "num_sats",
        "hdop": "hdop",
        "altitude_m": "altitude",
        "separation_m": "geo_sep",
        "correction_age_s": "age_gps_data",
        "station_id": "diferential",
        "navigational_status": 12,
    },
    "RMC": {
        "utc_ms": "timestamp",
        "status": "status",
        "speed_knots": "spd_over_grnd",
        "course_deg": "true_course",
        "date_days": "datestamp",
        "variation_deg": "mag_variation",
        "variation_direction": "mag_var_dir",
        "mode": "mode_indicator",
        "navigational_status": "nav_status",
    },
    "GLL": {"utc_ms": "timestamp", "status": "status", "mode": "faa_mode"},
    "GSA": {
        "selection": "mode",
        "fix_mode": "mode_fix_type",
        "pdop": "pdop",
        "hdop": "hdop",
        "vdop": "vdop",
        "system_id": 17,
    },
    "GSV": {"total": "num_messages", "number": "msg_num", "in_view": "num_sv_in_view"},
    "GST": {
        "utc_ms": "timestamp",
        "range_rms": "rms",
        "sigma_major_m": "std_dev_major",
        "sigma_minor_m": "std_dev_minor",
        "orientation_deg": "orientation",
        "sigma_latitude_m": "std_dev_latitude",
        "sigma_longitude_m": "std_dev_longitude",
        "sigma_height_m": "std_dev_altitude",
    },
    "VTG": {
        "course_deg": "true_track",
        "course_magnetic_deg": "mag_track",
        "speed_knots": "spd_over_grnd_kts",
        "speed_kmh": "spd_over_grnd_kmph",
        "mode": "faa_mode",
    },
    "ZDA": {
        "utc_ms": "timestamp",
        "day": "day",
        "month": "month",
        "year": "year",
        "zone_hours": "local_zone",
        "zone_minutes": "local_zone_minutes",
    },
    "GBS": {
        "utc_ms": "timestamp",
        "error_latitude_m": "lat_err",
        "error_longitude_m": "lon_err",
        "error_altitude_m": "alt_err",
        "failed_satellite": "sat_prn_num_f",
        "missed_probability": "pro_miss",
        "bias_m": "est_bias",
        "bias_sigma_m": "est_bias_dev",
        "system_id": 8,
        "signal_id": 9,
    },
    "GRS": {
        "utc_ms": "timestamp",
        "residual_mode": "residuals_mode",
        **{f"residual_{i:02}_m": f"sv_res_{i:02}" for i in range(1, 13)},
        "system_id": 14,
        "signal_id": 15,
    },
    "HDT": {"heading_deg": "heading"},
    "THS": {"heading_deg": 0, "mode": 1},
    "DTM": {
        "datum": "datum",
        "subdivision": "subd_datum",
        "latitude_offset_min": "lat",
        "latitude_direction": "lat_dir",
        "longitude_offset_min": "lon",
        "longitude_direction": "lon_dir",
        "altitude_offset_m": "altitude",
        "reference_datum": "datum_code",
    },
    "TXT": {"total": "num_msg", "number": "msg_num", "text_id": "msg_type", "text": "text"},
}
"""Our columns → pynmea2's names. A number is the field's place from 0 where pynmea2 1.19 knows no such field, by the
standard's field lists as reprinted in receiver manuals; it knows no THS at all."""

PLACES = {"latitude_deg": ("latitude", "lat"), "longitude_deg": ("longitude", "lon")}


def witness_of(body: str) -> pynmea2.NMEASentence | list[str]:
    """pynmea2's reading; of what it does not know the fields' texts.

    It takes talker PQ (QZSS) for a maker's own sentence, so it is shown GQ in its place.
    """
    if body[2:5] not in pynmea2.TalkerSentence.sentence_types:
        return body.split(",")[1:]
    return pynmea2.parse("$" + ("GQ" + body[2:] if body.startswith("PQ") else body))


def text_of(witness: pynmea2.NMEASentence | list[str], name: str | int) -> str:
    """One field as received; empty where the sentence has no such field."""
    if isinstance(witness, list):
        data, place = witness, name
    else:
        data = witness.data
        place = [field[1] for field in witness.fields].index(name) if isinstance(name, str) else name
    return data[place] if place < len(data) else ""


def reads_as(kind: Kind, text: str) -> float | int | bytes:
    """The value of a field by Python's own arithmetic."""
    if kind is Kind.TIME:
        return milliseconds(text)
    if kind is Kind.DATE:
        return days(text)
    if kind is Kind.LETTER:
        return ord(text) if len(text) == 1 else 0
    if kind is Kind.TEXT:
        return text.encode("ascii")
    return float(text) if text else math.nan


def milliseconds(text: str) -> int:
    """Time of day; -1 empty."""
    if not text:
        return -1
    whole = int(text[:2]) * 3600 + int(text[2:4]) * 60 + int(text[4:6])
    fraction = float("0" + text[6:]) if len(text) > 6 else 0.0
    return whole * 1000 + math.floor(fraction * 1000 + 0.5)


def days(text: str) -> int:
    """Days since 1970 of ``ddmmyy``; -1 empty."""
    if not text:
        return -1
    year = int(text[4:6])
    return (date((1900 if year >= 80 else 2000) + year, int(text[2:4]), int(text[:2])) - date(1970, 1, 1)).days
