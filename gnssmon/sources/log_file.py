"""A log file, plain or compressed, read in large blocks and hashed on the way.

Compression is told by the first bytes, not by the name. Compressed files are unpacked piece by piece with a bound on
what one piece may become, so a file made to explode cannot fill the memory. A file that is cut off or damaged gives
everything that can still be unpacked, and then a SourceError that says where it ended.
"""

from __future__ import annotations

import bz2
import hashlib
import importlib
import lzma
import zlib
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import BinaryIO, Protocol

from gnssmon.chunks import Chunk
from gnssmon.errors import SourceError
from gnssmon.sources.source import Kind, Source

BLOCK_BYTES = 4 * 1024 * 1024
"""One chunk of a log: large enough that the work per block does not show, small beside the memory of a small board."""

STORED_BYTES = 256 * 1024
"""One read of a compressed file; some ten times as much comes out."""

PIECE_BYTES = 64 * 1024
"""Most that is unpacked in one go: what is lost in front of damaged data, at most."""

ZERO_PADDING = b"\0"
"""gzip and xz files may be padded with zeros (tapes, block devices); not damage."""


class Unpacker(Protocol):
    """What the decompressors of bz2, lzma and zstd share."""

    @property
    def eof(self) -> bool: ...
    @property
    def needs_input(self) -> bool: ...
    @property
    def unused_data(self) -> bytes: ...
    def decompress(self, data: bytes, max_length: int = -1) -> bytes: ...


class _Gunzip:
    """zlib's decompressor for a gzip member, with the face of the others."""

    def __init__(self) -> None:
        self._inner = zlib.decompressobj(wbits=31)

    @property
    def eof(self) -> bool:
        return self._inner.eof

    @property
    def needs_input(self) -> bool:
        return not self._inner.unconsumed_tail and not self.eof

    @property
    def unused_data(self) -> bytes:
        return self._inner.unused_data

    def decompress(self, data: bytes, max_length: int = -1) -> bytes:
        return self._inner.decompress(self._inner.unconsumed_tail + data, max(0, max_length))


def _zstd_unpacker() -> Unpacker:
    try:
        module = importlib.import_module("compression.zstd")  # Python 3.14 and later
    except ImportError:
        message = "this Python cannot unpack .zst (3.14 and later can): unpack it first with 'zstd -d'"
        raise SourceError(message) from None
    unpacker: Unpacker = module.ZstdDecompressor()
    return unpacker


COMPRESSIONS: dict[bytes, tuple[str, Callable[[], Unpacker]]] = {
    b"\x1f\x8b\x08": ("gzip", _Gunzip),
    b"BZh": ("bzip2", bz2.BZ2Decompressor),
    b"\xfd7zXZ\x00": ("xz", lzma.LZMADecompressor),
    b"\x28\xb5\x2f\xfd": ("zstd", _zstd_unpacker),
}
"""First bytes (RFC 1952, bzip2, the .xz file format 1.2, RFC 8878) → name and how to unpack."""

DAMAGE = (zlib.error, OSError, lzma.LZMAError, EOFError, ValueError)


class LogFile(Source):
    """The bytes of one file, without arrival times."""

    kind: Kind = "log"

    def __init__(
        self, path: Path, *, label: str | None = None, block_bytes: int = BLOCK_BYTES, unpack: bool = True
    ) -> None:
        """Open the file; without ``unpack`` its bytes are what they are, whatever they look like.

        Raises SourceError when it cannot be read.
        """
        super().__init__(str(path) if label is None else label)
        self.path = path
        self._block_bytes = block_bytes
        self._file = opened(path)
        self.size = path.stat().st_size
        self._hash = hashlib.sha256()
        start = self._file.read(8)
        self._file.seek(0)
        kinds = [kind for magic, kind in COMPRESSIONS.items() if unpack and start.startswith(magic)]
        self.compression = kinds[0] if kinds else None
        """Name and unpacker; None: the bytes are stored as they are."""

    def chunks(self) -> Iterator[Chunk]:
        try:
            blocks = self._stored(self._block_bytes) if self.compression is None else self._unpacked()
            for block in blocks:
                if self._closing:
                    return
                yield Chunk(block)
            if not self._closing:
                self.sha256 = self._hash.hexdigest()
        finally:
            self.state = "ended"
            self._file.close()

    def close(self) -> None:
        super().close()
        self._file.close()

    def _stored(self, most: int) -> Iterator[bytes]:
        """The file's bytes as they are, hashed."""
        while not self._closing:
            try:
                block = self._file.read(most)
            except (OSError, ValueError) as error:
                if self._closing:
                    return
                message = f"reading '{self.path}' failed behind byte {self.consumed}: {error}"
                raise SourceError(message) from error
            if not block:
                return
            self._hash.update(block)
            self.consumed += len(block)
            yield block

    def _unpacked(self) -> Iterator[bytes]:
        """The unpacked bytes in blocks of about ``block_bytes``; damage is told after the last of them."""
        waiting: list[bytes] = []
        size = 0
        try:
            for piece in self._pieces():
                waiting.append(piece)
                size += len(piece)
                if size >= self._block_bytes:
                    yield b"".join(waiting)
                    waiting, size = [], 0
        except SourceError:
            yield b"".join(waiting)
            for _ in self._stored(self._block_bytes):
                pass  # The evidence is the whole file, damage included: hash the rest of it too.
            self.sha256 = self._hash.hexdigest()
            raise
        if waiting:
            yield b"".join(waiting)

    def _pieces(self) -> Iterator[bytes]:
        """Unpacked pieces; a file may hold several compressed members behind each other."""
        assert self.compression is not None
        name, make = self.compression
        unpacker, begun, unpacked = make(), False, 0
        for stored in self._stored(STORED_BYTES):
            feed = stored
            while True:
                if not begun:
                    feed = feed.lstrip(ZERO_PADDING)
                    if not feed:
                        break
                    begun = True
                try:
                    piece = unpacker.decompress(feed, PIECE_BYTES)
                except DAMAGE as error:
                    told = (
                        f"'{self.path}' is damaged: its {name} data cannot be unpacked behind byte {unpacked} ({error})"
                    )
                    raise SourceError(told) from error
                unpacked += len(piece)
                if piece:
                    yield piece
                if unpacker.eof:
                    feed = unpacker.unused_data
                    unpacker, begun = make(), False
                elif unpacker.needs_input:
                    break
                else:
                    feed = b""
        if begun and not self._closing:
            raise SourceError(f"'{self.path}' is cut off: its {name} data ends early, behind byte {unpacked} unpacked")


def opened(path: Path) -> BinaryIO:
    """The open file, unbuffered. Raises SourceError."""
    try:
        return path.open("rb", buffering=0)
    except FileNotFoundError as error:
        raise SourceError(f"no such file: '{path}'") from error
    except PermissionError as error:
        raise SourceError(f"may not read '{path}': permission denied; 'ls -l' shows who may") from error
    except OSError as error:
        raise SourceError(f"'{path}' cannot be opened: {error.strerror or error}") from error
