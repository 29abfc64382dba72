"""A binary message as corrections have it: the frame of RTCM 10403 version 3 around any content.

Preamble D3, six reserved bits, ten bits of length, content, CRC-24Q (polynomial 1864CFB).
"""

from __future__ import annotations

PREAMBLE = 0xD3
LONGEST = 1023
POLYNOMIAL = 0x1864CFB


def _row(value: int) -> int:
    value <<= 16
    for _ in range(8):
        value <<= 1
        if value & 0x1000000:
            value ^= POLYNOMIAL
    return value


_TABLE = tuple(_row(value) for value in range(256))


def crc24q(data: bytes) -> int:
    """Cyclic redundancy check of 24 bits, initial value 0."""
    crc = 0
    for byte in data:
        crc = ((crc << 8) & 0xFFFFFF) ^ _TABLE[(crc >> 16) ^ byte]
    return crc


def frame(content: bytes) -> bytes:
    """The message around ``content`` of at most LONGEST bytes."""
    head = bytes([PREAMBLE, len(content) >> 8, len(content) & 0xFF]) + content
    return head + crc24q(head).to_bytes(3, "big")
