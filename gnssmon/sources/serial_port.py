"""A serial port, or anything that pyserial opens by a URL. Nothing is ever written to it.

Opening a port sets its DTR and RTS lines, as every terminal program does; some USB receivers send only then.
On a pseudo-terminal the rate means nothing: any rate reads the same bytes.
"""

from __future__ import annotations

import contextlib
import errno
import os
import select
from collections.abc import Iterator, Sequence
from pathlib import Path

import serial

from gnssmon.chunks import Chunk
from gnssmon.clocks import Clock
from gnssmon.errors import SourceError
from gnssmon.sources.hearing import Framing, Spoiling
from gnssmon.sources.source import MOST_BYTES, LiveSource

GATHER_S = 0.01
"""Wait between two looks at a burst: arrival times are late by at most this. A kernel's 4 kB of line buffer hold
45 ms at 921 600 baud."""

MOST_GATHER_S = 0.05
"""A piece ends with the look that brings a line end, or after this: one piece a sentence, not one a byte."""


class SerialPort(LiveSource):
    """An open serial line at a known rate."""

    def __init__(
        self,
        label: str,
        clock: Clock,
        *,
        port: str,
        baud: int | None,
        framing: Framing = "8N1",
        line: serial.Serial | None = None,
        heard: Sequence[Chunk] = (),
    ) -> None:
        """Open the port for this program alone, unless it is open already (``line``); ``heard`` came before.

        Raises SourceError when it cannot be opened.
        """
        super().__init__(label, clock)
        self.baud = self.rate = baud
        self.framing: Framing = framing
        self.spoiled = False
        """The line made sense and then did not any more: its rate may have changed. Told by SourceError, too."""
        self._line = opened(port, baud, framing) if line is None else line
        self._heard = heard
        try:
            self._descriptor: int | None = self._line.fileno() if os.name == "posix" else None
        except (OSError, AttributeError):
            self._descriptor = None  # loop:// and rfc2217:// are no files: they are polled.

    def chunks(self) -> Iterator[Chunk]:
        spoiling = Spoiling()
        for chunk in self._heard:
            self.consumed += len(chunk.data)
            spoiling.feed(chunk.data, self._clock.steady())
            yield chunk
        for chunk in super().chunks():
            yield chunk
            if chunk.data and spoiling.feed(chunk.data, self._clock.steady()):
                self.spoiled = True
                self._release()
                raise SourceError(f"'{self.label}' sends nothing readable any more; its rate may have changed")

    def _receive(self, wait_s: float) -> bytes | None:
        data = bytearray()
        try:
            if self._descriptor is not None and not select.select([self._descriptor], [], [], wait_s)[0]:
                return b""
            until = self._clock.steady() + MOST_GATHER_S
            while True:
                self._clock.sleep(GATHER_S)
                take_waiting(self._line, data)
                if not data or b"\n" in data or len(data) >= MOST_BYTES or self._clock.steady() >= until:
                    return bytes(data)
        except (OSError, ValueError, TypeError) as error:
            # pyserial's SerialException is an OSError; a port closed by another thread gives the other two.
            if data:
                return bytes(data)  # The next call meets the same error.
            if self._closing:
                return None
            raise SourceError(f"'{self.label}' is lost: {lost_because(error)}") from error

    def _release(self) -> None:
        with contextlib.suppress(OSError):  # An unplugged device cannot even be closed properly.
            self._line.close()


def take_waiting(line: serial.Serial, data: bytearray) -> None:
    """Append what waits on an open line to ``data``, also when it then turns out to be lost (OSError)."""
    # One read may give a single byte (rfc2217://) or a part of what waits: ask until there is nothing.
    while len(data) < MOST_BYTES and (piece := line.read(MOST_BYTES)):
        data += piece


def opened(port: str, baud: int | None, framing: Framing = "8N1") -> serial.Serial:
    """The open port, reading without waiting; ``baud`` None where no rate matters. Raises SourceError, with advice."""
    try:
        # Whatever class opens the URL has the face of ``Serial``.
        line: serial.Serial = serial.serial_for_url(
            port,
            baudrate=9600 if baud is None else baud,
            bytesize=int(framing[0]),
            parity=framing[1],
            stopbits=int(framing[2]),
            timeout=0,
            exclusive=True if "://" not in port and os.name == "posix" else None,
        )
    except (OSError, ValueError, AttributeError, TypeError, OverflowError) as error:
        raise SourceError(f"cannot open '{port}': {closed_because(error, port, baud)}") from error
    return line


def closed_because(error: Exception, port: str, baud: int | None) -> str:
    """Why a port would not open, and what to try."""
    number = error.errno if isinstance(error, OSError) else None
    if number in (errno.EAGAIN, errno.EBUSY) or "lock" in str(error):
        return "another program is using it; close that one first"
    if number in (errno.EACCES, errno.EPERM) or "PermissionError" in str(error):
        return f"permission denied{_group_hint(port)}"
    if number in (errno.ENOENT, errno.ENODEV, errno.ENXIO) or "FileNotFoundError" in str(error):
        return "no such port; 'gnssmon ports' shows those that exist"
    if number in (errno.ENOTTY, errno.EINVAL) or "configure port" in str(error):
        return f"it is no serial port, or does not know {baud} baud"
    if isinstance(error, ValueError) and "baud" in str(error).lower():
        return f"it does not know the rate of {baud} baud"
    return str(error)


def lost_because(error: Exception) -> str:
    """Why an open port can no longer be read."""
    if isinstance(error, OSError) and error.errno in (errno.EIO, errno.ENXIO, errno.ENODEV, errno.EBADF):
        return "the device is gone (unplugged, powered off, or its terminal hung up)"
    if "returned no data" in str(error) or "Errno 5" in str(error):
        return "the device is gone (unplugged, powered off), or another program reads from it too"
    return str(error)


def _group_hint(port: str) -> str:
    """The group that may use the port, where the file system tells."""
    if os.name != "posix":
        return "; another program may be using it"
    try:
        group = Path(port).group()
    except (OSError, KeyError):
        group = "dialout"
    return f"; join its group with 'sudo usermod -aG {group} $USER' and log in again"
