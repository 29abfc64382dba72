"""Recorder: keeps what comes, as it comes.

It is a watcher of a session and the first to see a chunk. Every chunk is with the operating system before the call
returns, so killing the program loses nothing that was received; it is with the disk within ``SYNC_S``, so a power cut
loses no more than that. When the disk fails or is full the recording stops, says so in ``problem``, and what follows
is monitored all the same.
"""

from __future__ import annotations

import contextlib
import hashlib
import math
import os
from collections import deque
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path

from gnssmon.chunks import Chunk
from gnssmon.clocks import Clock
from gnssmon.errors import RecordingError
from gnssmon.recording.disk import DISK, Disk, write_all
from gnssmon.recording.folder import (
    DATA,
    TABLE_HEAD,
    RecordedFile,
    read_folder,
    table_name,
    write_manifest,
)
from gnssmon.recording.packing import Packing

SYNC_S = 1.0
"""What a power cut may take, at most."""

ROTATE_BYTES = 64 * 1024 * 1024
"""A file's size before the next is begun: eight hours of a busy receiver, a second to hash or compress."""

OVERDUE_BYTES = 65536
"""A file that is full, or whose hour is over, waits this long for the end of a line, so that no sentence is cut."""

HOUR_S = 3600.0


class Recorder:
    """Writes one source's chunks to a folder (see ``recording.folder`` for the format)."""

    def __init__(
        self,
        folder: Path,
        clock: Clock,
        *,
        source: str,
        rotate_bytes: int = ROTATE_BYTES,
        rotate_s: float = HOUR_S,
        compress: bool = False,
        disk: Disk = DISK,
    ) -> None:
        """Begin a recording in ``folder``, behind what an earlier one has left there.

        ``rotate_s`` divides UTC: with 3600 a new file begins with each full hour. Raises RecordingError.
        """
        self.folder = folder
        self.problem = ""
        """Why nothing is recorded any more, in one line; empty while all is well."""
        self.bytes = 0
        """Kept so far, in all files of this recording."""
        self._clock, self._disk = clock, disk
        self._source = source
        self._rotate_bytes, self._rotate_s = rotate_bytes, rotate_s
        self._compress = compress
        self._packing: Packing | None = None
        self._to_pack: deque[Path] = deque()
        self._file: _OpenFile | None = None
        self._lock = -1
        try:
            folder.mkdir(parents=True, exist_ok=True)
            self._lock = _locked(folder)
            self._files = [_closed_afterwards(folder, file) for file in read_folder(folder)]
            self._number = max([file.number for file in self._files], default=0)
            self._begin()
        except OSError as error:
            self._unlock()
            raise RecordingError(f"cannot record to '{folder}': {_reason(error)}") from error
        except RecordingError:
            self._unlock()
            raise

    def __call__(self, chunk: Chunk) -> None:
        """Keep a chunk; never raises for a disk that fails."""
        if self._file is None:
            return
        try:
            if self._must_rotate():
                self._end("")
                self._begin()
            self._file.write(chunk)
            self.bytes += len(chunk.data)
            if self._clock.steady() - self._file.synced_s >= SYNC_S:
                self._file.sync(self._clock.steady())
        except OSError as error:
            self._fail(error)
            return
        self._pack()

    def close(self) -> None:
        """End the recording, hashed and complete; may be called again."""
        if self._file is not None:
            try:
                self._end("")
            except OSError as error:
                self._fail(error)
        while self._to_pack or self._packing is not None:
            self._pack()
        self._unlock()

    def _begin(self) -> None:
        self._number += 1
        opened_s = self._clock.now()
        name = f"{self._number:04d}-{datetime.fromtimestamp(opened_s, UTC):%Y%m%dT%H%M%SZ}{DATA}"
        self._file = _OpenFile(self.folder, name, self._disk, opened_s, self._clock.steady())
        self._files.append(RecordedFile(name=name, source=self._source, opened_utc=_iso(opened_s)))
        write_manifest(self.folder, self._files, self._disk)

    def _end(self, note: str) -> None:
        """Close the file that is open and tell of it in the manifest. Raises OSError, with the file closed."""
        assert self._file is not None
        file, self._file = self._file, None
        try:
            file.sync(self._clock.steady())
        finally:
            file.close()
            self._files[-1] = replace(
                self._files[-1],
                closed_utc=_iso(self._clock.now()),
                bytes=file.size,
                sha256=file.data_hash.hexdigest(),
                arrivals_sha256=file.table_hash.hexdigest(),
                note=note,
            )
        write_manifest(self.folder, self._files, self._disk)
        if self._compress:
            name = self._files[-1].name
            self._to_pack += [self.folder / name, self.folder / table_name(name)]

    def _must_rotate(self) -> bool:
        assert self._file is not None
        full = self._file.size - self._rotate_bytes
        late = math.floor(self._clock.now() / self._rotate_s) != math.floor(self._file.opened_s / self._rotate_s)
        if not self._file.size or not (full >= 0 or late):
            return False
        if self._file.ends_a_line:
            return True
        self._file.overdue_from = min(self._file.overdue_from, self._file.size)
        return self._file.size - self._file.overdue_from >= OVERDUE_BYTES

    def _pack(self) -> None:
        """A small step of compressing; a failure leaves the file as it is."""
        try:
            if self._packing is None and self._to_pack:
                self._packing = Packing(self._to_pack.popleft(), self._disk)
            if self._packing is not None and self._packing.step():
                self._packing = None
        except OSError:
            self._packing = None

    def _fail(self, error: OSError) -> None:
        self.problem = f"recording to '{self.folder}' stopped after {self.bytes} bytes: {_reason(error)}"
        if self._file is not None:
            with contextlib.suppress(OSError):
                self._end(self.problem)
        else:
            with contextlib.suppress(OSError):
                self._files[-1] = replace(self._files[-1], note=self.problem)
                write_manifest(self.folder, self._files, self._disk)

    def _unlock(self) -> None:
        if self._lock >= 0:
            os.close(self._lock)
            self._lock = -1


