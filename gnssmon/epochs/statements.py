"""What the sentences of a block state for their epochs: decoded columns → rows, one set a group of values."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from gnssmon.constellations.identity import named_system, satellite_codes, signal_rows
from gnssmon.constellations.systems import BEIDOU, GALILEO, NAVIC, QZSS
from gnssmon.epochs.batch import KINDS
from gnssmon.epochs.dates import EARLIEST_DAY, LATEST_DAY, days_since_1970
from gnssmon.epochs.grouping import Grouped
from gnssmon.epochs.rows import Column, Rows, together
from gnssmon.nmea.columns import Columns, SatelliteRows, Table

Ints = npt.NDArray[np.int64]

TIMED = ("GGA", "GNS", "RMC", "GLL", "GST", "GBS", "GRS", "ZDA")
"""Sentences with a time of day. The first of them in this list gives the epoch its time."""

CLOCK_RANK = 0
"""Rank of ZDA, the last of them."""

LEADING = TIMED[:4]
"""Sentences with a position, in order of preference."""

WHOLE = b"GN"
"""Talker of a solution from several systems together."""

OTHERS = (GALILEO, BEIDOU, QZSS, NAVIC)
"""Systems that count from 1 since NMEA 4.10, and in makers' numberings before."""

METRES_PER_SECOND = 1852 / 3600
"""In one knot."""

QUALITY_OF_LETTER = {"N": 0, "A": 1, "D": 2, "P": 3, "R": 4, "F": 5, "E": 6, "M": 7, "S": 8}
"""Mode letters and the GGA quality indicators that mean the same (IEC 61162-1)."""

BEST_FIRST = "RFPDAEMSN"
"""Of several letters in one GNS sentence, the one that stands for the whole (common practice, no source)."""

HIGHEST_QUALITY = max(QUALITY_OF_LETTER.values())
"""Higher indicators are makers' own: not stated, as far as the standard goes."""

_QUALITY = np.full(256, -1, dtype=np.int8)
_PREFERENCE = np.zeros(256, dtype=np.uint8)
for _place, _letter in enumerate(BEST_FIRST):
    _QUALITY[ord(_letter)] = QUALITY_OF_LETTER[_letter]
    _PREFERENCE[ord(_letter)] = len(BEST_FIRST) - _place
_QUALITY_OF_PREFERENCE = np.array([-1, *(QUALITY_OF_LETTER[letter] for letter in reversed(BEST_FIRST))], dtype=np.int8)


def stated_times(columns: Columns, first: int, count: int) -> tuple[Ints, npt.NDArray[np.int8]]:
    """Return each sentence's time of day (ms, -1 none) and its rank as a giver of time, both of shape (count,).

    ``first`` is the sequence of the first sentence asked about; earlier ones of the block are passed over.
    """
    time_ms = np.full(count, -1, dtype=np.int64)
    rank = np.zeros(count, dtype=np.int8)
    for place, formatter in enumerate(reversed(TIMED)):
        if table := columns.tables.get(formatter):
            begin = int(np.searchsorted(table.sequence, first))
            at = table.sequence[begin:] - first
            time_ms[at] = table.fields["utc_ms"][begin:]
            rank[at] = place
    return time_ms, rank


def statements(columns: Columns, grouped: Grouped, first: int) -> dict[str, Rows]:
    """Return the rows of every group that the block says something about.

    ``grouped`` numbers the epochs of the block's sentences, whose first has the sequence ``first``.
    """
    tables = {name: table for name, table in columns.tables.items() if len(table)}
    own = {name: grouped.own[table.sequence - first] for name, table in tables.items()}
    current = {name: grouped.current[table.sequence - first] for name, table in tables.items()}
    leading = [name for name in LEADING if name in tables]
    found = {
        "position": [position_rows(name, tables[name], own[name]) for name in leading],
        "presence": [_each_once(current[name], "kind", LEADING.index(name)) for name in leading],
        "kinds": [_each_once(own[name], "bit", 1 << KINDS.index(name)) for name in tables if name in KINDS],
        "velocity": [velocity_rows(name, tables[name], own[name]) for name in ("RMC", "VTG") if name in tables],
        "heading": [heading_rows(name, tables[name], own[name]) for name in ("HDT", "THS") if name in tables],
        "date": [_date(name, tables[name], own[name]) for name in ("RMC", "ZDA") if name in tables],
    }
    rows = {group: together(*parts) for group, parts in found.items() if parts}
    if "GST" in tables:
        rows["sigma"] = _sigma(tables["GST"], own["GST"])
    if "GSA" in tables:
        rows["dop"] = dop_rows("GSA", tables["GSA"], own["GSA"])
        rows["used"] = _used(tables["GSA"], own["GSA"], columns.used)
    if "GSV" in tables:
        rows["signals"] = _signals(tables["GSV"], own["GSV"], columns.satellites)
    return rows


