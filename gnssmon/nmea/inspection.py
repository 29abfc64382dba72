"""One sentence → named fields with units, for people.

Known sentences are named by our own table; the long tail by pynmea2's. Whatever comes, something is shown: a field
without a name is numbered.
"""

from __future__ import annotations

from dataclasses import dataclass

from gnssmon.nmea.sentences import SENTENCES
from gnssmon.printable import printable

MOST_FIELDS = 100
"""Fields shown of one sentence."""

MEANINGS = {
    "GGA": "fix: position, quality, satellites, height",
    "GNS": "fix of several systems",
    "RMC": "recommended minimum: position, speed, course, date",
    "GLL": "position, latitude and longitude",
    "GSA": "satellites used and dilution of precision",
    "GSV": "satellites in view with levels",
    "GST": "the receiver's own error statistics",
    "VTG": "course and speed over ground",
    "ZDA": "time and date",
    "GBS": "satellite fault detection",
    "GRS": "range residuals",
    "HDT": "heading, true",
    "THS": "heading, true, with status",
    "DTM": "datum of the positions",
    "TXT": "text message",
}


@dataclass(frozen=True, slots=True)
class NamedField:
    name: str
    text: str
    """As received, made printable; empty where the field is empty."""
    unit: str = ""


@dataclass(frozen=True, slots=True)
class Fields:
    """A sentence taken apart."""

    address: str
    meaning: str
    """Empty where the sentence is not known."""
    fields: tuple[NamedField, ...]


def inspect(line: bytes) -> Fields:
    """Take a sentence apart; ``line`` is everything between start character and ``*``. Never raises."""
    parts = [printable(part, 100) for part in line.split(b",")[: MOST_FIELDS + 1]]
    address, texts = parts[0], parts[1:]
    formatter = address[2:] if len(address) == 5 else ""
    if formatter == "GSV":
        named = _satellites(texts)
    elif formatter == "GSA":
        named = _used(texts)
    elif formatter in SENTENCES:
        named = _by_table(formatter, texts)
    else:
        named = _by_pynmea2(address, formatter, texts)
    return Fields(address, MEANINGS.get(formatter, ""), tuple(named))


def _by_table(formatter: str, texts: list[str]) -> list[NamedField]:
    names: list[tuple[str, str]] = []
    for field in SENTENCES[formatter]:
        label = _label(field.name) or "unit"
        names.append((label, "" if field.places == 2 or field.name == "utc_ms" else field.unit))
        if field.places == 2:
            names.append(("north or south" if field.name.startswith("lat") else "east or west", ""))
    return _zip(names, texts)


def _label(name: str) -> str:
    """``cn0_dbhz`` → ``cn0``: the unit stands in a place of its own."""
    for suffix in ("_ms", "_deg", "_m", "_s", "_dbhz", "_min", "_days", "_kmh", "_knots"):
        name = name.removesuffix(suffix)
    return name.replace("_", " ")


def _satellites(texts: list[str]) -> list[NamedField]:
    names = [("sentences", ""), ("sentence number", ""), ("satellites in view", "")]
    groups, left_over = divmod(max(0, len(texts) - 3), 4)
    for i in range(1, groups + 1):
        names += [
            (f"satellite {i}", ""),
            (f"elevation {i}", "deg"),
            (f"azimuth {i}", "deg"),
            (f"C/N0 {i}", "dB-Hz"),
        ]
    if left_over == 1:
        names.append(("signal id", ""))
    return _zip(names, texts)


def _used(texts: list[str]) -> list[NamedField]:
    names = [("selection", ""), ("fix mode", ""), *((f"satellite {i}", "") for i in range(1, 13))]
    names += [("PDOP", ""), ("HDOP", ""), ("VDOP", ""), ("system id", ""), ("signal id", "")]
    return _zip(names, texts)


def _by_pynmea2(address: str, formatter: str, texts: list[str]) -> list[NamedField]:
    import pynmea2

    names: list[tuple[str, str]] = []
    known = pynmea2.TalkerSentence.sentence_types.get(formatter)
    if known is not None:
        names = [(str(field[0]), "") for field in known.fields]
    return _zip(names, texts)


def _zip(names: list[tuple[str, str]], texts: list[str]) -> list[NamedField]:
    padded = [*names, *((f"field {i}", "") for i in range(len(names) + 1, len(texts) + 1))]
    return [NamedField(name, text, unit) for (name, unit), text in zip(padded, texts, strict=False)]