class _OpenFile:
    """The data file being written, and its table."""

    def __init__(self, folder: Path, name: str, disk: Disk, opened_s: float, now_steady_s: float) -> None:
        self._disk = disk
        self.opened_s = opened_s
        self.synced_s = now_steady_s
        self.size = 0
        self.ends_a_line = True
        self.overdue_from = 1 << 62
        self.data_hash, self.table_hash = hashlib.sha256(), hashlib.sha256()
        self._data = disk.create(folder / name)
        try:
            self._table = disk.create(folder / table_name(name))
            try:
                self._write_table(TABLE_HEAD)
                disk.sync_folder(folder)
            except OSError:
                disk.close(self._table)
                raise
        except OSError:
            disk.close(self._data)
            raise

    def write(self, chunk: Chunk) -> None:
        rows = _rows(chunk, self.size)
        if rows:
            self._write_table(rows)
        view = memoryview(chunk.data)
        while view:
            taken = self._disk.write(self._data, bytes(view))
            self.data_hash.update(view[:taken])
            self.size += taken
            view = view[taken:]
        if chunk.data:
            self.ends_a_line = chunk.data.endswith(b"\n")

    def sync(self, now_steady_s: float) -> None:
        self.synced_s = now_steady_s
        self._disk.sync(self._table)
        self._disk.sync(self._data)

    def close(self) -> None:
        for descriptor in (self._table, self._data):
            with contextlib.suppress(OSError):
                self._disk.close(descriptor)

    def _write_table(self, rows: bytes) -> None:
        write_all(self._disk, self._table, rows)
        self.table_hash.update(rows)


def _rows(chunk: Chunk, base: int) -> bytes:
    if chunk.arrivals is None:
        return b"" if math.isnan(chunk.received_s) else b"%d,%s\n" % (base, repr(float(chunk.received_s)).encode())
    parts = zip(chunk.arrivals.offset.tolist(), chunk.arrivals.received_s.tolist(), strict=True)
    return "".join([f"{base + offset},{received_s!r}\n" for offset, received_s in parts]).encode()


def _closed_afterwards(folder: Path, file: RecordedFile) -> RecordedFile:
    """Tell of a file that an earlier program had no time to close what can still be told."""
    path = folder / file.name
    if file.sha256 is not None or not path.is_file():
        return file
    with path.open("rb") as data:
        digest = hashlib.file_digest(data, "sha256").hexdigest()
    return replace(
        file, bytes=path.stat().st_size, sha256=digest, note=file.note or "not closed by its program; hashed later"
    )


def _locked(folder: Path) -> int:
    """Hold the folder for this program; the system lets go when it dies. Raises RecordingError when another has it."""
    try:
        import fcntl
    except ImportError:
        return -1  # Windows: names created exclusively still keep two programs from one file.
    descriptor = os.open(folder, os.O_RDONLY)
    try:
        fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError as error:
        os.close(descriptor)
        raise RecordingError(f"another program is recording to '{folder}'; choose another folder") from error
    except OSError:
        pass  # A file system without locks.
    return descriptor


def _iso(utc_s: float) -> str:
    return datetime.fromtimestamp(utc_s, UTC).strftime("%Y-%m-%dT%H:%M:%S.%fZ")


def _reason(error: OSError) -> str:
    return (error.strerror or str(error)).lower()
