"""Sentences and the table → columns, one table a formatter.

Strategy. Framing has indexed all marks of the block (commas and what ends a sentence). The k-th field of a sentence
lies between two neighbours in that index, so a field of all sentences of a formatter is two arrays of offsets, and its
kernel runs down them. Columns are read when they are first asked for: statistics need less than half of them.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from dataclasses import field as with_default

import numpy as np
import numpy.typing as npt

from gnssmon.nmea import addresses, numbers
from gnssmon.nmea.columns import Chosen, Column, Columns, LazyFields, SatelliteRows, Sentences, Table
from gnssmon.nmea.fields import Bounds, Field, Kind, read
from gnssmon.nmea.sentences import SENTENCES

Offsets = npt.NDArray[np.int64]

DOP_PLACES = 3
MOST_BEHIND_DOPS = 2
"""System and, of some makers, signal."""
USUAL_SLOTS = 12
"""Satellite numbers in a GSA sentence; some receivers send more or fewer places."""
MOST_SLOTS = 64
GSA_HEAD, GSV_HEAD, GROUP = 2, 3, 4
USUAL_GROUP = ",nn,ee,aaa,cc"
"""Number, elevation, azimuth and level of a GSV sentence, as receivers print nearly all of them."""
USUAL_FIELDS = ((1, 3), (4, 6), (7, 10), (11, 13))
"""Where its digits begin and end."""

_HEX_DIGIT = np.zeros(256, dtype=bool)
_HEX_DIGIT[list(b"0123456789ABCDEFabcdef")] = True


@dataclass(frozen=True, slots=True)
class _Lines:
    """Sentences of one formatter within the block's marks. Arrays of shape (n,) but for the first two."""

    buffer: npt.NDArray[np.uint8]
    marks: Offsets
    first: Offsets
    """Index into ``marks`` of the one behind the address."""
    count: Offsets
    """Number of fields behind the address."""
    known: dict[int, Offsets] = with_default(default_factory=dict)
    """Marks looked up already, by place: a field's end is the next one's start."""

    def bounds(self, place: int | Offsets) -> Bounds:
        """Starts and ends of each sentence's field number ``place`` (from 0); empty where it has none."""
        if isinstance(place, int) and len(self.count) and place < int(self.count.min()):
            return self._marks(place) + 1, self._marks(place + 1)
        here = place < self.count
        at = self.first + np.where(here, place, 0)
        start = self.marks[at] + 1
        return start, np.where(here, self.marks[np.minimum(at + 1, len(self.marks) - 1)], start)

    def _marks(self, place: int) -> Offsets:
        """Each sentence's mark in front of its field ``place``, which it must have, or behind its last."""
        if place not in self.known:
            self.known[place] = self.marks[self.first + place]
        return self.known[place]

    def rows(self, chosen: Chosen) -> _Lines:
        return _Lines(self.buffer, self.marks, self.first[chosen], self.count[chosen])


_Places = dict[str, tuple[Field, int]]


def _places(fields: tuple[Field, ...]) -> _Places:
    """Each column's field and its place in the sentence."""
    places: _Places = {}
    place = 0
    for field in fields:
        if field.name:
            places[field.name] = field, place
        if field.kind is Kind.LATITUDE:
            places["minute_decimals"] = field, place
        place += field.places
    return places


PLACES = {formatter: _places(fields) for formatter, fields in SENTENCES.items()}


class _Fields(LazyFields):
    """The columns of some lines, by the table; ``done`` holds those that were read already."""

    def __init__(self, lines: _Lines, places: _Places, done: dict[str, Column]) -> None:
        self._lines, self._places, self._done = lines, places, done

    def __getitem__(self, name: str) -> Column:
        if name not in self._done:
            field, place = self._places[name]
            self._done |= read(field, self._lines.buffer, _from(self._lines, place))
        return self._done[name]

    def __iter__(self) -> Iterator[str]:
        return iter({**self._places, **self._done})

    def __len__(self) -> int:
        return len(self._places.keys() | self._done.keys())

    def rows(self, chosen: Chosen) -> _Fields:
        return _Fields(self._lines.rows(chosen), self._places, {name: c[chosen] for name, c in self._done.items()})


def _from(lines: _Lines, place: int) -> Callable[[int], Bounds]:
    return lambda offset: lines.bounds(place + offset)


