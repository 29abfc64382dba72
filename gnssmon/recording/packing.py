"""Compresses a closed file piece by piece, between chunks, so that nobody ever waits for it."""

from __future__ import annotations

import contextlib
import zlib
from pathlib import Path

from gnssmon.recording.disk import Disk, write_all
from gnssmon.recording.folder import PACKED

PIECE_BYTES = 65536
"""Compressed in one go: some 3 ms on a slow core."""

LEVEL = 6
GZIP = 31
"""zlib's window bits for a gzip wrapper, RFC 1952."""


class Packing:
    """One file on its way to ``….gz``. The original goes only after the packed one is safely on the disk."""

    def __init__(self, path: Path, disk: Disk) -> None:
        """Begin; raises OSError."""
        self._disk = disk
        self._path = path
        self._packed = path.with_name(path.name + PACKED)
        self._part = path.with_name(path.name + PACKED + ".part")
        self._zip = zlib.compressobj(LEVEL, zlib.DEFLATED, GZIP)
        self._from = path.open("rb")
        try:
            self._to = disk.overwrite(self._part)
        except OSError:
            self._from.close()
            raise

    def step(self) -> bool:
        """Compress the next piece; True when all is done. After an OSError the original stands as it was."""
        try:
            piece = self._from.read(PIECE_BYTES)
            if piece:
                write_all(self._disk, self._to, self._zip.compress(piece))
                return False
            write_all(self._disk, self._to, self._zip.flush())
            self._disk.sync(self._to)
            self._let_go()
            self._disk.replace(self._part, self._packed)
            self._disk.sync_folder(self._path.parent)
            self._disk.remove(self._path)
        except OSError:
            self.abandon()
            raise
        return True

    def abandon(self) -> None:
        """Leave the original as it is."""
        self._let_go()
        with contextlib.suppress(OSError):
            self._disk.remove(self._part)

    def _let_go(self) -> None:
        self._from.close()
        if self._to >= 0:
            with contextlib.suppress(OSError):
                self._disk.close(self._to)
            self._to = -1
