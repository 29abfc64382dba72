"""Addresses of sentences, as numbers: what talks, and which sentence it is, for a whole column at once.

An address of up to eight letters is a number of eight bits a letter, the last letter lowest; of a longer one, as some
makers have, the number holds the last eight letters.
"""

from __future__ import annotations

from collections import Counter

import numpy as np
import numpy.typing as npt

from gnssmon.nmea.numbers import records

Offsets = npt.NDArray[np.int64]
Numbers = npt.NDArray[np.uint64]

SHORTEST, USUAL, LONGEST = 3, 5, 16
"""Letters and digits between the start character and the first comma; makers' own addresses are up to 14 long (common
practice, no source)."""

IN_NUMBER = 8
"""Letters that an address as a number holds."""

USUAL_KINDS = 100
"""Different addresses of an ordinary stream and more."""

_BYTE = np.uint64(8)
_LETTER = np.zeros(256, dtype=bool)
_LETTER[[*range(ord("0"), ord("9") + 1), *range(ord("A"), ord("Z") + 1)]] = True


def can_begin(buffer: npt.NDArray[np.uint8], start: Offsets, length: Offsets) -> npt.NDArray[np.bool_]:
    """Whether an address may stand at each offset, by its length and first letter."""
    may: npt.NDArray[np.bool_] = (length >= SHORTEST) & (length <= LONGEST) & _LETTER[buffer[start]]
    return may


def read_addresses(
    buffer: npt.NDArray[np.uint8], start: Offsets, length: Offsets
) -> tuple[npt.NDArray[np.bool_], Numbers]:
    """Which of the places that ``can_begin`` one hold an address, letters and digits only, and its number."""
    proper = np.ones(len(start), dtype=bool)
    number = np.zeros(len(start), dtype=np.uint64)
    longest, shortest = int(length.max(initial=0)), int(length.min(initial=LONGEST))
    for letter in records(buffer, start, shortest) if longest else ():
        proper &= _LETTER[letter]
        number = (number << _BYTE) | letter
    for i in range(shortest, longest):
        inside = i < length
        letter = buffer[np.where(inside, start + i, 0)]
        proper &= _LETTER[letter] | ~inside
        number = np.where(inside, (number << _BYTE) | letter, number)
    return proper, number


def formatters(number: Numbers) -> npt.NDArray[np.int64]:
    """The last three letters of the addresses that have a talker before them; -1 of all others, makers' own ones."""
    talker = number >> np.uint64(24)
    formatter = (number & np.uint64(0xFFFFFF)).astype(np.int64)
    makers = (talker >> _BYTE == ord("P")) & (talker != int.from_bytes(b"PQ", "big"))
    formatter[(talker >> np.uint64(16) > 0) | (talker < 256) | makers] = -1
    return formatter


def formatter_number(formatter: str) -> int:
    """One formatter's number among those of ``formatters``."""
    return int.from_bytes(formatter.encode("ascii"), "big")


def talkers(number: Numbers) -> npt.NDArray[np.bytes_]:
    """Two bytes each, of addresses that have a formatter."""
    return (number >> np.uint64(24)).astype(">u2").view("S2")


def makers_own(address: str) -> bool:
    """``$P…`` is a maker's own sentence, without a talker; PQ before a formatter is a talker all the same (QZSS)."""
    return address.startswith("P") and not (address.startswith("PQ") and len(address) == USUAL)


def count_addresses(buffer: npt.NDArray[np.uint8], start: Offsets, length: Offsets, number: Numbers) -> Counter[str]:
    """How often each address stands there."""
    counts: Counter[str] = Counter()
    long = length > IN_NUMBER
    if long.any():
        for at, size in zip(start[long].tolist(), length[long].tolist(), strict=True):
            counts[buffer[at : at + size].tobytes().decode("ascii")] += 1
        number = number[~long]
    # Few different ones come often: taking them out one by one is quicker than sorting. Many different ones are noise.
    while len(number) and len(counts) < USUAL_KINDS:
        same = number == number[0]
        counts[_text(int(number[0]))] += int(np.count_nonzero(same))
        number = number[~same]
    for value, times in zip(*np.unique(number, return_counts=True), strict=True):
        counts[_text(int(value))] += int(times)
    return counts


def _text(number: int) -> str:
    return number.to_bytes(IN_NUMBER, "big").lstrip(b"\0").decode("ascii")
