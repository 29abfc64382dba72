"""Truth → sentences, in the dialect of an NMEA version.

Written by hand rather than by pynmea2, which takes many times longer: a day at 1 Hz is three million sentences. Tests
read them back with pynmea2.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import reduce
from operator import xor

KNOTS = 3600.0 / 1852.0
SYSTEM_ID = {"G": "1", "R": "2", "E": "3", "C": "4", "J": "5", "S": "1"}
TALKER = {"G": "GP", "R": "GL", "E": "GA", "C": "GB", "J": "GQ", "S": "GP"}
MODE = {0: "N", 1: "A", 2: "D", 4: "R", 5: "F"}
MOST_USED = 12
NAMEABLE = {"2.3": "GS", "3.01": "GRS", "4.0": "GRS", "4.11": "GRECJS"}
"""Systems that a version's numbering can name."""


@dataclass(frozen=True, slots=True)
class Listed:
    """One satellite of an epoch."""

    letter: str
    number: int
    """As sent: SBAS 33 to 64, GLONASS from 65 on."""
    elevation: int
    azimuth: int
    used: bool
    levels: tuple[int, ...]
    """By channel of its system; 0 not tracked."""


@dataclass(frozen=True, slots=True)
class Told:
    """One epoch as the receiver tells it."""

    clock: str
    """``hhmmss.ss``; empty while no time is known."""
    date: tuple[int, int, int]
    """Day, month, year."""
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
    satellites: tuple[Listed, ...]


def sentence(body: str) -> str:
    """The body with start character, checksum and line end."""
    return f"${body}*{reduce(xor, body.encode('ascii')):02X}\r\n"


