"""A log that another program is still writing: read to its end, then on as it grows.

What was there before comes without arrival times. What is added later is stamped when it is seen, at most ``WAIT_S``
after it was written; when the writer itself got it nobody can tell. A log that is cut back, or replaced by a new one
under its name, is read from the new beginning.
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from pathlib import Path
from typing import BinaryIO

from gnssmon.chunks import Chunk
from gnssmon.clocks import Clock
from gnssmon.errors import SourceError
from gnssmon.sources.log_file import BLOCK_BYTES, COMPRESSIONS, opened
from gnssmon.sources.source import SILENCE_S, WAIT_S, Kind, Source


class Following(Source):
    """A growing log."""

    kind: Kind = "live"

    def __init__(self, path: Path, clock: Clock, *, label: str | None = None) -> None:
        """Open the log. Raises SourceError when it cannot be read, or is compressed: such a log does not grow."""
        super().__init__(str(path) if label is None else label)
        self._path = path
        self._clock = clock
        self._file = opened(path)
        if self._file.read(8).startswith(tuple(COMPRESSIONS)):
            self._file.close()
            raise SourceError(f"'{path}' is compressed and cannot be followed; 'gnssmon replay' plays it")
        self._file.seek(0)

    def chunks(self) -> Iterator[Chunk]:
        caught_up = False
        heard_s = self._clock.steady()
        try:
            while not self._closing:
                if block := self._read():
                    self.consumed += len(block)
                    heard_s = self._clock.steady()
                    yield Chunk(block, self._clock.now()) if caught_up else Chunk(block)
                    continue
                caught_up = True
                self._file = self._current()
                self._clock.sleep(WAIT_S)
                if self._clock.steady() - heard_s >= SILENCE_S:
                    heard_s = self._clock.steady()
                    yield Chunk(b"", self._clock.now())
        finally:
            self.state = "ended"
            self._file.close()

    def close(self) -> None:
        super().close()
        self._file.close()

    def _read(self) -> bytes:
        try:
            return self._file.read(BLOCK_BYTES)
        except (OSError, ValueError) as error:
            if self._closing:
                return b""
            raise SourceError(f"reading '{self._path}' failed behind byte {self.consumed}: {error}") from error

    def _current(self) -> BinaryIO:
        """The file that now has the name: this one, or a new one to be read from its start."""
        try:
            there, here = os.stat(self._path), os.fstat(self._file.fileno())
            if (there.st_dev, there.st_ino) != (here.st_dev, here.st_ino):
                self._file.close()
                return opened(self._path)
            if there.st_size < self._file.tell():
                self._file.seek(0)
        except (OSError, ValueError, SourceError):
            pass  # Gone for the moment: what is open can still be read, and the name may come back.
        return self._file
