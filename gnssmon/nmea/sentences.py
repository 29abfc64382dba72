"""THE table: formatter → its fields in order. A new sentence type is one entry here.

Field lists as reprinted in receiver manuals from IEC 61162-1 / NMEA 0183 (2.x to 4.11). Fields that a version does not
have are absent, found by counting the fields that are there, never by a version setting. A name of ``""`` is a place
that nobody needs: a unit letter, a constant. GSA and GSV have a variable middle, which ``decoding`` reads.
"""

from __future__ import annotations

from gnssmon.nmea.fields import Field, Kind

NUMBER, TIME, DATE, LETTER, TEXT = Kind.NUMBER, Kind.TIME, Kind.DATE, Kind.LETTER, Kind.TEXT


def _unused() -> Field:
    return Field("", LETTER)


UTC = Field("utc_ms", TIME, "ms")
LATITUDE = Field("latitude_deg", Kind.LATITUDE, "deg")
LONGITUDE = Field("longitude_deg", Kind.LONGITUDE, "deg")

SENTENCES: dict[str, tuple[Field, ...]] = {
    "GGA": (
        UTC,
        LATITUDE,
        LONGITUDE,
        Field("quality", NUMBER),
        Field("satellites_used", NUMBER),
        Field("hdop", NUMBER),
        Field("altitude_m", NUMBER, "m"),
        _unused(),
        Field("separation_m", NUMBER, "m"),
        _unused(),
        Field("correction_age_s", NUMBER, "s"),
        Field("station_id", NUMBER),
    ),
    "GNS": (
        UTC,
        LATITUDE,
        LONGITUDE,
        Field("modes", TEXT),
        Field("satellites_used", NUMBER),
        Field("hdop", NUMBER),
        Field("altitude_m", NUMBER, "m"),
        Field("separation_m", NUMBER, "m"),
        Field("correction_age_s", NUMBER, "s"),
        Field("station_id", NUMBER),
        Field("navigational_status", LETTER),
    ),
    "RMC": (
        UTC,
        Field("status", LETTER),
        LATITUDE,
        LONGITUDE,
        Field("speed_knots", NUMBER, "kn"),
        Field("course_deg", NUMBER, "deg"),
        Field("date_days", DATE, "d"),
        Field("variation_deg", NUMBER, "deg"),
        Field("variation_direction", LETTER),
        Field("mode", LETTER),
        Field("navigational_status", LETTER),
    ),
    "GLL": (LATITUDE, LONGITUDE, UTC, Field("status", LETTER), Field("mode", LETTER)),
    "GSA": (Field("selection", LETTER), Field("fix_mode", LETTER)),
    "GSV": (Field("total", NUMBER), Field("number", NUMBER), Field("in_view", NUMBER)),
    "GST": (
        UTC,
        Field("range_rms", NUMBER),
        Field("sigma_major_m", NUMBER, "m"),
        Field("sigma_minor_m", NUMBER, "m"),
        Field("orientation_deg", NUMBER, "deg"),
        Field("sigma_latitude_m", NUMBER, "m"),
        Field("sigma_longitude_m", NUMBER, "m"),
        Field("sigma_height_m", NUMBER, "m"),
    ),
    "VTG": (
        Field("course_deg", NUMBER, "deg"),
        _unused(),
        Field("course_magnetic_deg", NUMBER, "deg"),
        _unused(),
        Field("speed_knots", NUMBER, "kn"),
        _unused(),
        Field("speed_kmh", NUMBER, "km/h"),
        _unused(),
        Field("mode", LETTER),
    ),
    "ZDA": (
        UTC,
        Field("day", NUMBER),
        Field("month", NUMBER),
        Field("year", NUMBER),
        Field("zone_hours", NUMBER, "h"),
        Field("zone_minutes", NUMBER, "min"),
    ),
    "GBS": (
        UTC,
        Field("error_latitude_m", NUMBER, "m"),
        Field("error_longitude_m", NUMBER, "m"),
        Field("error_altitude_m", NUMBER, "m"),
        Field("failed_satellite", NUMBER),
        Field("missed_probability", NUMBER),
        Field("bias_m", NUMBER, "m"),
        Field("bias_sigma_m", NUMBER, "m"),
        Field("system_id", LETTER),
        Field("signal_id", LETTER),
    ),
    "GRS": (
        UTC,
        Field("residual_mode", LETTER),
        *(Field(f"residual_{i:02}_m", NUMBER, "m") for i in range(1, 13)),
        Field("system_id", LETTER),
        Field("signal_id", LETTER),
    ),
    "HDT": (Field("heading_deg", NUMBER, "deg"), _unused()),
    "THS": (Field("heading_deg", NUMBER, "deg"), Field("mode", LETTER)),
    "DTM": (
        Field("datum", TEXT),
        Field("subdivision", TEXT),
        Field("latitude_offset_min", NUMBER, "min"),
        Field("latitude_direction", LETTER),
        Field("longitude_offset_min", NUMBER, "min"),
        Field("longitude_direction", LETTER),
        Field("altitude_offset_m", NUMBER, "m"),
        Field("reference_datum", TEXT),
    ),
    "TXT": (
        Field("total", NUMBER),
        Field("number", NUMBER),
        Field("text_id", TEXT),
        Field("text", TEXT),
    ),
}
