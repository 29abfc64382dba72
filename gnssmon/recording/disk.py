"""What a recording asks of the operating system, in one place: so that a test can let any of it fail."""

from __future__ import annotations

import os
from pathlib import Path


class Disk:
    """The real one. Every call may raise OSError."""

    def create(self, path: Path) -> int:
        """Create a file that must not exist yet; returns its descriptor."""
        return os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL | getattr(os, "O_BINARY", 0), 0o644)

    def overwrite(self, path: Path) -> int:
        """Create a file or empty the one that is there; returns its descriptor."""
        return os.open(path, os.O_WRONLY | os.O_CREAT | os.O_TRUNC | getattr(os, "O_BINARY", 0), 0o644)

    def write(self, descriptor: int, data: bytes) -> int:
        """Hand bytes to the system; returns how many it took."""
        return os.write(descriptor, data)

    def sync(self, descriptor: int) -> None:
        """Return when all that was written is with the disk itself."""
        os.fsync(descriptor)

    def close(self, descriptor: int) -> None:
        os.close(descriptor)

    def replace(self, path: Path, target: Path) -> None:
        """Give a file another name, in one step, over what was there."""
        os.replace(path, target)

    def remove(self, path: Path) -> None:
        path.unlink(missing_ok=True)

    def sync_folder(self, folder: Path) -> None:
        """Make created and changed names survive a power cut, where the system can."""
        if os.name == "posix":
            descriptor = os.open(folder, os.O_RDONLY)
            try:
                os.fsync(descriptor)
            finally:
                os.close(descriptor)


DISK = Disk()


def write_all(disk: Disk, descriptor: int, data: bytes) -> None:
    """Write all of ``data``; a disk that takes only a part of it is asked again until it says why."""
    view = memoryview(data)
    while view:
        view = view[disk.write(descriptor, bytes(view)) :]


def write_file(disk: Disk, path: Path, data: bytes) -> None:
    """Put ``data`` at ``path`` in one step: a reader, or a power cut, sees the old file or the new one."""
    beside = path.with_name(path.name + ".new")
    descriptor = disk.overwrite(beside)
    try:
        write_all(disk, descriptor, data)
        disk.sync(descriptor)
    finally:
        disk.close(descriptor)
    disk.replace(beside, path)
    disk.sync_folder(path.parent)
