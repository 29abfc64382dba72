"""Framer: bytes cut anywhere → sentences in one block, and a tally of the rest.

Strategy. Only whole lines are looked at: what comes behind the last line end waits for more, so that the answer cannot
depend on how the stream was cut. A line that grows too long is broken by a rule of its own bytes (``_breaks``), which
keeps the wait bounded; there a line end of our own is put into the block, and another one behind the block. Within the
lines everything is found by position: the sorted offsets of commas, ``$``, ``!``, ``*``, CR and LF, the *marks*. A
start whose next mark other than a comma is ``*`` is a sentence with a checksum, one followed by a line end is one
without; the fields lie between neighbouring marks. Checksums of all are taken at once. What stands before and behind a
sentence on its line is looked at only where there is something (``prefixes``).
"""

from __future__ import annotations

import functools
import itertools
import re
from collections import Counter
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.chunks import Chunk, joined
from gnssmon.nmea import addresses
from gnssmon.nmea.checksum import hex_value, xor_between
from gnssmon.nmea.columns import Chosen, Sentences, Tally
from gnssmon.nmea.prefixes import Surroundings, read_surroundings
from gnssmon.nmea.sentences import SENTENCES

Bytes = npt.NDArray[np.uint8]
Offsets = npt.NDArray[np.int64]
Flags = npt.NDArray[np.bool_]

LONGEST_SENTENCE = 1024
"""Bytes from the start character to the end of the checksum. The standard says 82; makers' own sentences reach some
hundreds; beyond this it is no sentence."""

LONGEST_LINE = 4096
"""A line without end is broken here: binary messages go on for long without a byte that looks like a line end."""

MOST_KINDS = 512
"""Different addresses that a tally keeps apart: noise with a lucky checksum must not fill the memory."""

OTHER = "other"
"""Stands for every address beyond MOST_KINDS."""

CHECKSUM = 3
"""Bytes of ``*hh``."""

LF, CR, SPACE, BANG, DOLLAR, STAR, COMMA, DELETE = (ord(c) for c in "\n\r !$*,\x7f")

SPECIAL = (LF, CR, DOLLAR, BANG, STAR)
_SPECIAL = np.zeros(256, dtype=bool)
_SPECIAL[list(SPECIAL)] = True

_KNOWN = np.array([addresses.formatter_number(formatter) for formatter in SENTENCES])

_RUN_TOGETHER = re.compile(rb"\*[0-9A-Fa-f]{2}(?=[$!])")
"""A checksum and the next start character with no line end between, as in datagrams of one bare sentence each."""


