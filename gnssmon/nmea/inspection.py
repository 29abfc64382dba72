"""One sentence → named fields with units, for people.

Known sentences are named by our own table; the long tail by pynmea2's. Whatever comes, something is shown: a field
without a name is numbered.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

from gnssmon.nmea.addresses import makers_own
from gnssmon.nmea.sentences import SENTENCES
from gnssmon.printable import printable

MOST_FIELDS = 100
"""Fields shown of one sentence."""

LONGEST_FIELD = 100
"""Characters shown of one field."""

ESCAPE = re.compile(rb"\^([0-9A-Fa-f]{2})")

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
    """Take a sentence apart: what stands between start character and ``*``, or the whole line. Never raises."""
    body = line.strip(b"\r\n").removeprefix(b"$").removeprefix(b"!").partition(b"*")[0]
    parts = [
        printable(_unescaped(part), LONGEST_FIELD) for part in body.split(b",", MOST_FIELDS + 1)[: MOST_FIELDS + 1]
    ]
    address, texts = parts[0], parts[1:]
    formatter = address[2:] if len(address) == 5 and not makers_own(address) else ""
    if formatter == "GSV":
        named = _satellites(texts)
    elif formatter == "GSA":
        named = _used(texts)
    elif formatter in SENTENCES:
        named = _by_table(formatter, texts)
    else:
        return _by_pynmea2(address, texts)
    return Fields(address, MEANINGS[formatter], named)


def _unescaped(field: bytes) -> bytes:
    """``^2C`` stands for a comma: two hex digits of a character that may not stand in a field as it is."""
    return ESCAPE.sub(lambda match: bytes([int(match[1], 16)]), field)


def _by_table(formatter: str, texts: list[str]) -> tuple[NamedField, ...]:
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


def _satellites(texts: list[str]) -> tuple[NamedField, ...]:
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


def _used(texts: list[str]) -> tuple[NamedField, ...]:
    # Twelve places unless there are more or fewer fields than twelve places, three DOPs and two identifiers explain.
    pointed = [i for i, text in enumerate(texts) if "." in text]
    behind = len(texts) - 17 if 17 <= len(texts) <= 18 or not pointed else len(texts) - 1 - pointed[-1]
    places = len(texts) - 5 - min(max(behind, 0), 2)
    names = [("selection", ""), ("fix mode", ""), *((f"satellite {i}", "") for i in range(1, places + 1))]
    return _zip([*names, ("PDOP", ""), ("HDOP", ""), ("VDOP", ""), ("system id", ""), ("signal id", "")], texts)


def _by_pynmea2(address: str, texts: list[str]) -> Fields:
    import pynmea2

    try:
        known = type(pynmea2.parse(",".join([address, *texts])))
    except Exception:  # whatever pynmea2 stumbles over in a hostile sentence, its fields are shown without names
        return Fields(address, "", _zip([], texts))
    names = [(str(field[0]), "") for field in known.fields]
    # To pynmea2 the first field of a maker's own sentence is what follows the maker's three letters.
    maker = issubclass(known, pynmea2.ProprietarySentence)
    own_words = (known.__dict__.get("__doc__") or "").strip().partition("\n")[0]
    return Fields(address, printable(own_words, LONGEST_FIELD), _zip(names[1:] if maker else names, texts))


def _zip(names: list[tuple[str, str]], texts: list[str]) -> tuple[NamedField, ...]:
    padded = [*names, *((f"field {i}", "") for i in range(len(names) + 1, len(texts) + 1))]
    return tuple(NamedField(name, text, unit) for (name, unit), text in zip(padded, texts, strict=False))
