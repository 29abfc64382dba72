"""A recording, or any log with a table of arrival times beside it: bytes that know when they came."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from itertools import pairwise
from pathlib import Path

import numpy as np

from gnssmon.chunks import Arrivals, Chunk
from gnssmon.errors import SourceError
from gnssmon.recording.folder import PACKED, RecordedFile, read_arrivals, read_folder, stored
from gnssmon.sources.log_file import LogFile
from gnssmon.sources.source import Kind, Source


class Recording(Source):
    """Recorded files, one behind the other. ``size`` and ``sha256`` are those of all the received bytes in a row."""

    kind: Kind = "log"

    def __init__(self, path: Path, *, label: str | None = None) -> None:
        """Open a recording's folder, or one recorded file. Raises SourceError when there is nothing to read."""
        super().__init__(str(path) if label is None else label)
        self._folder = path if path.is_dir() else path.parent
        self._files = read_folder(path) if path.is_dir() else (RecordedFile(name=path.name.removesuffix(PACKED)),)
        if not self._files:
            raise SourceError(f"the folder '{path}' is no recording: it holds no .nmea file")
        self._open = self._opened(self._files[0])
        self.size = sum(place.stat().st_size for file in self._files if (place := self._place(file)) is not None)

    def chunks(self) -> Iterator[Chunk]:
        whole = hashlib.sha256()
        finished = 0
        try:
            for number, file in enumerate(self._files):
                if number:
                    self._open = self._opened(file)
                log = self._open
                arrivals = read_arrivals(log.path)
                one = hashlib.sha256()
                offset = 0
                for chunk in log.chunks():
                    one.update(chunk.data)
                    whole.update(chunk.data)
                    self.consumed = finished + log.consumed
                    yield from _stamped(chunk.data, offset, arrivals)
                    offset += len(chunk.data)
                if self._closing:
                    return
                finished += log.consumed
                if file.sha256 is not None and file.sha256 != one.hexdigest():
                    self.doubts += (f"'{file.name}' is not what its manifest says: its bytes were changed",)
                yield from _left_over(offset, arrivals)
            self.sha256 = whole.hexdigest()
        finally:
            self.state = "ended"
            self._open.close()

    def close(self) -> None:
        super().close()
        self._open.close()

    def _place(self, file: RecordedFile) -> Path | None:
        return stored(self._folder / file.name)

    def _opened(self, file: RecordedFile) -> LogFile:
        place = self._place(file) or self._folder / file.name
        return LogFile(place, unpack=place.name.endswith(PACKED))


def _stamped(data: bytes, offset: int, arrivals: Arrivals | None) -> Iterator[Chunk]:
    """The bytes that begin at ``offset`` of a file with their times; silences noted among them in chunks of their own.

    Silence between this block and the next is left to the next.
    """
    if arrivals is None:
        yield Chunk(data)
        return
    first = max(0, int(np.searchsorted(arrivals.offset, offset, side="right")) - 1)
    if arrivals.offset[first] == offset:
        first = int(np.searchsorted(arrivals.offset, offset, side="left"))
    last = int(np.searchsorted(arrivals.offset, offset + len(data), side="left"))
    if last <= first:
        yield Chunk(data)  # The table begins later: of these bytes nothing is known.
        return
    begins = np.maximum(arrivals.offset[first:last] - offset, 0)
    times = arrivals.received_s[first:last]
    silent = np.append(begins[1:] == begins[:-1], False)
    # Runs of rows of one kind, each a chunk.
    edges = [0, *(np.flatnonzero(np.diff(silent)) + 1).tolist(), len(begins)]
    for begin, end in pairwise(edges):
        upto = len(data) if end == len(begins) else int(begins[end])
        piece = data[begins[begin] : upto] if not silent[begin] else b""
        at = begins[begin:end] - begins[begin]
        yield Chunk(piece, float(times[end - 1]), Arrivals(at, times[begin:end]))


def _left_over(size: int, arrivals: Arrivals | None) -> Iterator[Chunk]:
    """Rows at a file's end, without bytes: silence before the recording stopped."""
    if arrivals is None:
        return
    late = arrivals.received_s[int(np.searchsorted(arrivals.offset, size, side="left")) :]
    if len(late):
        yield Chunk(b"", float(late[-1]), Arrivals(np.zeros(len(late), dtype=np.int64), late))
