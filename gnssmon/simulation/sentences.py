"""Truth → sentences, in the dialect of an NMEA version.

Formatted here rather than built by pynmea2: a day of a dual-band receiver at 1 Hz is three million sentences, which
take pynmea2 several minutes and this module half of one. Tests read them back with pynmea2.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

KNOTS = 3600.0 / 1852.0
SYSTEM_ID = {"G": "1", "R": "2", "E": "3", "C": "4", "J": "5"}
TALKER = {"G": "GP", "R": "GL", "E": "GA", "C": "GB", "J": "GQ"}
MODE = {0: "N", 1: "A", 2: "D", 4: "R", 5: "F", 6: "E"}
NUMBER_OFFSET = {"R": 64, "S": 13}
"""From the number within the system (RINEX) to that in a sentence: slot + 64; PRN - 87, where PRN = number + 100."""
SLOTS = 12
"""Of a GSA."""
GROUPS = 4
"""Of a GSV."""
NAMEABLE = {"2.3": "GS", "3.01": "GRS", "4.0": "GRS", "4.11": "GRECJS"}
"""Systems that a version's numbering can name."""
PRECISE_DECIMALS = 6
"""With so many decimals of a minute a receiver also gives heights to the millimetre and better."""


@dataclass(frozen=True, slots=True)
class Listed:
    """One satellite of an epoch."""

    letter: str
    number: int
    """As sent: see NUMBER_OFFSET."""
    elevation: int | None
    """None while the receiver does not know where it stands."""
    azimuth: int | None
    used: bool
    levels: tuple[int, ...]
    """By channel of its system; 0 not tracked."""


@dataclass(frozen=True, slots=True)
class Told:
    """One epoch as the receiver tells it."""

    clock: str
    """``hhmmss.ss``; empty while no time is known."""
    date: tuple[int, int, int] | None
    """Day, month, year; None while no time is known."""
    quality: int
    latitude_deg: float
    longitude_deg: float
    altitude_m: float
    separation_m: float
    used: int
    pdop: float
    hdop: float
    vdop: float
    age_s: float
    station: int
    speed_mps: float
    course_deg: float
    sigma_m: tuple[float, float, float]
    """East, north, up."""
    satellites: tuple[Listed, ...]


def checksum(body: bytes) -> int:
    """XOR of all bytes: halves of the number that the bytes are, folded onto each other until one byte is left."""
    value, bits = int.from_bytes(body, "little"), 8
    while bits < 8 * len(body):
        bits *= 2
    while bits > 8:
        bits //= 2
        value = (value >> bits) ^ (value & ((1 << bits) - 1))
    return value


def sentence(body: str) -> str:
    """The body with start character, checksum and line end."""
    return f"${body}*{checksum(body.encode('ascii')):02X}\r\n"


