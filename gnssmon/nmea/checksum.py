"""Checksums of many sentences at once: the exclusive or of all bytes between start character and ``*``.

Strategy. ``bitwise_xor.reduceat`` folds the bytes from each index to the next; with starts and ends interleaved every
other result is a sentence's sum.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

_HEX = np.full(256, -1, dtype=np.int16)
for _digit, _byte in enumerate(b"0123456789ABCDEF"):
    _HEX[_byte] = _digit
for _digit, _byte in enumerate(b"abcdef", start=10):
    _HEX[_byte] = _digit


def hex_value(buffer: npt.NDArray[np.uint8], at: npt.NDArray[np.int64]) -> npt.NDArray[np.int16]:
    """Value of the two hex digits at each offset, shape as ``at``; -1 where there are not two."""
    if not len(at):
        return np.empty(0, dtype=np.int16)
    last = len(buffer) - 1
    high, low = _HEX[buffer[np.minimum(at, last)]], _HEX[buffer[np.minimum(at + 1, last)]]
    return np.where((high < 0) | (low < 0) | (at + 1 > last), np.int16(-1), high * np.int16(16) + low).astype(np.int16)


def xor_between(
    buffer: npt.NDArray[np.uint8], start: npt.NDArray[np.int64], end: npt.NDArray[np.int64]
) -> npt.NDArray[np.uint8]:
    """XOR over ``buffer[start:end]`` for each pair; starts and ends in rising order, none empty, each end inside."""
    if not len(start):
        return np.empty(0, dtype=np.uint8)
    edges = np.empty(2 * len(start), dtype=np.int64)
    edges[0::2], edges[1::2] = start, end
    folded: npt.NDArray[np.uint8] = np.bitwise_xor.reduceat(buffer, edges)[0::2]
    return folded