def position_rows(formatter: str, table: Table, epoch: Ints) -> Rows:
    """Where a sentence of LEADING says the antenna is, and how good that is."""
    fields, count = table.fields, len(table)
    timed = fields["utc_ms"].astype(np.int64) >= 0
    rank = timed * 8 + (len(LEADING) - LEADING.index(formatter)) * 2
    if formatter == "GGA":
        quality = _of_indicator(fields["quality"])
    elif formatter == "GNS":
        quality = _of_letters(fields["modes"])
        rank = rank + (table.talker == WHOLE)  # the whole solution before those of single systems
    else:
        quality = _of_status(fields["status"], fields["mode"])

    def number(name: str) -> Column:
        return fields[name] if name in fields else np.full(count, np.nan)

    return Rows(
        {
            "epoch": epoch,
            "rank": rank.astype(np.int8),
            "kind": np.full(count, LEADING.index(formatter), dtype=np.int8),
            "timed": timed,
            "received_s": table.received_s,
            "quality": quality,
            "latitude_deg": fields["latitude_deg"],
            "longitude_deg": fields["longitude_deg"],
            "altitude_m": number("altitude_m"),
            "separation_m": number("separation_m"),
            "satellites_used": number("satellites_used"),
            "hdop": number("hdop"),
            "correction_age_s": number("correction_age_s"),
            "station": number("station_id"),
        }
    )


def _of_indicator(quality: Column) -> npt.NDArray[np.int8]:
    """GGA quality: an empty field in a sentence of nothing else means no fix."""
    number = np.nan_to_num(quality.astype(np.float64))
    return np.where(number <= HIGHEST_QUALITY, number, -1).astype(np.int8)


def _of_letters(modes: Column) -> npt.NDArray[np.int8]:
    letters = np.ascontiguousarray(modes).view(np.uint8).reshape(len(modes), -1)
    best: npt.NDArray[np.uint8] = _PREFERENCE[letters].max(axis=1)
    return _QUALITY_OF_PREFERENCE[best]


def _of_status(status: Column, mode: Column) -> npt.NDArray[np.int8]:
    """RMC and GLL: V is no fix whatever the letter says; A without a letter (before NMEA 2.3) is autonomous."""
    quality = np.where(mode == 0, np.int8(1), _QUALITY[mode.astype(np.uint8)])
    quality[status == ord("V")] = 0
    quality[(status == 0) & (mode == 0)] = -1
    return quality.astype(np.int8)


def _each_once(epoch: Ints, name: str, value: int) -> Rows:
    once = epoch[np.flatnonzero(np.diff(epoch, prepend=-1))]
    return Rows({"epoch": once, name: np.full(len(once), value, dtype=np.int64)})


def velocity_rows(formatter: str, table: Table, epoch: Ints) -> Rows:
    """Speed and course from RMC or VTG."""
    knots = table.fields["speed_knots"].astype(np.float64)
    rank = np.isfinite(knots) * 2 + (formatter == "RMC")
    course = table.fields["course_deg"]
    return Rows(
        {"epoch": epoch, "rank": rank.astype(np.int8), "speed_mps": knots * METRES_PER_SECOND, "course_deg": course}
    )