class Framer:
    """Finds the sentences of one stream, from its start."""

    def __init__(self) -> None:
        self.tally = Tally()
        self._held = Chunk(b"")
        self._sequence = 0

    def feed(self, chunk: Chunk) -> Sentences:
        """Take in the next bytes and return the sentences that are complete with them, perhaps none."""
        if not chunk.data:
            return _nothing()
        self.tally.bytes += len(chunk.data)
        whole = joined([self._held, chunk]) if self._held.data else chunk
        cut = _end_of_last_line(whole.data)
        lines, self._held = (whole, Chunk(b"")) if cut == len(whole.data) else whole.cut(cut)
        return self._frame(lines) if cut else _nothing()

    def finish(self) -> Sentences:
        """Take in the end of the stream: a last sentence with a checksum needs no line end."""
        held, self._held = self._held, Chunk(b"")
        return self._frame(held)

    def check(self) -> None:
        """Assert what must hold between any two calls."""
        tally = self.tally
        assert len(self._held.data) <= LONGEST_LINE
        assert self._held.arrivals is None or len(self._held.arrivals.offset) <= LONGEST_LINE
        assert tally.sentences == self._sequence == tally.by_type.total() == tally.talkers.total()
        assert tally.checksum_failures == tally.failures_by_type.total()
        assert 0 <= tally.non_nmea_bytes <= tally.bytes - len(self._held.data)
        assert tally.unverified <= tally.sentences
        assert max(map(len, (tally.by_type, tally.talkers, tally.failures_by_type))) <= MOST_KINDS + 1

    def _frame(self, lines: Chunk) -> Sentences:
        block = _block(lines.data)
        buffer = block.buffer
        found = _find(buffer)
        starred = found.closed_by == STAR
        stated = np.full(len(found.start), -1, dtype=np.int16)
        stated[starred] = hex_value(buffer, found.end[starred] + 1)
        complete = starred & (stated >= 0)
        tail = found.end + CHECKSUM * complete
        sound = (tail - found.start < LONGEST_SENTENCE) & found.printable
        complete &= sound
        good = complete.copy()
        good[complete] = xor_between(buffer, found.start[complete], found.end[complete]) == stated[complete]
        failed = complete & ~good
        plain = sound & ((found.closed_by == CR) | (found.closed_by == LF)) & ~np.isin(found.end, block.breaks)
        plain &= (found.last_mark > found.first_mark) & self._may_be_plain(found, good)

        accepted = slice(None) if good.all() else np.flatnonzero(good | plain)
        before = np.append(0, tail[:-1])
        inside = int((tail - found.start + 1).sum())
        tail, start, end = tail[accepted], found.start[accepted], found.end[accepted]
        stamped_s, around = read_surroundings(buffer, Surroundings(start - 1, tail, before[accepted]))
        self._count(found, accepted, np.flatnonzero(failed))
        self.tally.unverified += int(np.count_nonzero(plain))
        self.tally.malformed += int(len(complete) - np.count_nonzero(complete | plain))
        self.tally.non_nmea_bytes += len(buffer) - found.line_ends - inside - around
        sequence = np.arange(self._sequence, self._sequence + len(start), dtype=np.int64)
        self._sequence += len(start)
        return Sentences(
            buffer=buffer,
            start=start,
            end=end,
            sequence=sequence,
            size=(tail - start + 3).astype(np.int32),  # the start character, and two for CR LF
            received_s=block.arrival(lines, tail - 1),
            stamped_s=stamped_s,
            address=found.address[accepted],
            marks=found.marks,
            first_mark=found.first_mark[accepted],
            last_mark=found.last_mark[accepted],
        )

    def _may_be_plain(self, found: _Found, good: Flags) -> Flags:
        """Without a checksum: only known sentences, and only while the stream has shown no good checksum."""
        may = np.zeros(len(good), dtype=bool)
        if self.tally.sentences == self.tally.unverified:
            first_good = int(good.argmax()) if good.any() else len(good)
            may[:first_good] = np.isin(addresses.formatters(found.address[:first_good]), _KNOWN)
        return may

    def _count(self, found: _Found, accepted: Chosen, failed: Offsets) -> None:
        tally = self.tally
        for address, count in found.count(failed).items():
            tally.checksum_failures += count
            _add(tally.failures_by_type, address, count)
        for address, count in found.count(accepted).items():
            tally.sentences += count
            makers = addresses.makers_own(address)
            _add(tally.by_type, address if makers else address[2:], count)
            _add(tally.talkers, "P" if makers else address[:2], count)


@dataclass(frozen=True, slots=True)
class _Block:
    """Whole lines with our own line ends in them."""

    buffer: Bytes
    breaks: Offsets
    """Offsets in ``buffer`` of our own line ends: where a line was too long, and behind the last one."""

    def arrival(self, lines: Chunk, at: Offsets) -> npt.NDArray[np.float64]:
        """When the bytes at these offsets of ``buffer`` came."""
        if lines.arrivals is None:
            return np.full(len(at), lines.received_s)
        return lines.arrivals.at(at - np.searchsorted(self.breaks, at))


@dataclass(frozen=True, slots=True)
class _Found:
    """Everything in a block that begins like a sentence: a start character with an address behind it.

    Arrays of shape (n,) but for ``buffer`` and ``marks``.
    """

    buffer: Bytes
    start: Offsets
    end: Offsets
    closed_by: Bytes
    """What stands at ``end``."""
    address: npt.NDArray[np.uint64]
    address_length: Offsets
    printable: Flags
    """Nothing but printable characters inside."""
    marks: Offsets
    first_mark: Offsets
    last_mark: Offsets
    line_ends: int
    """CR and LF in the block, our own among them."""

    def count(self, chosen: Chosen) -> Counter[str]:
        """How often each address stands there."""
        return addresses.count_addresses(
            self.buffer, self.start[chosen], self.address_length[chosen], self.address[chosen]
        )


