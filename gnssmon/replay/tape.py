"""A stretch of a stream that can be cut at any offset, each piece keeping its own time of arrival."""

from __future__ import annotations

from collections import deque
from collections.abc import Iterator

from gnssmon.chunks import Chunk


class Tape:
    """Chunks not yet handed on. Offsets are those of the whole stream."""

    def __init__(self) -> None:
        self._chunks: deque[Chunk] = deque()
        self.start = 0
        """Offset of the first byte still held."""
        self.end = 0
        """Offset behind the last byte held."""

    def push(self, chunk: Chunk) -> None:
        """Put a chunk behind those held."""
        self._chunks.append(chunk)
        self.end += len(chunk.data)

    def take(self, upto: int) -> Iterator[Chunk]:
        """The held chunks before the offset ``upto``, the last one cut there; chunks without bytes go with the one
        before them."""
        while self._chunks and self.start + len(self._chunks[0].data) <= upto:
            chunk = self._chunks.popleft()
            self.start += len(chunk.data)
            yield chunk
        if self._chunks and self.start < upto:
            head, tail = self._chunks[0].cut(upto - self.start)
            self._chunks[0] = tail
            self.start = upto
            yield head

    def drop(self, upto: int) -> None:
        """Forget what lies before the offset ``upto``."""
        for _ in self.take(upto):
            pass