class Writer:
    """Writes epochs in one dialect."""

    def __init__(self, version: str, *, minute_decimals: int, signals: dict[str, tuple[str, ...]]) -> None:
        """``signals``: signal ids of each system's channels, by letter."""
        self._modern = version == "4.11"
        self._nameable = NAMEABLE[version]
        self._decimals = minute_decimals
        self._signals = signals
        self._many = sum(letter in self._nameable for letter in signals if letter != "S") > 1
        self._talker = "GN" if self._many else "GP"

    def epoch(self, told: Told, kinds: tuple[str, ...], *, text: str = "") -> list[str]:
        """The sentences of an epoch, in the order of ``kinds``."""
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
                out.append(sentence(getattr(self, f"_{kind.lower()}")(told)))
        return out

    def _place(self, told: Told) -> str:
        if not told.quality:
            return ",,,"
        latitude = _minutes(abs(told.latitude_deg), 2, self._decimals)
        longitude = _minutes(abs(told.longitude_deg), 3, self._decimals)
        return (
            f"{latitude},{'S' if told.latitude_deg < 0 else 'N'},{longitude},{'W' if told.longitude_deg < 0 else 'E'}"
        )

    def _corrections(self, told: Told) -> str:
        return "," if math.isnan(told.age_s) else f"{told.age_s:.1f},{told.station:04d}"

    def _gga(self, told: Told) -> str:
        head = f"{self._talker}GGA,{told.clock},{self._place(told)},{told.quality},{told.used:02d}"
        if not told.quality:
            return f"{head},99.99,,,,,,"
        height = (
            f"{told.altitude_m:.4f},M,{told.separation_m:.3f},M"
            if self._decimals >= 6
            else (f"{told.altitude_m:.1f},M,{told.separation_m:.1f},M")
        )
        return f"{head},{_dop(told.hdop)},{height},{self._corrections(told)}"

    def _gns(self, told: Told) -> str:
        letters = "".join(
            MODE[told.quality] if any(s.letter == letter and s.used for s in told.satellites) else "N"
            for letter in ("GREC" if self._modern else "GR")
        )
        height = f"{told.altitude_m:.4f},{told.separation_m:.3f}" if told.quality else ","
        body = (
            f"{self._talker}GNS,{told.clock},{self._place(told)},{letters},{told.used:02d},{_dop(told.hdop)},{height}"
        )
        return f"{body},{self._corrections(told)}" + (",V" if self._modern else "")

    def _rmc(self, told: Told) -> str:
        day, month, year = told.date
        status = "A" if told.quality else "V"
        motion = f"{told.speed_mps * KNOTS:.3f},{_course(told)}" if told.quality else ","
        body = f"{self._talker}RMC,{told.clock},{status},{self._place(told)},{motion}"
        return f"{body},{day:02d}{month:02d}{year % 100:02d},,," + MODE[told.quality] + (",V" if self._modern else "")

    def _gll(self, told: Told) -> str:
        return f"{self._talker}GLL,{self._place(told)},{told.clock},{'A' if told.quality else 'V'},{MODE[told.quality]}"

    def _vtg(self, told: Told) -> str:
        if not told.quality:
            return f"{self._talker}VTG,,T,,M,,N,,K,N"
        knots = told.speed_mps * KNOTS
        return f"{self._talker}VTG,{_course(told)},T,,M,{knots:.3f},N,{told.speed_mps * 3.6:.3f},K,{MODE[told.quality]}"

    def _gst(self, told: Told) -> str:
        if not told.quality:
            return f"{self._talker}GST,{told.clock},,,,,,,"
        east, north, up = told.sigma_m
        return f"{self._talker}GST,{told.clock},{north * 1.5:.3f},,,,{north:.3f},{east:.3f},{up:.3f}"

    def _zda(self, told: Told) -> str:
        day, month, year = told.date
        return f"{self._talker}ZDA,{told.clock},{day:02d},{month:02d},{year:04d},00,00"

    def _gsa(self, told: Told) -> list[str]:
        fix = 3 if told.quality else 1
        dops = f"{_dop(told.pdop)},{_dop(told.hdop)},{_dop(told.vdop)}"
        out = []
        if not self._modern:
            numbers = [f"{s.number:02d}" for s in told.satellites if s.used and s.letter in self._nameable]
            groups = [numbers[i : i + MOST_USED] for i in range(0, max(len(numbers), 1), MOST_USED)]
            return [sentence(f"{self._talker}GSA,A,{fix},{_slots(group)},{dops}") for group in groups]
        for letter in self._signals:
            if letter == "S":
                continue
            # Augmentation satellites stand with the GPS ones, as the standard has it.
            numbers = [
                f"{s.number:02d}"
                for s in told.satellites
                if s.used and (s.letter == letter or (letter == "G" and s.letter == "S"))
            ]
            for i in range(0, max(len(numbers), 1), MOST_USED):
                group = numbers[i : i + MOST_USED]
                out.append(sentence(f"{self._talker}GSA,A,{fix},{_slots(group)},{dops},{SYSTEM_ID[letter]}"))
        return out

    def _gsv(self, told: Told) -> list[str]:
        out = []
        for letter, ids in self._signals.items():
            if letter not in self._nameable:
                continue
            listed = [s for s in told.satellites if s.letter == letter]
            for channel, signal_id in enumerate(ids if self._modern else ids[:1]):
                # Untracked satellites stand in the first signal's set only.
                shown = [s for s in listed if channel == 0 or s.levels[channel]]
                if not shown and channel:
                    continue
                out += self._set(TALKER[letter], shown, channel, f",{signal_id}" if self._modern else "")
        return out

    def _set(self, talker: str, shown: list[Listed], channel: int, tail: str) -> list[str]:
        total = max(1, -(-len(shown) // 4))
        out = []
        for part in range(total):
            groups = ",".join(
                f"{s.number:02d},{s.elevation:02d},{s.azimuth:03d},{s.levels[channel] or '':02}"
                if s.levels[channel]
                else f"{s.number:02d},{s.elevation:02d},{s.azimuth:03d},"
                for s in shown[4 * part : 4 * part + 4]
            )
            comma = "," if groups else ""
            out.append(sentence(f"{talker}GSV,{total},{part + 1},{len(shown):02d}{comma}{groups}{tail}"))
        return out


def _minutes(angle_deg: float, width: int, decimals: int) -> str:
    """``ddmm.mmmm``, rounded once, so that 59.99999 minutes become the next degree."""
    units = round(angle_deg * 60.0 * 10**decimals)
    minutes, fraction = divmod(units, 10**decimals)
    degrees, minutes = divmod(minutes, 60)
    return f"{degrees:0{width}d}{minutes:02d}.{fraction:0{decimals}d}"


def _dop(value: float) -> str:
    return f"{min(value, 99.99):.2f}"


def _course(told: Told) -> str:
    return f"{told.course_deg:.2f}" if told.speed_mps > 0.2 else ""


def _slots(numbers: list[str]) -> str:
    return ",".join(numbers + [""] * (MOST_USED - len(numbers)))
