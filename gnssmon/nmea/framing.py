"""Framer: bytes cut anywhere → sentences in one block, and a tally of the rest.

Strategy. Only whole lines are looked at: what comes behind the last line end waits for more, so that the answer cannot
depend on how the stream was cut. A line that never ends is broken by a rule of its own bytes (``_broken``), which keeps
the wait bounded. Within the whole lines everything is found by position: the sorted offsets of ``$``, ``!``, ``*``, CR
and LF; a start directly followed in that list by ``*`` is a sentence with a checksum, one followed by a line end is a
sentence without. Checksums of all of them are taken at once. What stands before and behind a sentence on its line is
looked at only where there is something (``prefixes``).
"""

from __future__ import annotations

from collections import Counter

import numpy as np
import numpy.typing as npt

from gnssmon.chunks import Chunk, joined
from gnssmon.nmea.checksum import hex_value, xor_between
from gnssmon.nmea.columns import Sentences, Tally
from gnssmon.nmea.prefixes import Surroundings, read_surroundings
from gnssmon.nmea.sentences import SENTENCES

Offsets = npt.NDArray[np.int64]

LONGEST_SENTENCE = 1024
"""Bytes from the start character to the end of the checksum. The standard says 82; makers' own sentences reach some
hundreds; beyond this it is no sentence."""

LONGEST_LINE = 4096
"""A line without end is broken here: binary messages go on for long without a byte that looks like a line end."""

MOST_KINDS = 512
"""Different addresses that a tally keeps apart: noise with a lucky checksum must not fill the memory."""

SHORTEST_ADDRESS, LONGEST_ADDRESS = 3, 8
"""Letters and digits behind the start character, up to the first comma."""

LF, CR, DOLLAR, BANG, STAR, COMMA, P, Q = (ord(c) for c in "\n\r$!*,PQ")

_SPECIAL = np.zeros(256, dtype=bool)
_SPECIAL[[LF, CR, DOLLAR, BANG, STAR]] = True
_PRINTABLE = np.zeros(256, dtype=bool)
_PRINTABLE[0x20:0x7F] = True
_ADDRESS = np.zeros(256, dtype=bool)
_ADDRESS[[*range(ord("0"), ord("9") + 1), *range(ord("A"), ord("Z") + 1)]] = True
_KNOWN = frozenset(SENTENCES)

OTHER = "other"
"""Stands for every address beyond MOST_KINDS."""


class Framer:
    """Finds the sentences of one stream, from its start."""

    def __init__(self) -> None:
        self.tally = Tally()
        self._held = Chunk(b"")
        self._sequence = 0

    def feed(self, chunk: Chunk) -> Sentences:
        """Take in the next bytes and return the sentences that are complete with them, perhaps none."""
        self.tally.bytes += len(chunk.data)
        whole = joined([self._held, chunk]) if self._held.data else chunk
        cut = _end_of_last_line(whole.data)
        if cut == len(whole.data):
            self._held = Chunk(b"")
            return self._frame(whole)
        lines, self._held = whole.cut(cut)
        return self._frame(lines)

    def finish(self) -> Sentences:
        """Take in the end of the stream: a last line without an end counts as it stands."""
        held, self._held = self._held, Chunk(b"")
        return self._frame(held)

    def check(self) -> None:
        """Assert what must hold between any two calls."""
        tally = self.tally
        assert len(self._held.data) <= LONGEST_LINE
        assert tally.sentences == self._sequence == sum(tally.by_type.values())
        assert 0 <= tally.non_nmea_bytes <= tally.bytes
        assert tally.unverified <= tally.sentences
        assert len(tally.by_type) <= MOST_KINDS + 1

    def _frame(self, lines: Chunk) -> Sentences:
        buffer = np.frombuffer(lines.data, dtype=np.uint8)
        special = np.flatnonzero(_SPECIAL[buffer])
        kind = buffer[special]
        opens = np.flatnonzero((kind == DOLLAR) | (kind == BANG))
        start = special[opens] + 1
        # The next special byte behind each start; the end of the block serves as a line end.
        following = np.append(special, len(buffer))[opens + 1]
        closed_by = np.append(kind, np.uint8(LF))[opens + 1]
        named, comma = _addressed(buffer, start, following)
        start, following, closed_by, comma = start[named], following[named], closed_by[named], comma[named]

        starred = closed_by == STAR
        stated = np.full(len(start), -1, dtype=np.int16)
        stated[starred] = hex_value(buffer, following[starred] + 1)
        sound = (following - start < LONGEST_SENTENCE) & _printable(buffer, start, following)
        complete = sound & starred & (stated >= 0)
        good = complete.copy()
        good[complete] = xor_between(buffer, start[complete], following[complete]) == stated[complete]
        failed = complete & ~good
        plain = sound & ((closed_by == CR) | (closed_by == LF))
        plain &= self._may_be_plain(buffer, start, comma, good)

        self._count_failures(buffer, start[failed], comma[failed])
        self.tally.malformed += int(len(start) - complete.sum() - plain.sum())
        accepted = np.flatnonzero(good | plain)
        unverified = plain[accepted]
        end = following[accepted]
        tail = np.where(unverified, end, end + 3)
        size = (tail - start[accepted] + 3).astype(np.int32)  # the start character, and two for CR LF
        bodies = Surroundings(start[accepted] - 1, tail)
        stamped_s, around = read_surroundings(lines.data, bodies, buffer)
        lost = failed | ~(complete | plain)
        lost_bytes = int((following[lost] - start[lost] + 1 + 3 * failed[lost]).sum())
        line_ends = int(((kind == CR) | (kind == LF)).sum())
        inside = int((tail - start[accepted] + 1).sum())
        self.tally.non_nmea_bytes += max(0, len(buffer) - inside - lost_bytes - line_ends - around)
        return self._accept(lines, buffer, start[accepted], end, comma[accepted], size, stamped_s, unverified)

    def _may_be_plain(
        self, buffer: npt.NDArray[np.uint8], start: Offsets, comma: Offsets, good: npt.NDArray[np.bool_]
    ) -> npt.NDArray[np.bool_]:
        """Without a checksum: only known sentences, and only while the stream has shown no good checksum."""
        count = len(start)
        if self.tally.sentences > self.tally.unverified:
            return np.zeros(count, dtype=bool)
        first_good = int(good.argmax()) if good.any() else count
        may = np.zeros(count, dtype=bool)
        for i in range(first_good):
            may[i] = bytes(buffer[comma[i] - 3 : comma[i]]).decode("latin-1") in _KNOWN and comma[i] - start[i] == 5
        return may

    def _count_failures(self, buffer: npt.NDArray[np.uint8], start: Offsets, comma: Offsets) -> None:
        self.tally.checksum_failures += len(start)
        for address, count in _addresses(buffer, start, comma).items():
            _add(self.tally.failures_by_type, address, count)

    def _accept(
        self,
        lines: Chunk,
        buffer: npt.NDArray[np.uint8],
        start: Offsets,
        end: Offsets,
        comma: Offsets,
        size: npt.NDArray[np.int32],
        stamped_s: npt.NDArray[np.float64],
        unverified: npt.NDArray[np.bool_],
    ) -> Sentences:
        count = len(start)
        tally = self.tally
        tally.sentences += count
        tally.unverified += int(unverified.sum())
        for address, number in _addresses(buffer, start, comma).items():
            proprietary = address.startswith("P") and not address.startswith("PQ")
            _add(tally.by_type, address if proprietary else address[2:] or address, number)
            _add(tally.talkers, "P" if proprietary else address[:2], number)
        sequence = np.arange(self._sequence, self._sequence + count, dtype=np.int64)
        self._sequence += count
        if lines.arrivals is None:
            received_s = np.full(count, lines.received_s)
        else:
            received_s = lines.arrivals.at(_line_end(buffer, end))
        return Sentences(buffer, start, end, sequence, size, received_s, stamped_s)