def heading_rows(formatter: str, table: Table, epoch: Ints) -> Rows:
    """Heading from HDT or THS."""
    heading = table.fields["heading_deg"].astype(np.float64)
    if formatter == "THS":
        heading = np.where(table.fields["mode"] == ord("V"), np.nan, heading)
    rank = np.isfinite(heading) * 2 + (formatter == "HDT")
    return Rows({"epoch": epoch, "rank": rank.astype(np.int8), "heading_deg": heading})


def _date(formatter: str, table: Table, epoch: Ints) -> Rows:
    """Dates with their own time; ZDA before RMC, whose year has two digits."""
    fields, time_ms = table.fields, table.fields["utc_ms"].astype(np.int64)
    if formatter == "ZDA":
        day = days_since_1970(*(fields[name].astype(np.float64) for name in ("year", "month", "day")))
    else:
        day = fields["date_days"].astype(np.int64)
    stated = (day >= EARLIEST_DAY) & (day <= LATEST_DAY) & (time_ms >= 0)
    rank = np.full(len(table), formatter == "ZDA", dtype=np.int8)
    return Rows({"epoch": epoch, "rank": rank, "day": day, "time_ms": time_ms}).where(stated)


def _sigma(table: Table, epoch: Ints) -> Rows:
    values = {
        "sigma_east_m": table.fields["sigma_longitude_m"],
        "sigma_north_m": table.fields["sigma_latitude_m"],
        "sigma_up_m": table.fields["sigma_height_m"],
    }
    return Rows({"epoch": epoch, "rank": _stated(values), **values})


def dop_rows(formatter: str, table: Table, epoch: Ints) -> Rows:
    """GSA; some receivers write 0.0 where they have none; no geometry has it."""
    values: dict[str, Column] = {}
    for name in ("pdop", "hdop", "vdop"):
        value = table.fields[name].astype(np.float64)
        values[name] = np.where(value > 0, value, np.nan)
    return Rows({"epoch": epoch, "rank": _stated(values), **values})


def _stated(values: dict[str, Column]) -> npt.NDArray[np.int8]:
    stated: npt.NDArray[np.bool_] = np.any([np.isfinite(value) for value in values.values()], axis=0)
    return stated.astype(np.int8)


def _used(table: Table, epoch: Ints, used: npt.NDArray[np.int16]) -> Rows:
    row, slot = np.nonzero(used > 0)
    system_id = table.fields["system_id"].astype(np.uint8)
    named = named_system(table.talker, system_id)
    return Rows({"epoch": epoch[row], "named": named[row], "number": used[row, slot]})


def _signals(table: Table, epoch: Ints, satellites: SatelliteRows) -> Rows:
    """Groups without a satellite number are left out: nobody can say which signals of theirs belong together."""
    numbered = satellites.number >= 0
    chosen = slice(None) if numbered.all() else np.flatnonzero(numbered)
    row = satellites.sentence[chosen]
    satellite = satellite_codes(named_system(table.talker)[row], satellites.number[chosen])
    return Rows(
        {
            "epoch": epoch[row],
            "satellite": satellite,
            "signal": signal_rows(satellite, table.fields["signal_id"].astype(np.uint8)[row]),
            "elevation_deg": satellites.elevation_deg[chosen],
            "azimuth_deg": satellites.azimuth_deg[chosen],
            "cn0_dbhz": satellites.cn0_dbhz[chosen],
        }
    )


def first_plain_number(columns: Columns, grouped: Grouped, first: int) -> int | None:
    """Return the epoch in which a satellite of neither GPS nor GLONASS is first listed under a number below 65.

    From then on a bare number in a GN sentence can be anybody's; see ``identity.satellite_codes``.
    """
    table = columns.tables.get("GSV")
    if table is None or not len(table):
        return None
    named = named_system(table.talker)
    if not np.isin(named, OTHERS).any():
        return None
    number, row = columns.satellites.number, columns.satellites.sentence
    plain = np.flatnonzero(np.isin(named[row], OTHERS) & (number > 0) & (number < 65))
    return int(grouped.current[table.sequence[row[plain[0]]] - first]) if len(plain) else None
