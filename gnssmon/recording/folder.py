"""A recording on disk: a folder of raw bytes, when they came, and what they hash to.

    0001-20250520T052341Z.nmea            the bytes as received, nothing added, nothing left out
    0001-20250520T052341Z.arrivals.csv    offset,received_utc_s: a row for each piece as it arrived
    0002-20250520T060000Z.nmea  …         the next file, after so many bytes or at the full hour
    manifest.json                         per file: source, times, size, SHA-256

A row stands on disk before its bytes do. So a row behind the last byte means that something came and was not kept;
and bytes behind the last row, which only a power cut can leave, came not before that row's time. Both are read as
what they are: a folder needs no repair, and none is done. Two rows with one offset: nothing came in between, up to
the later one's time.

Closed files may be compressed (``.nmea.gz``, ``.arrivals.csv.gz``); hashes are those of the unpacked bytes. Files
that no manifest names are read too: it may be lost, the bytes are not.
"""

from __future__ import annotations

import gzip
import json
import re
import zlib
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass, fields
from pathlib import Path

import numpy as np
import numpy.typing as npt

from gnssmon.chunks import Arrivals
from gnssmon.errors import RecordingError
from gnssmon.recording.disk import DISK, Disk, write_file

MANIFEST = "manifest.json"
FORMAT, VERSION = "gnssmon recording", 1
DATA, TABLE, PACKED = ".nmea", ".arrivals.csv", ".gz"
TABLE_HEAD = b"offset,received_utc_s\n"

MOST_TABLE_BYTES = 1 << 30
"""A table of 40 million rows: more than any file that this program rotates; a larger one is not read."""

_NAME = re.compile(r"(\d{4,9})-[0-9TZ]+\.nmea")


@dataclass(frozen=True, slots=True, kw_only=True)
class RecordedFile:
    """One file of a recording, as its manifest tells; None: not closed, or not told."""

    name: str
    """``….nmea``, whether compressed by now or not."""
    source: str = ""
    opened_utc: str | None = None
    closed_utc: str | None = None
    """Host time of the last write, ISO 8601."""
    bytes: int | None = None
    sha256: str | None = None
    """Of the unpacked bytes."""
    arrivals_sha256: str | None = None
    note: str = ""
    """Why it ended, where that was not as planned."""

    @property
    def number(self) -> int:
        """Place in the recording."""
        match = _NAME.fullmatch(self.name)
        return int(match[1]) if match else 0


def table_name(name: str) -> str:
    """The table's name for a data file's name."""
    return name.removesuffix(DATA) + TABLE


def stored(path: Path) -> Path | None:
    """Where the bytes of ``path`` are: there, or compressed beside; None: nowhere."""
    packed = path.with_name(path.name + PACKED)
    return path if path.is_file() else packed if packed.is_file() else None


def read_folder(folder: Path) -> tuple[RecordedFile, ...]:
    """The files of a recording in order, perhaps none. Raises RecordingError when the folder is unreadable."""
    try:
        there = {p.name.removesuffix(PACKED) for p in folder.iterdir()}
    except OSError as error:
        raise RecordingError(f"the folder '{folder}' cannot be read: {error.strerror or error}") from error
    known = {file.name: file for file in read_manifest(folder)}
    names = sorted((name for name in there if name.endswith(DATA)), key=lambda name: (_number(name), name))
    return tuple(known.get(name, RecordedFile(name=name)) for name in names)


def read_manifest(folder: Path) -> tuple[RecordedFile, ...]:
    """What the manifest tells; nothing where there is none or it cannot be understood."""
    try:
        told = json.loads((folder / MANIFEST).read_bytes())
        entries = told["files"] if told["format"] == FORMAT else []
        return tuple(file for entry in entries if (file := _entry(entry)) is not None)
    except (OSError, ValueError, KeyError, TypeError, RecursionError):
        return ()


def write_manifest(folder: Path, files: Sequence[RecordedFile], disk: Disk = DISK) -> None:
    """Replace the manifest in one step. Raises OSError."""
    told = {"format": FORMAT, "version": VERSION, "files": [asdict(file) for file in files]}
    write_file(disk, folder / MANIFEST, json.dumps(told, indent=1).encode() + b"\n")


def has_arrivals(data_path: Path) -> bool:
    """Whether a table of arrival times stands beside a data file, compressed or not."""
    return stored(data_path.with_name(table_name(data_path.name.removesuffix(PACKED)))) is not None


def read_arrivals(data_path: Path) -> Arrivals | None:
    """When the bytes of a recorded file came; None where no table tells. ``data_path`` may be the compressed one."""
    table = stored(data_path.with_name(table_name(data_path.name.removesuffix(PACKED))))
    if table is None or table.stat().st_size > MOST_TABLE_BYTES:
        return None
    try:
        text = gzip.decompress(table.read_bytes()) if table.name.endswith(PACKED) else table.read_bytes()
    except (OSError, EOFError, zlib.error):
        return None
    if not text.startswith(TABLE_HEAD):
        return None
    # A row torn by a kill has no line end; a power cut may leave zeros: read up to the first thing that is no row.
    rows = text[len(TABLE_HEAD) : text.rfind(b"\n") + 1]
    if broken := re.search(rb"[^0-9.,\n]|\n\n", rows):
        rows = rows[: rows.rfind(b"\n", 0, broken.start()) + 1]
    return _parsed(rows)


def _parsed(rows: bytes) -> Arrivals | None:
    try:
        values = np.fromstring(rows.replace(b"\n", b",").rstrip(b",").decode(), dtype=np.float64, sep=",")
        offset: npt.NDArray[np.int64] = values[0::2].astype(np.int64)
        received_s = values[1::2]
    except (ValueError, DeprecationWarning):
        return None
    if not len(offset) or len(offset) != len(received_s) or offset[0] < 0 or np.any(np.diff(offset) < 0):
        return None
    return Arrivals(offset, received_s)


def _number(name: str) -> int:
    match = _NAME.fullmatch(name)
    return int(match[1]) if match else 0


def _entry(entry: object) -> RecordedFile | None:
    if not isinstance(entry, Mapping) or not isinstance(entry.get("name"), str):
        return None
    if "/" in entry["name"] or "\\" in entry["name"]:
        return None
    return RecordedFile(**{f.name: entry[f.name] for f in fields(RecordedFile) if f.name in entry})
