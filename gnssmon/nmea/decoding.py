"""Offsets and the table → columns, one table a formatter.

Strategy. All separators of the block (comma, ``*``, line end) are indexed once. The k-th field of a sentence then lies
between two neighbours in that index, so a field of all sentences of a formatter is two arrays of offsets, and its
kernel runs down them.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.nmea import numbers
from gnssmon.nmea.columns import Column, Columns, SatelliteRows, Sentences, Table
from gnssmon.nmea.fields import Bounds, Field, read
from gnssmon.nmea.sentences import SENTENCES

Offsets = npt.NDArray[np.int64]

DOP_PLACES = 3
USUAL_SLOTS = 12
"""Satellite numbers in a GSA sentence; some receivers send more or fewer places."""
GSA_HEAD, GSV_HEAD, GROUP = 2, 3, 4

_SEPARATOR = np.zeros(256, dtype=bool)
_SEPARATOR[[ord(","), ord("*"), 0x0A, 0x0D]] = True
_HEX_DIGIT = np.zeros(256, dtype=bool)
_HEX_DIGIT[list(b"0123456789ABCDEFabcdef")] = True


@dataclass(frozen=True, slots=True)
class _Lines:
    """Sentences of one formatter within the block's separators. Arrays of shape (n,)."""

    buffer: npt.NDArray[np.uint8]
    separators: Offsets
    first: Offsets
    """Index into ``separators`` of the one behind the address."""
    count: Offsets
    """Number of fields behind the address."""

    def bounds(self, place: int | Offsets) -> Bounds:
        """Starts and ends of each sentence's field number ``place`` (from 0); empty where it has none."""
        here = (place < self.count) & (place >= 0)
        at = self.first + np.where(here, place, 0)
        start = self.separators[np.minimum(at, len(self.separators) - 1)] + 1
        end = self.separators[np.minimum(at + 1, len(self.separators) - 1)]
        return start, np.where(here, np.maximum(end, start), start)


def decode(sentences: Sentences) -> Columns:
    """Decode the sentences whose formatter the table knows; hand on the others as they are."""
    buffer = sentences.buffer
    separators = np.append(np.flatnonzero(_SEPARATOR[buffer]), len(buffer))
    first = np.searchsorted(separators, sentences.start)
    count = np.searchsorted(separators, sentences.end) - first
    address_end = np.minimum(separators[first], sentences.end)
    known = (address_end - sentences.start == 5) & (count > 0)
    key = np.zeros(len(sentences), dtype=np.int64)
    for back in (3, 2, 1):
        key = key << 8 | buffer[np.maximum(address_end - back, 0)] if len(buffer) else key
    key[~known] = -1
    # A maker's own sentence ($P…) has no talker; PQ is a talker all the same.
    if len(buffer):
        own = (buffer[sentences.start] == ord("P")) & (
            buffer[np.minimum(sentences.start + 1, len(buffer) - 1)] != ord("Q")
        )
        key[own] = -1

    tables: dict[str, Table] = {}
    satellites = _no_satellites()
    used = np.empty((0, USUAL_SLOTS), dtype=np.int16)
    decoded = np.zeros(len(sentences), dtype=bool)
    for formatter, fields in SENTENCES.items():
        chosen = np.flatnonzero(key == int.from_bytes(formatter.encode("ascii"), "big"))
        if not len(chosen):
            continue
        decoded[chosen] = True
        lines = _Lines(buffer, separators, first[chosen], count[chosen])
        columns = _read_fields(fields, lines)
        if formatter == "GSA":
            more, used = _gsa(lines)
            columns |= more
        elif formatter == "GSV":
            more, satellites = _gsv(lines)
            columns |= more
        tables[formatter] = _table(formatter, sentences, chosen, columns)
    others = np.flatnonzero(~decoded)
    return Columns(tables, satellites, used, _subset(sentences, others))


def _read_fields(fields: tuple[Field, ...], lines: _Lines) -> dict[str, Column]:
    columns: dict[str, Column] = {}
    place = 0
    for field in fields:
        if field.name:
            columns |= read(field, lines.buffer, _from(lines, place))
        place += field.places
    return columns


def _from(lines: _Lines, place: int) -> Callable[[int], Bounds]:
    return lambda offset: lines.bounds(place + offset)