def _find(buffer: Bytes) -> _Found:
    """Index the block's marks and pair each start character with the mark, other than a comma, that follows it.

    The block ends with a line end.
    """
    # Every mark is at most 0x2C, and little else in a sentence is: one comparison finds them all.
    marks = np.flatnonzero(buffer <= COMMA)
    bad = np.flatnonzero(buffer >= DELETE) if buffer.max() >= DELETE else np.empty(0, dtype=np.int64)
    kind = buffer[marks]
    others = np.flatnonzero(kind != COMMA)
    other_kind = kind[others]
    counts = {special: int(np.count_nonzero(other_kind == special)) for special in SPECIAL}
    if counts[BANG] or sum(counts.values()) < len(others):
        strays = others[~_SPECIAL[other_kind]]
        bad = np.sort(np.concatenate([bad, marks[strays[kind[strays] < SPACE]]]))
        marks = np.delete(marks, strays)
        bangs = np.flatnonzero(buffer[marks] == BANG)
        marks = np.delete(marks, bangs[~_opening(buffer, marks, bangs)])
        kind = buffer[marks]
        others = np.flatnonzero(kind != COMMA)
        other_kind = kind[others]
    opens = np.flatnonzero((other_kind == DOLLAR) | (other_kind == BANG))
    start = marks[others[opens]] + 1
    length = marks[others[opens] + 1] - start
    may = addresses.can_begin(buffer, start, length)
    if not may.all():
        opens, start, length = opens[may], start[may], length[may]
    proper, address = addresses.read_addresses(buffer, start, length)
    if not proper.all():
        opens, start, length, address = opens[proper], start[proper], length[proper], address[proper]
    last_mark = others[opens + 1]
    end = marks[last_mark]
    printable: Flags = np.ones(len(start), dtype=bool)
    if len(bad):
        printable = np.searchsorted(bad, start) == np.searchsorted(bad, end)
    return _Found(
        buffer=buffer,
        start=start,
        end=end,
        closed_by=other_kind[opens + 1],
        address=address,
        address_length=length,
        printable=printable,
        marks=marks,
        first_mark=others[opens] + 1,
        last_mark=last_mark,
        line_ends=counts[LF] + counts[CR],
    )


def _opening(buffer: Bytes, marks: Offsets, bangs: Offsets) -> Flags:
    """Which of the ``!`` at ``marks[bangs]`` open a sentence: a text may have one inside that does not."""
    start = marks[bangs] + 1
    length = marks[bangs + 1] - start
    opening = addresses.can_begin(buffer, start, length)
    may = np.flatnonzero(opening)
    opening[may], _ = addresses.read_addresses(buffer, start[may], length[may])
    return opening


def _block(data: bytes) -> _Block:
    """The lines, with a line end of our own at each break and behind the last."""
    breaks = _breaks(data)
    pieces = [data[a:b] for a, b in itertools.pairwise([0, *breaks, len(data)])]
    buffer = np.frombuffer(b"\n".join([*pieces, b""]), dtype=np.uint8)
    return _Block(buffer, np.array([*breaks, len(data)], dtype=np.int64) + np.arange(len(breaks) + 1))


def _breaks(data: bytes) -> list[int]:
    """Offsets at which lines are broken because they grew too long."""
    breaks: list[int] = []
    begin = 0
    # As many lines at once as fit into the length of one: what is left without a line end inside is too long.
    while begin + LONGEST_LINE < len(data):
        end = _last_line_end(data, begin, begin + LONGEST_LINE + 1)
        if end == begin:
            end = _broken(data, begin)
            breaks.append(end)
        begin = end
    return breaks


def _end_of_last_line(data: bytes) -> int:
    """Offset behind the last line that is whole, or was broken because it grew too long."""
    last = max(data.rfind(b"\n"), data.rfind(b"\r")) + 1
    while len(data) - last > LONGEST_LINE:
        end = _last_line_end(data, last, last + LONGEST_LINE + 1)
        last = end if end > last else _broken(data, last)
    return _last_line_end(data, last, len(data))


def _last_line_end(data: bytes, begin: int, stop: int) -> int:
    """Offset behind the last line that ends before ``stop``; ``begin`` where none does."""
    end = max(data.rfind(b"\n", begin, stop), data.rfind(b"\r", begin, stop)) + 1
    if end <= begin:
        for match in _RUN_TOGETHER.finditer(data, begin, stop):
            end = match.end()
    return max(begin, end)


def _broken(data: bytes, begin: int) -> int:
    """Where to break a line that began at ``begin`` and is too long: before the last start of a sentence that may
    still go on, else after LONGEST_LINE bytes. Depends on the line's own bytes only."""
    last = begin + LONGEST_LINE
    opened = max(data.rfind(mark, last - LONGEST_SENTENCE, last) for mark in (b"$", b"!", b"\\"))
    return opened if opened > begin else last


@functools.cache
def _nothing() -> Sentences:
    return Framer()._frame(Chunk(b""))


def _add(counter: Counter[str], key: str, count: int) -> None:
    counter[key if key in counter or len(counter) < MOST_KINDS else OTHER] += count
