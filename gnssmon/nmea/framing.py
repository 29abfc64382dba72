"""Framer: bytes cut anywhere → sentences in one block, and a tally of the rest.

Strategy. Only whole lines are looked at: what comes behind the last line end waits for more, so that the answer cannot
depend on how the stream was cut. A line that never ends is broken by a rule of its own bytes (``_broken``), which keeps
the wait bounded. Within the whole lines everything is found by position: the sorted offsets of commas, ``$``, ``!``,
``*``, CR and LF, the *marks*. A start whose next mark other than a comma is ``*`` is a sentence with a checksum, one
followed by a line end is a sentence without; the fields lie between neighbouring marks. Checksums of all are taken at
once. What stands before and behind a sentence on its line is looked at only where there is something (``prefixes``).
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.chunks import Chunk, joined
from gnssmon.nmea.checksum import hex_value, xor_between
from gnssmon.nmea.columns import Sentences, Tally
from gnssmon.nmea.numbers import records
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

SHORTEST_ADDRESS, USUAL_ADDRESS, LONGEST_ADDRESS = 3, 5, 8
"""Letters and digits behind the start character, up to the first comma."""

USUAL_KINDS = 100
"""Different addresses of an ordinary stream and more."""

LF, CR, SPACE, BANG, DOLLAR, STAR, COMMA, DELETE = (ord(c) for c in "\n\r !$*,\x7f")

SPECIAL = (LF, CR, DOLLAR, BANG, STAR)
_SPECIAL = np.zeros(256, dtype=bool)
_SPECIAL[list(SPECIAL)] = True
_ADDRESS = np.zeros(256, dtype=bool)
_ADDRESS[[*range(ord("0"), ord("9") + 1), *range(ord("A"), ord("Z") + 1)]] = True

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
        # A line end of our own behind the block: a last line without one ends there all the same.
        buffer = np.frombuffer(lines.data + b"\n", dtype=np.uint8)
        found = _find(buffer)
        starred = found.closed_by == STAR
        stated = np.full(len(found.start), -1, dtype=np.int16)
        stated[starred] = hex_value(buffer, found.end[starred] + 1)
        sound = (found.end - found.start < LONGEST_SENTENCE) & found.printable
        complete = sound & starred & (stated >= 0)
        good = complete.copy()
        good[complete] = xor_between(buffer, found.start[complete], found.end[complete]) == stated[complete]
        failed = complete & ~good
        plain = sound & ((found.closed_by == CR) | (found.closed_by == LF))
        plain &= self._may_be_plain(found, good)

        self._count_failures(found.address[failed])
        self.tally.malformed += int(len(complete) - complete.sum() - plain.sum())
        accepted = slice(None) if good.all() else np.flatnonzero(good | plain)
        unverified = plain[accepted]
        start, end = found.start[accepted], found.end[accepted]
        tail = np.where(unverified, end, end + 3)
        stamped_s, around = read_surroundings(lines.data, Surroundings(start - 1, tail), buffer[:-1])
        lost = failed | ~(complete | plain)
        lost_bytes = int((found.end[lost] - found.start[lost] + 1 + 3 * failed[lost]).sum())
        inside = int((tail - start + 1).sum())
        self.tally.non_nmea_bytes += len(lines.data) - inside - lost_bytes - found.line_ends - around
        self._count(found.address[accepted], int(unverified.sum()))
        sequence = np.arange(self._sequence, self._sequence + len(start), dtype=np.int64)
        self._sequence += len(start)
        if lines.arrivals is None:
            received_s = np.full(len(start), lines.received_s)
        else:
            received_s = lines.arrivals.at(_line_end(buffer, end))
        return Sentences(
            buffer=buffer,
            start=start,
            end=end,
            sequence=sequence,
            size=(tail - start + 3).astype(np.int32),  # the start character, and two for CR LF
            received_s=received_s,
            stamped_s=stamped_s,
            address=found.address[accepted],
            marks=found.marks,
            first_mark=found.first_mark[accepted],
            last_mark=found.last_mark[accepted],
        )

    def _may_be_plain(self, found: _Found, good: npt.NDArray[np.bool_]) -> npt.NDArray[np.bool_]:
        """Without a checksum: only known sentences, and only while the stream has shown no good checksum."""
        may = np.zeros(len(good), dtype=bool)
        if self.tally.sentences > self.tally.unverified:
            return may
        first_good = int(good.argmax()) if good.any() else len(good)
        for i in range(first_good):
            address = _text(int(found.address[i]))
            may[i] = len(address) == 5 and address[2:] in SENTENCES
        return may

    def _count_failures(self, address: npt.NDArray[np.uint64]) -> None:
        self.tally.checksum_failures += len(address)
        for text, count in _counted(address):
            _add(self.tally.failures_by_type, text, count)

    def _count(self, address: npt.NDArray[np.uint64], unverified: int) -> None:
        tally = self.tally
        tally.sentences += len(address)
        tally.unverified += unverified
        for text, count in _counted(address):
            proprietary = text.startswith("P") and not text.startswith("PQ")
            _add(tally.by_type, text if proprietary else text[2:] or text, count)
            _add(tally.talkers, "P" if proprietary else text[:2], count)


@dataclass(frozen=True, slots=True)
class _Found:
    """Everything in a block that begins like a sentence: a start character with an address behind it.

    Arrays of shape (n,) but for ``marks``.
    """

    start: Offsets
    end: Offsets
    closed_by: npt.NDArray[np.uint8]
    """What stands at ``end``."""
    address: npt.NDArray[np.uint64]
    printable: npt.NDArray[np.bool_]
    """Nothing but printable characters inside."""
    marks: Offsets
    first_mark: Offsets
    last_mark: Offsets
    line_ends: int
    """CR and LF in the block."""


def _find(buffer: npt.NDArray[np.uint8]) -> _Found:
    """Index the block's marks and pair each start character with the mark, other than a comma, that follows it.

    The block ends with a line end of our own, which is not counted.
    """
    # Every mark is at most 0x2C, and little else in a sentence is: one comparison finds them all.
    marks = np.flatnonzero(buffer <= COMMA)
    kind = buffer[marks]
    others = np.flatnonzero(kind != COMMA)
    other_kind = kind[others]
    bad = np.flatnonzero(buffer >= DELETE) if buffer.max() >= DELETE else np.empty(0, dtype=np.int64)
    if sum(np.count_nonzero(other_kind == special) for special in SPECIAL) < len(others):
        strays = ~_SPECIAL[other_kind]
        stray = marks[others[strays]]
        control = stray[buffer[stray] < SPACE]
        bad = np.sort(np.concatenate([bad, control]))
        keep = np.ones(len(marks), dtype=bool)
        keep[others[strays]] = False
        marks, kind = marks[keep], kind[keep]
        others = np.flatnonzero(kind != COMMA)
        other_kind = kind[others]
    opens = np.flatnonzero((other_kind == DOLLAR) | (other_kind == BANG))
    line_ends = int(np.count_nonzero(other_kind == LF) + np.count_nonzero(other_kind == CR)) - 1
    first_mark, last_mark = others[opens] + 1, others[opens + 1]
    start, end = marks[others[opens]] + 1, marks[last_mark]
    proper, address = _addresses(buffer, start, marks[first_mark] - start)
    if not proper.all():
        start, end, address = start[proper], end[proper], address[proper]
        first_mark, last_mark, opens = first_mark[proper], last_mark[proper], opens[proper]
    printable: npt.NDArray[np.bool_] = np.ones(len(start), dtype=bool)
    if len(bad):
        printable = np.searchsorted(bad, start) == np.searchsorted(bad, end)
    closed_by = other_kind[opens + 1]
    return _Found(start, end, closed_by, address, printable, marks, first_mark, last_mark, line_ends)


def _addresses(
    buffer: npt.NDArray[np.uint8], start: Offsets, length: Offsets
) -> tuple[npt.NDArray[np.bool_], npt.NDArray[np.uint64]]:
    """Which starts have a proper address of ``length`` behind them, and the address as a number."""
    proper: npt.NDArray[np.bool_] = (length >= SHORTEST_ADDRESS) & (length <= LONGEST_ADDRESS)
    address = np.zeros(len(start), dtype=np.uint64)
    if (length == USUAL_ADDRESS).all():
        for byte in records(buffer, start, USUAL_ADDRESS):
            proper &= _ADDRESS[byte]
            address = (address << np.uint64(8)) | byte
        return proper, address
    for i in range(LONGEST_ADDRESS):
        inside = i < length
        byte = buffer[np.where(inside, start + i, 0)] if len(buffer) else np.empty(0, dtype=np.uint8)
        proper &= _ADDRESS[byte] | ~inside
        address = np.where(inside, (address << np.uint64(8)) | byte, address)
    return proper, address


def _counted(address: npt.NDArray[np.uint64]) -> list[tuple[str, int]]:
    """How often each address stands there."""
    counts: list[tuple[int, int]] = []
    rest = address
    # Few different ones come often: taking them out one by one is quicker than sorting. Many different ones are noise.
    while len(rest) and len(counts) < USUAL_KINDS:
        same = rest == rest[0]
        counts.append((int(rest[0]), int(np.count_nonzero(same))))
        rest = rest[~same]
    if len(rest):
        values, numbers = np.unique(rest, return_counts=True)
        counts += list(zip(values.tolist(), numbers.tolist(), strict=True))
    return [(_text(value), number) for value, number in counts]


def _text(address: int) -> str:
    return address.to_bytes(8, "big").lstrip(b"\0").decode("ascii")


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


def _add(counter: Counter[str], key: str, count: int) -> None:
    counter[key if key in counter or len(counter) < MOST_KINDS else OTHER] += count
