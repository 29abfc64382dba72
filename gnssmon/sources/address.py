"""What a user types → which kind of source it names.

An existing path always wins over a guess: a file called ``COM3`` or ``sim:x`` is read as the file that it is.
"""

from __future__ import annotations

import difflib
import os
import re
import stat
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from gnssmon.errors import SourceError

Scheme = Literal["serial", "url", "tcp", "udp", "log", "recording", "pipe", "stdin", "sim"]

PYSERIAL_URLS = ("socket", "rfc2217", "loop", "spy", "alt", "hwgrep", "cp2110")
"""Prefixes that pyserial 3.5 opens by itself (its ``urlhandler`` package)."""

FASTEST_BAUD = 12_000_000
"""Above any UART on the market; a larger number is a slip of the finger."""


@dataclass(frozen=True, slots=True)
class Address:
    """A source as typed, taken apart."""

    text: str
    scheme: Scheme
    target: str
    """Path, URL or scenario, without the rate."""
    baud: int | None = None
    """As given behind ``@``; None: to be found."""
    host: str = ""
    port: int = 0


def parse_address(text: str) -> Address:
    """Take ``text`` apart. Raises SourceError with what is wrong and what was probably meant."""
    if text == "-":
        return Address(text, "stdin", text)
    if not text.strip():
        raise SourceError("the source is empty: give a port, a log file, a network address or 'sim:SCENARIO'")
    if (scheme := _existing(text)) is not None:
        return Address(text, scheme, text)
    target, baud = _split_baud(text)
    if target != text and _existing(target) == "serial":
        return Address(text, "serial", target, baud)
    prefix, separator, rest = text.partition("://")
    if separator:
        return _network(text, prefix.lower(), rest)
    if text.startswith("sim:"):
        return Address(text, "sim", text.removeprefix("sim:"))
    if _names_a_port(target):
        return Address(text, "serial", target, baud)
    raise SourceError(_no_such_file(text))


def _existing(path: str) -> Scheme | None:
    try:
        mode = os.stat(path).st_mode
    except PermissionError as error:
        raise SourceError(f"may not look at '{path}': permission denied on its folder") from error
    except (OSError, ValueError):
        return None
    if stat.S_ISDIR(mode):
        return "recording"
    if stat.S_ISCHR(mode):
        return "serial"
    return "pipe" if stat.S_ISFIFO(mode) else "log"


def _names_a_port(target: str) -> bool:
    return target.startswith(("/dev/", "\\\\.\\")) or re.fullmatch(r"(?i)com\d{1,3}", target) is not None


def _split_baud(text: str) -> tuple[str, int | None]:
    target, at, rate = text.rpartition("@")
    if not at or "://" in target:
        return text, None
    if not (_names_a_port(target) or _existing(target) == "serial"):
        return text, None
    if not rate.isascii() or not rate.isdigit() or not 50 <= int(rate[:9]) <= FASTEST_BAUD:
        raise SourceError(f"'{rate}' behind @ in '{text}' is no baud rate: give a number such as 9600 or 115200")
    return target, int(rate)


def _network(text: str, prefix: str, rest: str) -> Address:
    if prefix in ("tcp", "udp"):
        host, port = _host_and_port(text, prefix, rest)
        return Address(text, "tcp" if prefix == "tcp" else "udp", text, None, host, port)
    if prefix in PYSERIAL_URLS:
        url, at, rate = text.rpartition("@")
        if at and rate.isascii() and rate.isdigit() and "/" not in rate and url.partition("://")[2]:
            return Address(text, "url", url, int(rate[:9]))
        return Address(text, "url", text)
    known = ["tcp", "udp", *PYSERIAL_URLS]
    near = difflib.get_close_matches(prefix, known, 1, 0.5)
    hint = f"did you mean '{near[0]}://'?" if near else f"known are {', '.join(known)}, and 'sim:SCENARIO'"
    raise SourceError(f"'{prefix}://' in '{text}' is not a kind of source: {hint}")


def _host_and_port(text: str, prefix: str, rest: str) -> tuple[str, int]:
    host, colon, port = rest.rstrip("/").rpartition(":")
    example = "tcp://192.168.1.20:10110" if prefix == "tcp" else "udp://:10110"
    if not colon or (host.startswith("[") != host.endswith("]")):
        raise SourceError(f"'{text}' names no port number: write it like {example}")
    if not port.isascii() or not port.isdigit() or not 1 <= int(port[:9]) <= 65535:
        raise SourceError(f"'{port}' in '{text}' is no port number: it is 1 to 65535, as in {example}")
    host = host.removeprefix("[").removesuffix("]")
    if prefix == "tcp" and not host:
        raise SourceError(f"'{text}' names no host: write it like {example}")
    return host, int(port)


def _no_such_file(text: str) -> str:
    path = Path(text)
    said = f"no such file or port: '{text}'"
    try:
        names = os.listdir(path.parent)
    except OSError:
        return f"{said}; its folder '{path.parent}' cannot be read either"
    if near := difflib.get_close_matches(path.name, names, 1, 0.6):
        return f"{said}; did you mean '{path.parent / near[0]}'?"
    if re.fullmatch(r"[\w.-]+:\d+", text):
        return f"{said}; for a network address write 'tcp://{text}' or 'udp://{text}'"
    return f"{said}; a port is found by 'gnssmon ports', a simulated receiver is 'sim:SCENARIO'"