class Writer:
    """Writes epochs in one dialect."""

    def __init__(self, version: str, *, minute_decimals: int, signals: tuple[tuple[str, str], ...]) -> None:
        """``signals``: system letter and signal id of each channel, in the order of ``Listed.levels``."""
        self._modern = version == "4.11"
        self._nameable = NAMEABLE[version]
        self._decimals = minute_decimals
        self._systems = [x for x in "GRECJ" if x in self._nameable and any(letter == x for letter, _ in signals)]
        self._talker = "GN" if len(self._systems) > 1 or "G" not in self._systems else "GP"
        self._sets = self._signal_sets(signals)

    def _signal_sets(self, signals: tuple[tuple[str, str], ...]) -> list[tuple[str, str, dict[str, int], bool]]:
        """Talker, signal id, channel by system letter, and whether it is the system's first, of each set of GSV."""
        places: dict[str, list[str]] = {}
        for letter, signal_id in signals:
            places.setdefault(letter, []).append(signal_id)
        sets = []
        for letter in self._systems:
            for i, signal_id in enumerate(places[letter] if self._modern else places[letter][:1]):
                channels = {letter: i}
                # Augmentation satellites stand with the GPS ones, as the standard has it.
                if letter == "G" and signal_id in places.get("S", ()):
                    channels["S"] = places["S"].index(signal_id)
                sets.append((TALKER[letter], f",{signal_id}" if self._modern else "", channels, i == 0))
        return sets

    def epoch(self, told: Told, kinds: tuple[str, ...], *, text: str = "") -> list[str]:
        """The sentences of an epoch, in the order of ``kinds``; ``text`` in a TXT."""
        out: list[str] = []
        for kind in kinds:
            if kind == "GSV":
                out += self._gsv(told)
            elif kind == "GSA":
                out += self._gsa(told)
            elif kind == "TXT":
                if text:
                    out.append(sentence(f"{self._talker}TXT,01,01,01,{text}"))
            else:
                out.append(sentence(self._talker + kind + "," + getattr(self, f"_{kind.lower()}")(told)))
        return out

    def _place(self, told: Told) -> str:
        if not told.quality:
            return ",,,"
        latitude = _minutes(abs(told.latitude_deg), 2, self._decimals)
        longitude = _minutes(abs(told.longitude_deg), 3, self._decimals)
        south, west = "S" if told.latitude_deg < 0 else "N", "W" if told.longitude_deg < 0 else "E"
        return f"{latitude},{south},{longitude},{west}"

    def _heights(self, told: Told) -> tuple[str, str]:
        if not told.quality:
            return "", ""
        if self._decimals >= PRECISE_DECIMALS:
            return f"{told.altitude_m:.4f}", f"{told.separation_m:.3f}"
        return f"{told.altitude_m:.1f}", f"{told.separation_m:.1f}"

    def _gga(self, told: Told) -> str:
        altitude, separation = self._heights(told)
        head = f"{told.clock},{self._place(told)},{told.quality},{told.used:02d},{_dop(told.hdop)}"
        return f"{head},{altitude},M,{separation},M,{_corrections(told)}"

    def _gns(self, told: Told) -> str:
        using = {s.letter for s in told.satellites if s.used}
        systems = "GREC" + ("J" if "J" in self._systems else "") if self._modern else "GR"
        letters = "".join(MODE[told.quality] if letter in using else "N" for letter in systems)
        altitude, separation = self._heights(told)
        head = f"{told.clock},{self._place(told)},{letters},{told.used:02d},{_dop(told.hdop)}"
        return f"{head},{altitude},{separation},{_corrections(told)}" + (",V" if self._modern else "")

    def _rmc(self, told: Told) -> str:
        status = "A" if told.quality else "V"
        motion = f"{told.speed_mps * KNOTS:.3f},{_course(told)}" if told.quality else ","
        date = "" if told.date is None else f"{told.date[0]:02d}{told.date[1]:02d}{told.date[2] % 100:02d}"
        tail = f",,,{MODE[told.quality]}" + (",V" if self._modern else "")
        return f"{told.clock},{status},{self._place(told)},{motion},{date}{tail}"

    def _gll(self, told: Told) -> str:
        return f"{self._place(told)},{told.clock},{'A' if told.quality else 'V'},{MODE[told.quality]}"

    def _vtg(self, told: Told) -> str:
        if not told.quality:
            return ",T,,M,,N,,K,N"
        return f"{_course(told)},T,,M,{told.speed_mps * KNOTS:.3f},N,{told.speed_mps * 3.6:.3f},K,{MODE[told.quality]}"

    def _gst(self, told: Told) -> str:
        if not told.quality or not math.isfinite(told.hdop):
            return f"{told.clock},,,,,,,"
        east, north, up = told.sigma_m
        ranging = math.hypot(east, north) / told.hdop
        return f"{told.clock},{ranging:.3f},,,,{north:.3f},{east:.3f},{up:.3f}"

    def _zda(self, told: Told) -> str:
        if told.date is None:
            return ",,,,,"
        day, month, year = told.date
        return f"{told.clock},{day:02d},{month:02d},{year:04d},00,00"

    def _gsa(self, told: Told) -> list[str]:
        fix = 3 if told.quality else 1
        dops = f"{_dop(told.pdop)},{_dop(told.hdop)},{_dop(told.vdop)}"
        out = []
        for letter in self._systems:
            numbers = [f"{s.number:02d}" for s in told.satellites if s.used and s.letter == letter]
            tail = f",{SYSTEM_ID[letter]}" if self._modern else ""
            groups = (numbers[i : i + SLOTS] for i in range(0, max(len(numbers), 1), SLOTS))
            out += [sentence(f"{self._talker}GSA,A,{fix},{_slots(group)},{dops}{tail}") for group in groups]
        return out

    def _gsv(self, told: Told) -> list[str]:
        out: list[str] = []
        for talker, tail, channels, first in self._sets:
            groups = [
                _group(s, level)
                for s in told.satellites
                if s.letter in channels
                # Untracked satellites stand in the first signal's set only.
                and ((level := s.levels[channels[s.letter]]) or (first and s.elevation is not None))
            ]
            if not groups and not first:
                continue
            total = max(1, -(-len(groups) // GROUPS))
            for part in range(total):
                shown = "".join(groups[GROUPS * part : GROUPS * (part + 1)])
                out.append(sentence(f"{talker}GSV,{total},{part + 1},{len(groups):02d}{shown}{tail}"))
        return out


def _group(satellite: Listed, level: int) -> str:
    strength = f"{level:02d}" if level else ""
    if satellite.elevation is None:
        return f",{satellite.number:02d},,,{strength}"
    return f",{satellite.number:02d},{satellite.elevation:02d},{satellite.azimuth:03d},{strength}"


def _minutes(angle_deg: float, width: int, decimals: int) -> str:
    """``ddmm.mmmm``, rounded once, so that 59.99999 minutes become the next degree."""
    units = round(angle_deg * 60.0 * 10**decimals)
    minutes, fraction = divmod(units, 10**decimals)
    degrees, minutes = divmod(minutes, 60)
    return f"{degrees:0{width}d}{minutes:02d}.{fraction:0{decimals}d}"


def _corrections(told: Told) -> str:
    return "," if math.isnan(told.age_s) else f"{told.age_s:.1f},{told.station:04d}"


def _dop(value: float) -> str:
    return f"{min(value, 99.99):.2f}"


def _course(told: Told) -> str:
    return f"{told.course_deg:.2f}" if told.speed_mps > 0.2 else ""


def _slots(numbers: list[str]) -> str:
    return ",".join(numbers + [""] * (SLOTS - len(numbers)))
