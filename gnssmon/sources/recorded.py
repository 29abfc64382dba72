"""A recording, or any log with a table of arrival times beside it: bytes that know when they came."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from pathlib import Path

import numpy as np

from gnssmon.chunks import Arrivals, Chunk
from gnssmon.errors import SourceError
from gnssmon.recording.folder import RecordedFile, read_arrivals, read_folder, stored
from gnssmon.sources.log_file import LogFile
from gnssmon.sources.source import Kind, Source


class Recording(Source):
    """Recorded files, one behind the other. ``size`` and ``sha256`` are those of all the received bytes in a row."""

    kind: Kind = "log"

    def __init__(self, path: Path, *, label: str | None = None) -> None:
        """Open a recording's folder, or one recorded file. Raises SourceError when there is nothing to read."""
        super().__init__(str(path) if label is None else label)
        self._folder = path if path.is_dir() else path.parent
        self._files = read_folder(path) if path.is_dir() else (RecordedFile(name=path.name.removesuffix(".gz")),)
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
                    yield _stamped(chunk, offset, arrivals)
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
        return LogFile(self._place(file) or self._folder / file.name)


def _stamped(chunk: Chunk, offset: int, arrivals: Arrivals | None) -> Chunk:
    """Give the bytes that begin at ``offset`` of a file their times."""
    if arrivals is None or not len(chunk.data):
        return chunk
    first = max(0, int(np.searchsorted(arrivals.offset, offset, side="right")) - 1)
    if first and arrivals.offset[first - 1] == offset:
        # Silence noted in front of this very byte: begin with the first of the rows.
        first = int(np.searchsorted(arrivals.offset, offset, side="left"))
    last = int(np.searchsorted(arrivals.offset, offset + len(chunk.data), side="left"))
    if last <= first:
        return chunk
    at = np.maximum(arrivals.offset[first:last] - offset, 0)
    return Chunk(chunk.data, float(arrivals.received_s[last - 1]), Arrivals(at, arrivals.received_s[first:last]))


def _left_over(size: int, arrivals: Arrivals | None) -> Iterator[Chunk]:
    """Rows at a file's end, without bytes: silence before the recording stopped."""
    if arrivals is None:
        return
    first = int(np.searchsorted(arrivals.offset, size, side="left"))
    late = arrivals.received_s[first:]
    if len(late):
        yield Chunk(b"", float(late[-1]), Arrivals(np.zeros(len(late), dtype=np.int64), late))
