"""What may stand before and behind a sentence on its line: TAG blocks, host times, words.

Strategy. Between most sentences there is a line end and nothing else; those are passed over in one comparison. Only
where more bytes stand, the text nearest to the sentence is read with patterns. What they recognise is kept as the
host's stamp of the sentence and is not counted as foreign bytes; everything else between sentences is.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from datetime import UTC, datetime

import numpy as np
import numpy.typing as npt

NEAR = 120
"""Bytes before and behind a sentence that are read: a TAG block holds 80 at most."""

MILLISECONDS = 1e11
"""Unix times above this are milliseconds: as seconds they would lie beyond the year 5000."""

TAG = re.compile(rb"\\([^\\\r\n$!]{0,100})\\\Z")
TAG_TIME = re.compile(rb"(?:\A|,)c:(\d{1,17})(?=,|\*|\Z)")
ISO = re.compile(rb"\[?(\d{4}-\d\d-\d\d[T ]\d\d:\d\d:\d\d(?:[.,]\d{1,9})?)(Z|[+-]\d\d:?\d\d)?\]?[\s,;:|>]*\Z")
UNIX = re.compile(rb"(?<!\d)(\d{9,10}(?:\.\d{1,9})?|\d{13}(?:\.\d{1,6})?)[\s,;:|>]*\Z")
WORD = re.compile(rb"[A-Za-z][A-Za-z0-9_-]{0,15}[\s,;:|>]+\Z")
BEHIND = re.compile(rb"\A[\s,;|]*(\d{9,10}(?:\.\d{1,9})?|\d{13}(?:\.\d{1,6})?)[ \t]*(?=[\r\n]|\Z)")


@dataclass(frozen=True, slots=True)
class Surroundings:
    """Where accepted sentences begin and end: offsets of start characters, and past the checksums; shape (n,)."""

    begin: npt.NDArray[np.int64]
    tail: npt.NDArray[np.int64]


def read_surroundings(
    data: bytes, sentences: Surroundings, buffer: npt.NDArray[np.uint8]
) -> tuple[npt.NDArray[np.float64], int]:
    """Stamps of the sentences (s since 1970 UTC, NaN none) and how many bytes around them were recognised."""
    count = len(sentences.begin)
    stamped_s = np.full(count, np.nan)
    if not count:
        return stamped_s, 0
    before = np.append(0, sentences.tail[:-1])
    first = buffer[np.maximum(sentences.begin - 1, 0)]
    # Directly behind a line end, or at the block's start, there is no prefix.
    prefixed = np.flatnonzero((sentences.begin > before) & (first != 0x0A) & (first != 0x0D))
    after = buffer[np.minimum(sentences.tail, len(buffer) - 1)]
    followed = np.flatnonzero((sentences.tail < len(buffer)) & (after != 0x0A) & (after != 0x0D))
    recognised = 0
    for i in prefixed.tolist():
        begin = int(sentences.begin[i])
        text = data[max(int(before[i]), begin - NEAR) : begin]
        text = text[max(text.rfind(b"\n"), text.rfind(b"\r")) + 1 :]
        if b"$" in text or b"!" in text:
            continue  # a torn sentence, which is counted as one
        stamp_s, used = _before(text)
        recognised += used
        if stamp_s is not None:
            stamped_s[i] = stamp_s
    for i in followed.tolist():
        tail = int(sentences.tail[i])
        match = BEHIND.match(data[tail : tail + NEAR])
        if match:
            recognised += match.end()
            stamped_s[i] = _unix(match[1])
    return stamped_s, recognised


def _before(text: bytes) -> tuple[float | None, int]:
    """Stamp and number of bytes recognised at the end of ``text``."""
    whole = len(text)
    stamp_s: float | None = None
    if match := TAG.search(text):
        text = text[: match.start()]
        stamp_s = _tag_time(match[1])
        while match := TAG.search(text):
            text = text[: match.start()]
    while True:
        if match := ISO.search(text):
            stamp_s = stamp_s if stamp_s is not None else _iso(match[1], match[2])
        elif match := UNIX.search(text):
            stamp_s = stamp_s if stamp_s is not None else _unix(match[1])
        elif not (match := WORD.search(text)):
            return stamp_s, whole - len(text)
        text = text[: match.start()]


def _tag_time(block: bytes) -> float | None:
    """The ``c:`` time of a TAG block; None without one, or where the block's own checksum is wrong."""
    body, star, digits = block.partition(b"*")
    if star:
        total = 0
        for byte in body:
            total ^= byte
        if digits.upper() != b"%02X" % total:
            return None
    match = TAG_TIME.search(body)
    return _unix(match[1]) if match else None


def _unix(digits: bytes) -> float:
    value = float(digits)
    return value / 1000.0 if value > MILLISECONDS else value


def _iso(text: bytes, zone: bytes | None) -> float | None:
    plain = text.decode("ascii").replace(",", ".")
    moment, _, fraction = plain.partition(".")
    try:
        when = datetime.fromisoformat(moment + (zone or b"Z").decode("ascii").replace("Z", "+00:00"))
    except ValueError:
        return None
    return when.astimezone(UTC).timestamp() + (float("0." + fraction) if fraction else 0.0)
