"""A disk whose nth call fails."""

from __future__ import annotations

import errno
import os
from pathlib import Path

from gnssmon.recording.disk import Disk


class FailingDisk(Disk):
    """Fails at its ``fail_at``-th call (from 1) and, like a disk that is full or gone, at all that need room after it.

    ``lasting`` False: only that one call fails. ``short`` True: a write that fails takes half of the bytes first.
    """

    def __init__(self, fail_at: int, *, lasting: bool = True, short: bool = False) -> None:
        self.calls = 0
        self.failed = 0
        self._fail_at, self._lasting, self._short = fail_at, lasting, short
        self._halved = False

    def _count(self) -> None:
        self.calls += 1
        if self.calls == self._fail_at or (self._lasting and self.calls > self._fail_at):
            self.failed += 1
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    def create(self, path: Path) -> int:
        self._count()
        return super().create(path)

    def overwrite(self, path: Path) -> int:
        self._count()
        return super().overwrite(path)

    def write(self, descriptor: int, data: bytes) -> int:
        if self._short and self.calls + 1 == self._fail_at and not self._halved and len(data) > 1:
            self._halved = True
            return super().write(descriptor, data[: len(data) // 2])
        self._count()
        return super().write(descriptor, data)

    def sync(self, descriptor: int) -> None:
        self._count()
        super().sync(descriptor)

    def close(self, descriptor: int) -> None:
        super().close(descriptor)
        self._count()

    def replace(self, path: Path, target: Path) -> None:
        self._count()
        super().replace(path, target)

    def remove(self, path: Path) -> None:
        self._count()
        super().remove(path)

    def sync_folder(self, folder: Path) -> None:
        self._count()
        super().sync_folder(folder)