def decode(sentences: Sentences) -> Columns:
    """Decode the sentences whose formatter the table knows; hand on the others as they are."""
    count = sentences.last_mark - sentences.first_mark
    formatter = addresses.formatters(sentences.address)
    formatter[count == 0] = -1

    tables: dict[str, Table] = {}
    satellites = _no_satellites()
    used = np.empty((0, USUAL_SLOTS), dtype=np.int16)
    known = np.zeros(len(sentences), dtype=bool)
    for name, places in PLACES.items():
        chosen = np.flatnonzero(formatter == addresses.formatter_number(name))
        if not len(chosen):
            continue
        known[chosen] = True
        lines = _Lines(sentences.buffer, sentences.marks, sentences.first_mark[chosen], count[chosen])
        done: dict[str, Column] = {}
        if name == "GSA":
            done, used = _gsa(lines)
        elif name == "GSV":
            done, satellites = _gsv(lines)
        tables[name] = Table(
            name,
            sentences.sequence[chosen],
            addresses.talkers(sentences.address[chosen]),
            sentences.size[chosen],
            sentences.received_s[chosen],
            sentences.stamped_s[chosen],
            _Fields(lines, places, done),
        )
    return Columns(tables, satellites, used, sentences.rows(np.flatnonzero(~known)))


def _gsa(lines: _Lines) -> tuple[dict[str, Column], npt.NDArray[np.int16]]:
    """Satellites used and DOPs, counted from the sentence's end.

    The last three fields are PDOP, HDOP, VDOP; since 4.10 one hex digit follows, the system, and some receivers append
    another one, the signal. Sentences of one make-up are read together; a stream has one or two of them.
    """
    count = len(lines.count)
    behind = _behind_dops(lines)
    dop = lines.count - behind - DOP_PLACES
    slots = int(np.clip((dop - GSA_HEAD).max(initial=0), USUAL_SLOTS, MOST_SLOTS))
    used = np.full((count, slots), -1, dtype=np.int16)
    columns: dict[str, Column] = {name: np.full(count, np.nan) for name in ("pdop", "hdop", "vdop")}
    columns["system_id"] = np.zeros(count, dtype=np.uint8)
    make_up = lines.count * (MOST_BEHIND_DOPS + 1) + behind
    for one in np.unique(make_up).tolist():
        number, extra = divmod(one, MOST_BEHIND_DOPS + 1)
        rows = np.flatnonzero(make_up == one)
        first = number - extra - DOP_PLACES
        if first < GSA_HEAD:
            continue
        part = lines.rows(rows)
        for i, name in enumerate(("pdop", "hdop", "vdop")):
            columns[name][rows] = numbers.decimals(lines.buffer, *part.bounds(first + i))
        if extra:
            columns["system_id"][rows] = numbers.letters(lines.buffer, *part.bounds(number - extra))
        for slot in range(min(first - GSA_HEAD, slots)):
            used[rows, slot] = _satellite_numbers(lines.buffer, *part.bounds(GSA_HEAD + slot))
    return columns, used


def _behind_dops(lines: _Lines) -> Offsets:
    """How many hex digits follow the DOPs: none, the system, or system and signal; shape (n,).

    With the usual twelve places for satellites the number of fields tells. Where the fields contradict it (a point in
    what should be a hex digit or a satellite number), another number of places is assumed.
    """
    behind = np.clip(lines.count - (GSA_HEAD + USUAL_SLOTS + DOP_PLACES), 0, MOST_BEHIND_DOPS)
    start, end = lines.bounds(np.maximum(lines.count - 1, 0))
    length = end - start
    extra = lines.count - (GSA_HEAD + USUAL_SLOTS + DOP_PLACES)
    odd = np.flatnonzero(~(((extra == 0) & (length != 1)) | ((extra == 1) & (length <= 1))))
    if len(odd):
        behind[odd] = _behind_dops_by_content(lines.rows(odd), behind[odd])
    return behind


def _behind_dops_by_content(lines: _Lines, usual: Offsets) -> Offsets:
    """The number nearest to the usual one that the fields do not contradict."""
    pointed = [_has_point(lines, lines.count - back) for back in range(1, DOP_PLACES + MOST_BEHIND_DOPS + 1)]
    single = [_is_hex_digit_or_empty(lines, lines.count - back) for back in range(1, MOST_BEHIND_DOPS + 1)]
    behind, off = usual.copy(), np.full(len(usual), MOST_BEHIND_DOPS + 1)
    for number in range(MOST_BEHIND_DOPS + 1):
        digits = np.logical_and.reduce(single[:number], initial=True) if number else True
        satellites = ~np.logical_or.reduce(pointed[number + DOP_PLACES :]) if number < MOST_BEHIND_DOPS else True
        better = digits & satellites & (abs(number - usual) < off)
        behind[better], off[better] = number, abs(number - usual)[better]
    return behind


