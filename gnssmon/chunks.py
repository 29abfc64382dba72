"""Chunk: bytes, and when they came."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt


@dataclass(frozen=True, slots=True)
class Arrivals:
    """When the parts of a chunk came that was put together from smaller ones. Arrays of shape (n,), n at least 1."""

    offset: npt.NDArray[np.int64]
    """Of each part's first byte in the chunk; ascending, the first is 0. Two equal ones: the first part was empty."""
    received_s: npt.NDArray[np.float64]
    """Host time of arrival, seconds since 1970-01-01 UTC."""

    def at(self, offset: npt.NDArray[np.int64]) -> npt.NDArray[np.float64]:
        """When the bytes at these offsets came, s since 1970 UTC."""
        return self.received_s[np.searchsorted(self.offset, offset, side="right") - 1]


@dataclass(frozen=True, slots=True)
class Chunk:
    """A piece of a receiver's stream, cut anywhere."""

    data: bytes
    """The bytes as received; ``b""`` means: nothing came up to this time."""
    received_s: float = math.nan
    """Host time of arrival of the last byte, seconds since 1970-01-01 UTC; NaN where a log does not tell."""
    arrivals: Arrivals | None = None
    """Where parts came at different times; None: all came at ``received_s``."""

    def cut(self, at: int) -> tuple[Chunk, Chunk]:
        """Return the bytes before offset ``at`` and those from there on, each with its times of arrival."""
        if self.arrivals is None:
            return Chunk(self.data[:at], self.received_s), Chunk(self.data[at:], self.received_s)
        offset, received_s = self.arrivals.offset, self.arrivals.received_s
        # The part that holds the byte at the cut goes to both sides; parts that begin at or behind it to the second.
        begins = int(np.searchsorted(offset, at, side="left"))
        holds = min(begins, len(offset) - 1) if begins < len(offset) and offset[begins] == at else begins - 1
        head = Arrivals(offset[: max(1, begins)], received_s[: max(1, begins)])
        tail = Arrivals(np.maximum(offset[max(0, holds) :] - at, 0), received_s[max(0, holds) :])
        return (
            Chunk(self.data[:at], float(head.received_s[-1]), head),
            Chunk(self.data[at:], self.received_s, tail),
        )


def joined(chunks: Sequence[Chunk]) -> Chunk:
    """Return one chunk of all the bytes, that still knows when each part came. ``chunks`` holds at least one."""
    if len(chunks) == 1:
        return chunks[0]
    data = b"".join([chunk.data for chunk in chunks])
    received_s = chunks[-1].received_s
    if all(chunk.arrivals is None and math.isnan(chunk.received_s) for chunk in chunks):
        return Chunk(data)
    offsets, times = [], []
    base = 0
    for chunk in chunks:
        if chunk.arrivals is None:
            offsets.append(np.array([base], dtype=np.int64))
            times.append(np.array([chunk.received_s]))
        else:
            offsets.append(chunk.arrivals.offset + base)
            times.append(chunk.arrivals.received_s)
        base += len(chunk.data)
    return Chunk(data, received_s, Arrivals(np.concatenate(offsets), np.concatenate(times)))
