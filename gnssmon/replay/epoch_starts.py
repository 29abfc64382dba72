"""Where epochs start in a log's bytes: just enough of NMEA to cut a stream at its own instants.

Much lighter than the pipeline, because only the time of a sentence is read, and exact enough to cut by: an epoch
starts at the line of the first sentence that shows another time. What is cut here is decoded by the one path.
"""

from __future__ import annotations

import functools
import math
import operator
import re
from dataclasses import dataclass
from datetime import date

from gnssmon.utc import DAY_MS

TIMED = re.compile(
    rb"\$([A-Z]{2}(?:(?:GGA|GNS|RMC|ZDA|GST|GBS|GRS),|GLL,(?:[^,\r\n]*,){4})(\d{6}(?:\.\d{0,9})?),[ -#%-)+-~]*)"
    rb"(?:\*([0-9A-Fa-f]{2}))?(?=\r|\n|,)"
)
"""A sentence with a time of day: checksummed text, time, checksum."""

SAME_EPOCH_MS = 20
"""Sentences of one epoch differ by less than this in time: some receivers round each sentence by itself."""

LONGEST_LINE = 512
"""Bytes kept of an unfinished line: a sentence, a TAG block and a host stamp fit."""

_EPOCH_DAY = date(1970, 1, 1).toordinal()


@dataclass(frozen=True, slots=True)
class EpochStart:
    """The first line of an epoch."""

    offset: int
    """Of its first byte in the stream: behind the end of the line before."""
    axis_ms: int
    """Continuous through midnight; counted from the midnight before the first epoch."""


class EpochStarts:
    """Finds the starts in a stream that comes in pieces, cut anywhere."""

    def __init__(self) -> None:
        self.utc_offset_ms: int | None = None
        """Add to an ``axis_ms`` to get UTC since 1970; None while the stream has told no date."""
        self._rest = b""
        self._rest_offset = 0
        self._axis_ms: int | None = None
        self._before_ms: int | None = None
        self._shortest_ms = math.inf

    @property
    def certain(self) -> int:
        """Offset up to which every start has been told."""
        return self._rest_offset

    @property
    def last_axis_ms(self) -> int | None:
        """Instant of the last epoch that started."""
        return self._axis_ms

    def feed(self, data: bytes) -> list[EpochStart]:
        """The starts that are certain now; a line at the end of ``data`` waits for its end."""
        block = self._rest + data
        base = self._rest_offset
        end = max(block.rfind(b"\n"), block.rfind(b"\r")) + 1
        end = max(end, len(block) - LONGEST_LINE)
        starts = self._starts(block[:end], base)
        self._rest, self._rest_offset = block[end:], base + end
        return starts

    def skip(self, to_offset: int) -> None:
        """Go on at another offset, further on: what lies between is not looked at."""
        self._rest, self._rest_offset = b"", to_offset

    def finish(self) -> list[EpochStart]:
        """The start that an unfinished last line may hold."""
        starts = self._starts(self._rest + b"\n", self._rest_offset)
        self._rest_offset += len(self._rest)
        self._rest = b""
        return starts

    def _starts(self, block: bytes, base: int) -> list[EpochStart]:
        starts = []
        for match in TIMED.finditer(block):
            axis_ms = self._axis_of(match)
            if axis_ms is None or not self._opens(axis_ms):
                continue
            # Bounded, or a log without any CR would be searched back to its beginning for each epoch.
            far = max(0, match.start() - LONGEST_LINE)
            line = max(block.rfind(b"\n", far, match.start()), block.rfind(b"\r", far, match.start())) + 1
            starts.append(EpochStart(base + (line or (match.start() if far else 0)), axis_ms))
        return starts

    def _opens(self, axis_ms: int) -> bool:
        """Whether a time belongs to a new epoch; late sentences of the one before do not open it again."""
        if self._axis_ms is not None:
            step_ms = abs(axis_ms - self._axis_ms)
            tolerance_ms = min(SAME_EPOCH_MS, self._shortest_ms / 4)
            if step_ms < tolerance_ms:
                return False
            if self._before_ms is not None and abs(axis_ms - self._before_ms) < tolerance_ms:
                return False
            self._shortest_ms = min(self._shortest_ms, step_ms)
        self._before_ms, self._axis_ms = self._axis_ms, axis_ms
        return True

    def _axis_of(self, match: re.Match[bytes]) -> int | None:
        text, clock, checksum = match.groups()
        if checksum is not None and functools.reduce(operator.xor, text) != int(checksum, 16):
            return None
        hour, minute, second = int(clock[:2]), int(clock[2:4]), float(clock[4:])
        if hour > 23 or minute > 59 or second >= 61.0:
            return None
        of_day_ms = (hour * 60 + minute) * 60_000 + round(second * 1000.0)
        day_ms = _date_ms(text)
        if day_ms is not None:
            if self.utc_offset_ms is None:
                axis_ms = self._next_to_last(of_day_ms)
                self.utc_offset_ms = day_ms + of_day_ms - axis_ms
            return day_ms + of_day_ms - self.utc_offset_ms
        return self._next_to_last(of_day_ms)

    def _next_to_last(self, of_day_ms: int) -> int:
        """The instant with this time of day that lies nearest to the last one."""
        if self._axis_ms is None:
            return of_day_ms
        half_a_day = DAY_MS // 2
        return self._axis_ms + (of_day_ms - self._axis_ms + half_a_day) % DAY_MS - half_a_day


def _date_ms(text: bytes) -> int | None:
    """Midnight of the date in an RMC or ZDA, ms since 1970; None elsewhere or where it is empty or impossible."""
    fields = text.split(b",")
    kind = fields[0][2:]
    try:
        if kind == b"RMC" and len(fields) > 9 and len(fields[9]) == 6:
            day, month, year = int(fields[9][:2]), int(fields[9][2:4]), int(fields[9][4:])
            year += 1900 if year >= 80 else 2000
        elif kind == b"ZDA" and len(fields) > 4:
            day, month, year = int(fields[2]), int(fields[3]), int(fields[4])
        else:
            return None
        return (date(year, month, day).toordinal() - _EPOCH_DAY) * DAY_MS
    except ValueError:
        return None
