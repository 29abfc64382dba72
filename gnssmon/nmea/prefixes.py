"""What may stand before and behind a sentence on its line: TAG blocks, host times, a word.

Strategy. Between most sentences there is a line end and nothing else; those are passed over in one comparison. Only
where more bytes stand, the text nearest to the sentence is read: one by one, or, in the log of a program that stamps
every line, all those that are made up like the first (``stamps``). What is recognised is kept as the host's stamp of
the sentence and is not counted as foreign bytes; everything else between sentences is.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.nmea.stamps import Stamp, alike, stamp_before, stamp_behind, times_of, unix_s

Bytes = npt.NDArray[np.uint8]
Offsets = npt.NDArray[np.int64]
Floats = npt.NDArray[np.float64]

NEAR = 120
"""Bytes before and behind a sentence that are read: a TAG block holds 80 at most."""

MANY = 8
"""From so many on it pays to look for texts made up alike."""

MOST_MAKE_UPS = 16
"""Looked for in a block: a log has one or two; each look costs a pass over what is left."""

TAG = re.compile(rb"\\([^\\\r\n$!]{0,100})\\\Z")
TAG_TIME = re.compile(rb"(?:\A|,)c:(\d{1,17})(?=,|\*|\Z)")
WORD = re.compile(rb"(?<![^\s,;:|>\]])[A-Za-z][A-Za-z0-9_-]{0,15}[\s,;:|>]+\Z")

_LINE_END = np.zeros(256, dtype=bool)
_LINE_END[[0x0A, 0x0D]] = True


@dataclass(frozen=True, slots=True)
class Surroundings:
    """Where accepted sentences stand in a block; shape (n,)."""

    begin: Offsets
    """Of the start character."""
    tail: Offsets
    """Past the checksum, or the last field where there is none."""
    before: Offsets
    """Past whatever began like a sentence before this one; 0 where nothing did."""


@dataclass(frozen=True, slots=True)
class Prefix:
    """What was recognised at the end of the text before a sentence."""

    used: int
    """Bytes."""
    time_s: float | None
    stamp: Stamp | None
    """The host's time, where one stands there."""
    tagged: bool
    """A TAG block stands there: what it says depends on its checksum."""


def read_surroundings(buffer: Bytes, sentences: Surroundings) -> tuple[Floats, int]:
    """Stamps of the sentences (s since 1970 UTC, NaN none) and how many bytes around them were recognised.

    ``buffer`` ends with a line end. A time behind a sentence goes before one in front of it: it was written last.
    """
    stamped_s = np.full(len(sentences.begin), np.nan)
    if not len(stamped_s):
        return stamped_s, 0
    # Directly behind a line end, or what came before, there is no prefix.
    prefixed = (sentences.begin > sentences.before) & ~_LINE_END[buffer[np.maximum(sentences.begin - 1, 0)]]
    recognised = _read_before(buffer, sentences, np.flatnonzero(prefixed), stamped_s)
    followed = np.flatnonzero(~_LINE_END[buffer[sentences.tail]])
    return stamped_s, recognised + _read_behind(buffer, sentences, followed, stamped_s)


def _read_before(buffer: Bytes, sentences: Surroundings, rows: Offsets, stamped_s: Floats) -> int:
    """Fill in the stamps of ``rows``; returns the bytes recognised."""
    recognised, make_ups = 0, 0
    while len(rows):
        row, rows = int(rows[0]), rows[1:]
        text = _text_before(buffer, int(sentences.before[row]), int(sentences.begin[row]))
        prefix = read_prefix(text)
        recognised += prefix.used
        if prefix.time_s is not None:
            stamped_s[row] = prefix.time_s
        if not prefix.used or prefix.tagged or len(text) == NEAR or len(rows) < MANY or make_ups == MOST_MAKE_UPS:
            continue
        make_ups += 1
        line = sentences.begin[rows] - len(text)
        fits = (line >= sentences.before[rows]) & ((line <= 0) | _LINE_END[buffer[line - 1]])
        done = _read_alike(buffer, line, fits, (text, prefix.stamp), rows, stamped_s)
        recognised += prefix.used * int(np.count_nonzero(done))
        rows = rows[~done]
    return recognised


def _read_behind(buffer: Bytes, sentences: Surroundings, rows: Offsets, stamped_s: Floats) -> int:
    recognised, make_ups = 0, 0
    while len(rows):
        row, rows = int(rows[0]), rows[1:]
        tail = int(sentences.tail[row])
        text = buffer[tail : tail + NEAR].tobytes()
        stamp = stamp_behind(text)
        if stamp is None:
            continue
        stamped_s[row] = stamp.time_s
        used = stamp.span[1]
        recognised += used
        if len(rows) < MANY or make_ups == MOST_MAKE_UPS:
            continue
        make_ups += 1
        begin = sentences.tail[rows]
        fits = begin + used < len(buffer)
        fits &= _LINE_END[buffer[np.where(fits, begin + used, 0)]]
        done = _read_alike(buffer, begin, fits, (text[:used], stamp), rows, stamped_s)
        recognised += used * int(np.count_nonzero(done))
        rows = rows[~done]
    return recognised


def _read_alike(
    buffer: Bytes,
    begin: Offsets,
    fits: npt.NDArray[np.bool_],
    template: tuple[bytes, Stamp | None],
    rows: Offsets,
    stamped_s: Floats,
) -> npt.NDArray[np.bool_]:
    """Fill in the stamps of the ``rows`` whose texts, from ``begin`` on, are made up like the template; say which."""
    text, stamp = template
    done = np.zeros(len(rows), dtype=bool)
    fitting = np.flatnonzero(fits)
    texts = buffer[begin[fitting][:, None] + np.arange(len(text))]
    same = np.flatnonzero(alike(texts, text))
    if stamp is None:
        done[fitting[same]] = True
    elif len(same):
        times_s = times_of(texts[same], stamp)
        read = np.flatnonzero(np.isfinite(times_s))
        done[fitting[same[read]]] = True
        stamped_s[rows[done]] = times_s[read]
    return done


def _text_before(buffer: Bytes, before: int, begin: int) -> bytes:
    """What stands on the line before ``begin``, NEAR bytes at most."""
    text = buffer[max(before, begin - NEAR) : begin].tobytes()
    return text[max(text.rfind(b"\n"), text.rfind(b"\r")) + 1 :]


def read_prefix(text: bytes) -> Prefix:
    """Read TAG blocks, then a host time and a word in either order, from the end of ``text`` backwards.

    The time of the TAG block nearest to the sentence goes before those further away.
    """
    whole = len(text)
    time_s: float | None = None
    while match := TAG.search(text):
        time_s = time_s if time_s is not None else _tag_time(match[1])
        text = text[: match.start()]
    tagged = len(text) < whole
    found: Stamp | None = None
    word_seen = False
    while True:
        if found is None and (stamp := stamp_before(text)):
            found = stamp
            time_s = time_s if time_s is not None else stamp.time_s
            text = text[: stamp.span[0]]
        elif not word_seen and (match := WORD.search(text)):
            word_seen = True
            text = text[: match.start()]
        else:
            return Prefix(whole - len(text), time_s, found, tagged)


def _tag_time(block: bytes) -> float | None:
    """The ``c:`` time of a TAG block; None without one, or where the block's own checksum is wrong."""
    body, star, digits = block.partition(b"*")
    if star:
        total = 0
        for byte in body:
            total ^= byte
        if digits.upper() != b"%02X" % total:
            return None
    match = TAG_TIME.search(body)
    return unix_s(match[1]) if match else None
