"""Chunks → epochs: framing, decoding and assembly in a row. The one path of live port, replay and check."""

from __future__ import annotations

import math
from dataclasses import dataclass

from gnssmon.chunks import Chunk
from gnssmon.epochs.assembler import Assembler, Extent
from gnssmon.epochs.batch import EpochBatch
from gnssmon.nmea.columns import Columns, Sentences, Tally
from gnssmon.nmea.decoding import decode
from gnssmon.nmea.framing import Framer


@dataclass(frozen=True, slots=True)
class Block:
    """All that one chunk has brought, for those who look before an epoch is complete."""

    sentences: Sentences
    columns: Columns
    closed: EpochBatch
    """Epochs complete with this chunk."""
    opened: EpochBatch
    """Epochs not complete yet, at most two, as far as known. Provisional: statistics never see them."""
    received_s: float
    """Arrival of the chunk if it had any bytes, s since 1970 UTC; else NaN."""


class Pipeline:
    """One stream from its start: ``feed`` gives closed epochs, ``block`` shows what the last chunk brought besides."""

    def __init__(self) -> None:
        self._framer = Framer()
        self._assembler = Assembler()
        self.block: Block | None = None
        """Of the last ``feed`` or ``finish``."""

    @property
    def tally(self) -> Tally:
        """What the framer has seen since the start."""
        return self._framer.tally

    @property
    def extent(self) -> Extent:
        """First and last instant of the stream and the offset from its axis to UTC."""
        return self._assembler.extent

    @property
    def first_utc_ms(self) -> int | None:
        """UTC of the first epoch, ms since 1970; None while no date is known."""
        return self.extent.first_utc_ms

    @property
    def last_utc_ms(self) -> int | None:
        """UTC of the latest epoch, ms since 1970; None while no date is known."""
        return self.extent.last_utc_ms

    @property
    def utc_offset_ms(self) -> int | None:
        """Add to an axis time to get UTC, ms; None while no date is known."""
        return self.extent.utc_offset_ms

    def feed(self, chunk: Chunk) -> EpochBatch:
        """Take in the next bytes and return the epochs that are complete with them, perhaps none."""
        sentences = self._framer.feed(chunk)
        columns = decode(sentences)
        closed = self._assembler.feed(columns)
        self._show(sentences, columns, closed, chunk.received_s if chunk.data else math.nan)
        return closed

    def finish(self) -> EpochBatch:
        """Take in the end of the stream and return the epochs that were still open."""
        sentences = self._framer.finish()
        columns = decode(sentences)
        closed = self._assembler.finish(columns)
        self._show(sentences, columns, closed, math.nan)
        return closed

    def _show(self, sentences: Sentences, columns: Columns, closed: EpochBatch, received_s: float) -> None:
        self.block = Block(sentences, columns, closed, self._assembler.opened, received_s)