def _end_of_last_line(data: bytes) -> int:
    """Offset behind the last line that is whole, or was broken because it grew too long."""
    last = max(data.rfind(b"\n"), data.rfind(b"\r")) + 1
    while len(data) - last > LONGEST_LINE:
        last = _broken(data, last)
    return last


def _broken(data: bytes, begin: int) -> int:
    """Where to break a line that began at ``begin`` and is too long: before the last start of a sentence that may
    still go on, else after LONGEST_LINE bytes. Depends on the line's own bytes only."""
    last = begin + LONGEST_LINE
    opened = max(data.rfind(mark, last - LONGEST_SENTENCE, last) for mark in (b"$", b"!", b"\\"))
    return opened if opened > begin else last


def _line_end(buffer: npt.NDArray[np.uint8], end: Offsets) -> Offsets:
    """Offset of the line end behind each sentence (the block's last byte where there is none)."""
    ends = np.flatnonzero((buffer == LF) | (buffer == CR))
    at = np.searchsorted(ends, end)
    return np.append(ends, len(buffer) - 1)[at]


def _addressed(
    buffer: npt.NDArray[np.uint8], start: Offsets, following: Offsets
) -> tuple[npt.NDArray[np.bool_], Offsets]:
    """Which starts have a proper address behind them, and the offset where each address ends."""
    count = len(buffer)
    end = np.full(len(start), -1, dtype=np.int64)
    running = np.ones(len(start), dtype=bool)
    for length in range(LONGEST_ADDRESS + 1):
        at = start + length
        over = at >= following
        byte = buffer[np.minimum(at, count - 1)] if count else np.zeros(len(start), dtype=np.uint8)
        stops = running & (over | (byte == COMMA))
        end[stops] = at[stops]
        running &= ~stops & _ADDRESS[byte]
    return end - start >= SHORTEST_ADDRESS, np.minimum(end, following)


def _printable(buffer: npt.NDArray[np.uint8], start: Offsets, end: Offsets) -> npt.NDArray[np.bool_]:
    bad = np.flatnonzero(~_PRINTABLE[buffer])
    clean: npt.NDArray[np.bool_] = np.searchsorted(bad, start) == np.searchsorted(bad, end)
    return clean


def _addresses(buffer: npt.NDArray[np.uint8], start: Offsets, comma: Offsets) -> Counter[str]:
    """How often each address stands there."""
    if not len(start):
        return Counter()
    packed = np.zeros(len(start), dtype=np.uint64)
    for i in range(LONGEST_ADDRESS):
        at = start + i
        byte = np.where(at < comma, buffer[np.minimum(at, len(buffer) - 1)], 0).astype(np.uint64)
        packed = (packed << np.uint64(8)) | byte
    value, count = np.unique(packed, return_counts=True)
    return Counter(
        {int(v).to_bytes(8, "big").rstrip(b"\0").decode("ascii"): int(n) for v, n in zip(value, count, strict=True)}
    )


def _add(counter: Counter[str], key: str, count: int) -> None:
    counter[key if key in counter or len(counter) < MOST_KINDS else OTHER] += count
