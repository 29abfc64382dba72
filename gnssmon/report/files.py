"""Results go to disk whole or not at all; a path that cannot be written is known before the run."""

from __future__ import annotations

import os
from pathlib import Path

from gnssmon.errors import OutputError


def check_writable(path: Path) -> None:
    """Raise OutputError when a file cannot be made at ``path``; what stands there now is not touched."""
    if path.is_dir():
        raise OutputError(f"'{path}' is a folder: name a file in it")
    if path.exists() and not path.is_file():
        return
    part = _part(path)
    try:
        part.touch(exist_ok=True)
        part.unlink()
    except OSError as error:
        raise OutputError(f"'{path}' cannot be written: {error.strerror or error}") from None


def write(path: Path, text: str) -> None:
    """Write UTF-8 text: after a crash or on a full disk there is the old file or the new one, never half of one.

    Devices and pipes are written as they are. Raises OutputError.
    """
    data = text.encode("utf-8", errors="backslashreplace")
    try:
        if path.exists() and not path.is_file():
            with path.open("wb") as device:
                device.write(data)
            return
        part = _part(path)
        try:
            with part.open("wb") as file:
                file.write(data)
                file.flush()
                os.fsync(file.fileno())
            part.replace(path.resolve())
        finally:
            part.unlink(missing_ok=True)
    except OSError as error:
        raise OutputError(f"'{path}' could not be written: {error.strerror or error}") from None


def _part(path: Path) -> Path:
    """The unfinished file beside its final place, on the same file system."""
    final = path.resolve()
    return final.with_name(f".{final.name[:100]}.{os.getpid()}.part")