def _gsa(lines: _Lines) -> tuple[dict[str, Column], npt.NDArray[np.int16]]:
    """Satellites used and DOPs, counted from the sentence's end.

    The last three fields are PDOP, HDOP, VDOP; since 4.10 one hex digit follows, the system, and some receivers append
    another one, the signal. With the usual twelve places the number of fields tells; else the last fields themselves.
    """
    count = lines.count
    single = [_is_hex_digit(lines, count - back) for back in (1, 2)]
    pointed = [_has_point(lines, count - back) for back in (2, 3)]
    usual = GSA_HEAD + USUAL_SLOTS + DOP_PLACES
    two = (count == usual + 2) & single[0] & single[1] & pointed[1]
    one = (count == usual + 1) | ((count != usual) & ~two & single[0] & pointed[0])
    one |= (count == usual) & single[0] & pointed[0] & ~_has_point(lines, count - 4)
    behind = np.where(two, 2, np.where(one, 1, 0))
    dop = count - behind - DOP_PLACES
    columns: dict[str, Column] = {
        name: numbers.decimals(lines.buffer, *lines.bounds(np.where(dop >= GSA_HEAD, dop + i, -1)))
        for i, name in enumerate(("pdop", "hdop", "vdop"))
    }
    columns["system_id"] = numbers.letters(lines.buffer, *lines.bounds(np.where(behind > 0, count - behind, -1)))
    slots = int(np.clip((dop - GSA_HEAD).max(initial=0), USUAL_SLOTS, 64))
    used = np.full((len(count), slots), -1, dtype=np.int16)
    for slot in range(slots):
        place = np.where(slot < dop - GSA_HEAD, GSA_HEAD + slot, -1)
        used[:, slot] = _satellite_numbers(lines.buffer, *lines.bounds(place))
    return columns, used


def _is_hex_digit(lines: _Lines, place: Offsets) -> npt.NDArray[np.bool_]:
    start, end = lines.bounds(place)
    single: npt.NDArray[np.bool_] = _HEX_DIGIT[lines.buffer[np.minimum(start, len(lines.buffer) - 1)]]
    return single & (end - start == 1)


def _has_point(lines: _Lines, place: Offsets) -> npt.NDArray[np.bool_]:
    text = numbers.characters(lines.buffer, *lines.bounds(place), numbers.LONGEST_NUMBER)
    pointed: npt.NDArray[np.bool_] = (text == ord(".")).any(axis=1)
    return pointed


def _gsv(lines: _Lines) -> tuple[dict[str, Column], SatelliteRows]:
    """Groups of four from the fourth field on; a single field left over is the signal identifier."""
    rest = lines.count - GSV_HEAD
    groups = np.maximum(rest, 0) // GROUP
    left_over = (rest > 0) & (rest % GROUP == 1)
    signal_id = numbers.letters(lines.buffer, *lines.bounds(np.where(left_over, lines.count - 1, -1)))
    sentence = np.repeat(np.arange(len(rest), dtype=np.int32), groups)
    if not len(sentence):
        return {"signal_id": signal_id}, _no_satellites()
    ordinal = np.arange(len(sentence)) - np.repeat(np.cumsum(groups) - groups, groups)
    at = np.repeat(lines.first, groups) + GSV_HEAD + GROUP * ordinal
    edges = [lines.separators[at + i] for i in range(GROUP + 1)]
    number, elevation_deg, azimuth_deg, cn0_dbhz = (
        numbers.small_numbers(lines.buffer, edges[i] + 1, edges[i + 1]) for i in range(GROUP)
    )
    cn0_dbhz[~(cn0_dbhz > 0)] = np.nan
    given = np.where(np.isfinite(number) & (number >= 0) & (number < 1000), number, -1).astype(np.int16)
    present = given >= 0
    present |= np.isfinite(cn0_dbhz) | np.isfinite(elevation_deg)
    if not present.all():  # padding to four groups
        keep = np.flatnonzero(present)
        sentence, given = sentence[keep], given[keep]
        elevation_deg, azimuth_deg, cn0_dbhz = elevation_deg[keep], azimuth_deg[keep], cn0_dbhz[keep]
    return {"signal_id": signal_id}, SatelliteRows(sentence, given, elevation_deg, azimuth_deg, cn0_dbhz)


def _satellite_numbers(buffer: npt.NDArray[np.uint8], start: Offsets, end: Offsets) -> npt.NDArray[np.int16]:
    number = numbers.small_numbers(buffer, start, end)
    return np.where(np.isfinite(number) & (number >= 0) & (number < 1000), number, -1).astype(np.int16)


def _no_satellites() -> SatelliteRows:
    nothing = np.empty(0, dtype=np.float32)
    return SatelliteRows(np.empty(0, dtype=np.int32), np.empty(0, dtype=np.int16), nothing, nothing, nothing)


def _table(formatter: str, sentences: Sentences, chosen: Offsets, columns: dict[str, Column]) -> Table:
    start = sentences.start[chosen]
    talker = np.stack([sentences.buffer[start], sentences.buffer[start + 1]], axis=1)
    return Table(
        formatter,
        sentences.sequence[chosen],
        np.ascontiguousarray(talker).view("S2")[:, 0],
        sentences.size[chosen],
        sentences.received_s[chosen],
        sentences.stamped_s[chosen],
        columns,
    )


def _subset(sentences: Sentences, rows: Offsets) -> Sentences:
    return Sentences(
        sentences.buffer,
        sentences.start[rows],
        sentences.end[rows],
        sentences.sequence[rows],
        sentences.size[rows],
        sentences.received_s[rows],
        sentences.stamped_s[rows],
    )
