"""What framing and decoding hand on: sentences found in a block, and their fields as columns.

Sentences are numbered over the whole stream (``sequence``, from 0, valid sentences only), so that the order among
formatters survives their being decoded one formatter at a time.
"""

from __future__ import annotations

from abc import abstractmethod
from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass, field, fields

import numpy as np
import numpy.typing as npt

Column = npt.NDArray[np.generic]


@dataclass(slots=True)
class Tally:
    """What a framer has seen since it began. Every byte is counted once: in a sentence or as something else."""

    bytes: int = 0
    sentences: int = 0
    """Accepted: framed, printable, with a good checksum or with none."""
    unverified: int = 0
    """Of the accepted ones, those without a checksum."""
    checksum_failures: int = 0
    malformed: int = 0
    """Began with an address like a sentence but cannot be one: cut short, over-long, unprintable byte inside."""
    non_nmea_bytes: int = 0
    """Bytes outside sentences, whole or not, their TAG blocks, host stamps and line ends: binary messages, noise, other
    text."""
    by_type: Counter[str] = field(default_factory=Counter)
    """Accepted sentences per formatter (``GGA``) or, for a maker's own sentence, its whole address (``PTNL``)."""
    talkers: Counter[str] = field(default_factory=Counter)
    failures_by_type: Counter[str] = field(default_factory=Counter)
    """Checksum failures per address as it stood there; at most a bounded number of different ones is kept."""


@dataclass(frozen=True, slots=True)
class Sentences:
    """Accepted sentences of one block, in stream order. All arrays have shape (n,)."""

    buffer: npt.NDArray[np.uint8]
    """The block's bytes and line ends of our own; offsets below point into it."""
    start: npt.NDArray[np.int64]
    """Offset of the address's first byte (behind ``$`` or ``!``)."""
    end: npt.NDArray[np.int64]
    """Offset one past the last field byte (of ``*`` where there is a checksum)."""
    sequence: npt.NDArray[np.int64]
    size: npt.NDArray[np.int32]
    """Bytes on the line, from the start character to the end of the checksum, with two more for CR LF."""
    received_s: npt.NDArray[np.float64]
    """Arrival of the chunk that brought the sentence's last byte, s since 1970 UTC; NaN unknown."""
    stamped_s: npt.NDArray[np.float64]
    """The host's own stamp on the line (TAG ``c:``, a date before, UNIX time behind the checksum); NaN none."""
    address: npt.NDArray[np.uint64]
    """The address as a number (see ``addresses``)."""
    marks: npt.NDArray[np.int64]
    """Offsets of every comma, ``*``, ``$``, ``!``, CR and LF in ``buffer``; shape (m,)."""
    first_mark: npt.NDArray[np.int64]
    """Index into ``marks`` of the one behind the address."""
    last_mark: npt.NDArray[np.int64]
    """Index into ``marks`` of the one behind the last field: that at ``end``."""

    def __len__(self) -> int:
        return len(self.start)

    def rows(self, chosen: npt.NDArray[np.intp]) -> Sentences:
        """Some of the sentences, of the same block."""
        values = {
            field.name: getattr(self, field.name) for field in fields(self) if field.name not in ("buffer", "marks")
        }
        part = {name: column[chosen] for name, column in values.items()}
        return Sentences(buffer=self.buffer, marks=self.marks, **part)


Chosen = slice | npt.NDArray[np.intp] | npt.NDArray[np.bool_]


class LazyFields(Mapping[str, Column]):
    """Columns that are read when they are first asked for: most questions need few of them."""

    @abstractmethod
    def rows(self, chosen: Chosen) -> LazyFields:
        """The same of some rows only."""


@dataclass(frozen=True, slots=True)
class Table:
    """All sentences of one formatter in one block; every column has shape (n,) unless its field says otherwise.

    Columns by kind of field (see ``fields``): numbers are float64 with NaN for an empty field; times of day are
    int64 milliseconds (-1 empty; 86 400 000 and more in a leap second); dates are int32 days since 1970 (-1 empty);
    latitudes and longitudes are float64 degrees, south and west negative; single letters and digits-as-codes are
    uint8 ASCII codes (0 empty); texts are fixed-width bytes.
    """

    formatter: str
    sequence: npt.NDArray[np.int64]
    talker: npt.NDArray[np.bytes_]
    """Two bytes each."""
    size: npt.NDArray[np.int32]
    received_s: npt.NDArray[np.float64]
    stamped_s: npt.NDArray[np.float64]
    fields: Mapping[str, Column]

    def __len__(self) -> int:
        return len(self.sequence)

    def rows(self, chosen: Chosen) -> Table:
        """Some of the rows."""
        columns = self.fields
        if isinstance(columns, LazyFields):
            part: Mapping[str, Column] = columns.rows(chosen)
        else:
            part = {name: column[chosen] for name, column in columns.items()}
        return Table(
            self.formatter,
            self.sequence[chosen],
            self.talker[chosen],
            self.size[chosen],
            self.received_s[chosen],
            self.stamped_s[chosen],
            part,
        )


@dataclass(frozen=True, slots=True)
class SatelliteRows:
    """The groups of all GSV sentences of a block, one row each, in stream order. Arrays of shape (m,)."""

    sentence: npt.NDArray[np.int32]
    """Row of the GSV table that this group stood in."""
    number: npt.NDArray[np.int16]
    """Satellite number as received; -1 empty."""
    elevation_deg: npt.NDArray[np.float32]
    """NaN empty."""
    azimuth_deg: npt.NDArray[np.float32]
    cn0_dbhz: npt.NDArray[np.float32]
    """NaN empty or zero: not tracked."""


@dataclass(frozen=True, slots=True)
class Columns:
    """One block, decoded."""

    tables: dict[str, Table]
    """By formatter. Field names of each are those of ``sentences.SENTENCES``."""
    satellites: SatelliteRows
    used: npt.NDArray[np.int16]
    """Satellite numbers in the GSA table's sentences, shape (rows of GSA, 12 or more), -1 in empty slots."""
    others: Sentences
    """Accepted sentences whose formatter is not in the table: counted, inspectable, not decoded."""