def _is_hex_digit_or_empty(lines: _Lines, place: Offsets) -> npt.NDArray[np.bool_]:
    start, end = lines.bounds(np.maximum(place, 0))
    fits: npt.NDArray[np.bool_] = (end == start) | ((end - start == 1) & _HEX_DIGIT[lines.buffer[start]])
    return fits


def _has_point(lines: _Lines, place: Offsets) -> npt.NDArray[np.bool_]:
    text = numbers.characters(lines.buffer, *lines.bounds(np.maximum(place, 0)), numbers.LONGEST_NUMBER)
    pointed: npt.NDArray[np.bool_] = (text == ord(".")).any(axis=1) & (place >= 0)
    return pointed


def _gsv(lines: _Lines) -> tuple[dict[str, Column], SatelliteRows]:
    """Groups of four from the fourth field on; a single field left over is the signal identifier."""
    rest = np.maximum(lines.count - GSV_HEAD, 0)
    groups, left_over = np.divmod(rest, GROUP)
    has_signal = (rest > 0) & (left_over == 1)
    signal_id = numbers.letters(lines.buffer, *lines.bounds(np.where(has_signal, lines.count - 1, lines.count)))
    sentence = np.repeat(np.arange(len(rest), dtype=np.int32), groups)
    if not len(sentence):
        return {"signal_id": signal_id}, _no_satellites()
    before = np.cumsum(groups) - groups
    at = np.repeat(lines.first + GSV_HEAD - GROUP * before, groups) + GROUP * np.arange(len(sentence))
    number, elevation_deg, azimuth_deg, cn0_dbhz = _groups(lines, at)
    cn0_dbhz[~(cn0_dbhz > 0)] = np.nan
    given = _as_satellite(number)
    present = (given > 0) | np.isfinite(cn0_dbhz)
    if not present.all():
        # Neither a number nor a level: padding to four groups, with nothing or with zeros.
        keep = np.flatnonzero(present)
        sentence, given = sentence[keep], given[keep]
        elevation_deg, azimuth_deg, cn0_dbhz = elevation_deg[keep], azimuth_deg[keep], cn0_dbhz[keep]
    return {"signal_id": signal_id}, SatelliteRows(sentence, given, elevation_deg, azimuth_deg, cn0_dbhz)


def _groups(lines: _Lines, at: Offsets) -> list[npt.NDArray[np.float32]]:
    """Number, elevation, azimuth and level of groups that begin at the marks ``at``, an array each."""
    begin, end = lines.marks[at], lines.marks[at + GROUP]
    size = len(USUAL_GROUP)
    text = numbers.records(lines.buffer, np.minimum(begin, len(lines.buffer) - size), size)
    usual = end - begin == size
    values = []
    for first, last in USUAL_FIELDS:
        usual &= text[first - 1] == ord(",")
        value = np.zeros(len(at), dtype=np.float32)
        for digit in text[first:last] - np.uint8(ord("0")):
            usual &= digit <= 9
            value *= np.float32(10)
            value += digit
        values.append(value)
    odd = np.flatnonzero(~usual)
    if len(odd):
        edges = [lines.marks[at[odd] + i] for i in range(GROUP + 1)]
        for i, value in enumerate(values):
            value[odd] = numbers.small_numbers(lines.buffer, edges[i] + 1, edges[i + 1])
    return values


def _satellite_numbers(buffer: npt.NDArray[np.uint8], start: Offsets, end: Offsets) -> npt.NDArray[np.int16]:
    return _as_satellite(numbers.small_numbers(buffer, start, end))


def _as_satellite(number: npt.NDArray[np.float32]) -> npt.NDArray[np.int16]:
    """Numbers of up to three digits; -1 for anything else."""
    return np.where((number >= 0) & (number < 1000), number, -1).astype(np.int16)


def _no_satellites() -> SatelliteRows:
    nothing = np.empty(0, dtype=np.float32)
    return SatelliteRows(np.empty(0, dtype=np.int32), np.empty(0, dtype=np.int16), nothing, nothing, nothing)
