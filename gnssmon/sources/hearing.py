"""What do these bytes look like? Sentences, something else, or a line read at the wrong rate.

**Odds of a wrong call.** A port counts as speaking NMEA after ``NEEDED`` sentences with a good checksum. In random
bytes, a start character, five letters of an address and a comma, printable bytes up to a star, and the right two of
65 536 possible pairs behind it meet at one position in about 10^14; two in the 10^5 bytes that a search hears, in one
search of about 10^18. A line read at a wrong rate is not random, but cannot do better than to give text with random
checksums: (1/256)^2, one in 65 536, were every wrong byte pattern a well-formed sentence. (Own arithmetic, tested by
reading a model of a line at every wrong rate.)
"""

from __future__ import annotations

import functools
import operator
import re
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np

from gnssmon.chunks import Chunk
from gnssmon.nmea.framing import Framer

Content = Literal["nmea", "binary", "text", "garbage", "silent"]
Framing = Literal["8N1", "7E1"]
"""8N2 is read as 8N1: the second stop bit looks like a pause."""

NEEDED = 2
"""Sentences with a good checksum; see the odds above."""

MOST_BYTES = 65536
"""Judged at once, the latest: 0.7 s of the fastest line."""

JUDGED_BYTES = 64
"""Fewer bytes show nothing but that something comes."""

READABLE_SHARE = 0.9
"""Of text. At a wrong rate a third of all bytes is printable, like 98 of 256 random ones."""

PARITY_SHARE = 0.98
"""Bytes whose eight bits have even parity, on a line with 7 bits and a parity bit; half of them on any other."""

SPOILED_S = 1.5
"""A receiver at 1 Hz has sent a sentence by then, unless the rate changed."""

MOST_SPOILED = 4096
"""Bytes since the last good sentence that are judged."""

_CHECKSUMMED = re.compile(rb"\$([A-Z][0-9A-Z]{2,7},[ -~]{1,1000}?)\*([0-9A-Fa-f]{2})")

_READABLE = np.zeros(256, dtype=bool)
_READABLE[[9, 10, 13, *range(32, 127)]] = True
_EVEN = np.array([value.bit_count() % 2 == 0 for value in range(256)])


@dataclass(frozen=True, slots=True)
class Hearing:
    """What was heard on a line at one rate."""

    content: Content
    bytes: int = 0
    sentences: int = 0
    """With a good checksum."""
    framing: Framing = "8N1"
    what: str = ""
    """For people, where it is not NMEA: ``RTCM 3 messages``."""


def judge(data: bytes) -> Hearing:
    """Say what ``data``, heard on one line at one rate, looks like."""
    data = data[-MOST_BYTES:]
    count = len(data)
    if not count:
        return Hearing("silent", what="nothing")
    if (good := _sentences(data)) >= NEEDED:
        return Hearing("nmea", count, good)
    values = np.frombuffer(data, dtype=np.uint8)
    if count >= JUDGED_BYTES and float(_EVEN[values].mean()) >= PARITY_SHARE and bool((values & 0x80).any()):
        seven = (values & 0x7F).astype(np.uint8).tobytes()
        if (good_7 := _sentences(seven)) >= NEEDED:
            return Hearing("nmea", count, good_7, "7E1")
    for name, frames in PROTOCOLS:
        if frames(data) >= NEEDED:
            return Hearing("binary", count, good, what=name)
    if float(_READABLE[values].mean()) >= READABLE_SHARE:
        return Hearing("text", count, good, what="text, but no NMEA sentence with a good checksum")
    return Hearing("garbage", count, good, what="bytes that make no sense at this rate, or an unknown binary protocol")


class Spoiling:
    """Notices that a line which made sense does not any more."""

    def __init__(self) -> None:
        self._since_good = b""
        self._good_at_s: float | None = None

    def feed(self, data: bytes, now_s: float) -> bool:
        """Take in what came until ``now_s`` (steady); True: for SPOILED_S now nothing but garbage.

        Never before the first good sentence: a line that made no sense from the start was asked for as it is.
        """
        self._since_good += data
        for match in reversed(list(_CHECKSUMMED.finditer(self._since_good))):
            if functools.reduce(operator.xor, match[1]) == int(match[2], 16):
                self._since_good = self._since_good[match.end() :]
                self._good_at_s = now_s
                break
        self._since_good = self._since_good[-MOST_SPOILED:]
        if self._good_at_s is None or now_s - self._good_at_s < SPOILED_S or len(self._since_good) < JUDGED_BYTES:
            return False
        return judge(self._since_good).content == "garbage"


def _sentences(data: bytes) -> int:
    framer = Framer()
    framer.feed(Chunk(data))
    return framer.tally.sentences - framer.tally.unverified


def _rtcm3(data: bytes) -> int:
    """RTCM 10403 frames: D3, six reserved bits, ten of length, and a CRC-24Q over all of it."""
    found = at = 0
    while (at := data.find(b"\xd3", at)) >= 0 and at + 6 <= len(data):
        size = int.from_bytes(data[at + 1 : at + 3], "big")
        end = at + 3 + size
        if (
            size <= 1023
            and end + 3 <= len(data)
            and _crc24q(data[at:end]) == int.from_bytes(data[end : end + 3], "big")
        ):
            found += 1
            at = end + 3
        else:
            at += 1
    return found


def _crc24q(data: bytes) -> int:
    crc = 0
    for byte in data:
        crc ^= byte << 16
        for _ in range(8):
            crc = (crc << 1) ^ (0x1864CFB if crc & 0x800000 else 0)
    return crc & 0xFFFFFF


def _fletcher8(data: bytes) -> int:
    """Frames with sync bytes B5 62, class, id, little-endian length, and an 8-bit Fletcher checksum (RFC 1145)."""
    found = at = 0
    while (at := data.find(b"\xb5\x62", at)) >= 0 and at + 8 <= len(data):
        end = at + 6 + int.from_bytes(data[at + 4 : at + 6], "little")
        a = b = 0
        for byte in data[at + 2 : end]:
            a = (a + byte) & 0xFF
            b = (b + a) & 0xFF
        if data[end : end + 2] == bytes((a, b)):
            found += 1
            at = end + 2
        else:
            at += 2
    return found


def _occurs(sync: bytes) -> Callable[[bytes], int]:
    # Three bytes and more by chance: less than one in 10^7 positions; two bytes need a checksum instead.
    return lambda data: data.count(sync)


PROTOCOLS: tuple[tuple[str, Callable[[bytes], int]], ...] = (
    ("RTCM 3 messages", _rtcm3),
    ("a maker's binary messages with sync bytes B5 62", _fletcher8),
    ("a maker's binary messages with sync bytes AA 44 12", _occurs(b"\xaa\x44\x12")),
    ("a maker's binary messages with sync bytes A0 A2 00", _occurs(b"\xa0\xa2\x00")),
    ("a maker's binary messages with sync bytes A0 A1 00", _occurs(b"\xa0\xa1\x00")),
)
"""Binary protocols that receivers send, and how many of their messages some bytes hold; from memory, no source, but
for RTCM 10403."""
