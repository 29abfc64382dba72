"""Index of a log: which time lies where, from a look at every 128 kB.

One pass over the bytes without decoding them, which costs some per cent of a check. Between two looks, time is taken
to run evenly; who needs the exact epoch goes on from there (``epoch_starts``).
"""

from __future__ import annotations

import contextlib
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.errors import SourceError
from gnssmon.replay.epoch_starts import EpochStart, EpochStarts
from gnssmon.sources.source import Source

STRIDE_BYTES = 131_072
"""Between two looks: a minute of a receiver that sends 2 kB a second."""

LOOK_BYTES = 4096
"""Read at each look: an epoch of 35 sentences and the start of the next fit."""


@dataclass(frozen=True, slots=True)
class Index:
    """Looks at a log, in its order. Arrays of shape (n,); n is 0 for a log without a single time."""

    offset: npt.NDArray[np.int64]
    """Of an epoch's first byte."""
    axis_ms: npt.NDArray[np.int64]
    """That epoch's instant (see ``EpochBatch.axis_ms``); ascending but where the receiver's own time steps back."""
    size: int
    """Bytes of the log, unpacked."""
    utc_offset_ms: int | None
    """Add to ``axis_ms`` to get UTC since 1970, ms; None: the log tells no date."""

    def time_at(self, share: float) -> int | None:
        """The instant (ms) at a share, 0 to 1, of the log's bytes; None in a log without times."""
        if not len(self.offset):
            return None
        return round(float(np.interp(share * self.size, self.offset, self.axis_ms)))

    def share_at(self, axis_ms: int) -> float | None:
        """The share, 0 to 1, of the log's bytes that lies before an instant; None in a log without times."""
        if not len(self.offset) or not self.size:
            return None
        forward = np.maximum.accumulate(self.axis_ms)
        return float(np.interp(axis_ms, forward, self.offset)) / self.size


def build_index(source: Source) -> Index:
    """Look through a log, and close it. Of a damaged one the part before the damage is indexed; playing it tells."""
    starts = EpochStarts()
    rows: list[EpochStart] = []
    ahead = last = b""
    base = look_at = 0
    with contextlib.suppress(SourceError), contextlib.closing(source):
        for chunk in source.chunks():
            data = ahead + chunk.data
            begin, base = base - len(ahead), base + len(chunk.data)
            while look_at + LOOK_BYTES <= base:
                rows += _look(starts, look_at, data[look_at - begin :][:LOOK_BYTES])[:1]
                look_at += STRIDE_BYTES
            ahead = data[max(0, look_at - begin) :]
            last = (last + chunk.data[-LOOK_BYTES:])[-LOOK_BYTES:]
    rows += _look(starts, base - len(last), last + b"\n")[-1:]
    offset = np.array([row.offset for row in rows], dtype=np.int64)
    axis_ms = np.array([row.axis_ms for row in rows], dtype=np.int64)
    return Index(offset, axis_ms, base, starts.utc_offset_ms)


def _look(starts: EpochStarts, offset: int, piece: bytes) -> list[EpochStart]:
    """The epochs that start in a piece; its first sentences may belong to one that started before (not at offset 0)."""
    starts.skip(offset)
    found = starts.feed(piece)
    return (found[1:] or found) if offset else found
