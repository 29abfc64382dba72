"""Which ports speak NMEA, and at which rate: by listening alone.

One line is listened to at one rate after the other, likely ones first. A wrong rate gives itself away within the
first bytes of a burst; so the search takes about one burst a rate, and the time that is left is shared among the rates
that are left. A line that is silent at one rate is silent at all of them: nobody need try the others.

All ports are searched at the same time, in one loop: each search is a generator that yields while it waits.
"""

from __future__ import annotations

import contextlib
import os
from collections.abc import Callable, Generator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Protocol

from gnssmon.chunks import Chunk
from gnssmon.clocks import Clock
from gnssmon.errors import SourceError
from gnssmon.sources.hearing import JUDGED_BYTES, Hearing, judge

if TYPE_CHECKING:
    from gnssmon.sources.serial_port import SerialPort

RATES = (9600, 115200, 38400, 4800, 57600, 230400, 460800, 921600, 19200)
"""Bits per second, likely ones first; common practice, no source. 4800 is NMEA 0183's own, 38 400 that of its
high-speed annex."""

SEARCH_S = 14.5
"""For one port, all rates; opening and closing it take less than half a second more."""

SILENT_S = 6.0
"""A port that gives not one byte for so long is silent: receivers that speak every five seconds are rare enough."""

LISTEN_S = 1.1
"""At one rate, at least, when nothing comes: a receiver at 1 Hz has spoken by then."""

PAUSE_S = 0.15
"""No byte for so long, after some: the burst is over, and what it was can be said."""

BURST_S, BURST_BYTES = 0.3, 512
"""So much for so long without a pause, and without a sentence: a line that never pauses, at a wrong rate."""

POLL_S = 0.02

Searching = Generator[None, None, "Found"]


class Wire(Protocol):
    """A port as the search needs it."""

    def set_rate(self, baud: int) -> None:
        """Listen at another rate; forget what was not yet read."""

    def read(self) -> bytes:
        """What has come, perhaps nothing. Raises SourceError when the port is lost."""


@dataclass(frozen=True, slots=True)
class Found:
    """The end of a search."""

    hearing: Hearing
    baud: int | None = None
    """The rate at which that was heard; None where nothing says which is right."""
    seconds: float = 0.0
    heard: tuple[Chunk, ...] = field(default=(), repr=False)
    """What came at that rate, for whoever reads on."""


def search(wire: Wire, clock: Clock, *, rates: tuple[int, ...] = RATES, search_s: float = SEARCH_S) -> Searching:
    """Find the rate at which a line makes sense. A generator: it yields when it waits, and returns what it found.

    A second round, with what time is left, hears each rate out: sentences may stand between binary messages.
    Raises SourceError when the port is lost while it is listened to.
    """
    began = clock.steady()
    tried: dict[int, Found] = {}
    for patient in (False, True):
        order = sorted(rates, key=lambda baud: -_worth(tried[baud])[0]) if patient else rates
        for number, baud in enumerate(order):
            left_s = began + search_s - clock.steady()
            if left_s <= 0.0:
                break
            wire.set_rate(baud)
            share_s = SILENT_S if not tried else max(LISTEN_S, left_s / (len(order) - number))
            heard = yield from _listen(wire, clock, min(left_s, share_s), patient)
            hearing = judge(b"".join(c.data for c in heard))
            found = Found(hearing, baud, clock.steady() - began, tuple(heard))
            if hearing.content in ("nmea", "binary"):
                # Binary messages with good checksums show the rate as well as sentences do; for sentences between
                # them this rate was heard out.
                return found
            if hearing.content == "silent" and not tried:
                return Found(hearing, None, found.seconds)
            tried[baud] = max(found, tried.get(baud, found), key=_worth)
        if len(tried) < len(rates):
            break
    best = max(tried.values(), key=_worth)
    sure = best.hearing.content in ("binary", "text")
    return Found(best.hearing, best.baud if sure else None, clock.steady() - began)


def _listen(wire: Wire, clock: Clock, wait_s: float, patient: bool) -> Generator[None, None, list[Chunk]]:
    """What comes at one rate, until it is clear or ``wait_s`` is over."""
    heard: list[Chunk] = []
    size = judged = 0
    began = last = first = clock.steady()
    while clock.steady() - began < wait_s:
        now = clock.steady()
        if data := wire.read():
            first = first if heard else now
            heard.append(Chunk(data, clock.now()))
            size += len(data)
            last = now
        over = now - last >= PAUSE_S or (now - first >= BURST_S and size >= BURST_BYTES)
        if size - judged >= JUDGED_BYTES or (over and size > judged):
            judged = size
            content = judge(b"".join(c.data for c in heard)).content
            if content == "nmea":
                break
        if over and not patient and size >= JUDGED_BYTES and content == "garbage":
            break
        yield
    return heard


def _worth(found: Found) -> tuple[int, int]:
    order = ("silent", "garbage", "text", "binary", "nmea")
    return order.index(found.hearing.content), found.hearing.sentences


@dataclass(frozen=True, slots=True)
class Port:
    """A serial port of this computer, as the system describes it."""

    device: str
    description: str = ""
    identity: str = ""
    """What stays when the name changes: USB numbers and serial number, else the place where it is plugged."""


def serial_ports() -> list[Port]:
    """The ports that exist, by name."""
    from serial.tools.list_ports import comports

    ports = []
    for port in comports():
        known = port.description if port.description and port.description != "n/a" else ""
        where = port.serial_number or port.location or ""
        identity = f"{port.vid:04X}:{port.pid:04X} {where}" if port.vid is not None and port.pid is not None else ""
        ports.append(Port(port.device, known, identity))
    return sorted(ports, key=lambda port: port.device)


class SerialWire:
    """A real port, open for a search."""

    def __init__(self, device: str) -> None:
        """Open it; raises SourceError."""
        from gnssmon.sources.serial_port import opened

        self.device = device
        self.line = opened(device, RATES[0])

    def set_rate(self, baud: int) -> None:
        try:
            self.line.baudrate = baud
            self.line.reset_input_buffer()
        except (OSError, ValueError) as error:
            raise SourceError(f"'{self.device}' does not take {baud} baud: {error}") from error

    def read(self) -> bytes:
        from gnssmon.sources.serial_port import lost_because, take_waiting

        data = bytearray()
        try:
            take_waiting(self.line, data)
        except (OSError, TypeError) as error:
            if data:
                return bytes(data)
            raise SourceError(f"'{self.device}' is lost: {lost_because(error)}") from error
        return bytes(data)

    def close(self) -> None:
        with contextlib.suppress(OSError):
            self.line.close()


def run_searches(searches: Mapping[str, Searching], clock: Clock) -> dict[str, Found | SourceError]:
    """Run searches side by side until each is over; a lost port ends its own search only."""
    running = dict(searches)
    ended: dict[str, Found | SourceError] = {}
    while running:
        for name, one in list(running.items()):
            try:
                next(one)
            except StopIteration as stop:
                ended[name] = stop.value
                del running[name]
            except SourceError as error:
                ended[name] = error
                del running[name]
        if running:
            clock.sleep(POLL_S)
    return ended


def find_ports(
    clock: Clock, *, ports: Sequence[Port] | None = None, open_wire: Callable[[str], SerialWire] = SerialWire
) -> list[tuple[Port, Found | SourceError]]:
    """Listen to all ports at once; each with what was found there or why it could not be listened to."""
    ports = serial_ports() if ports is None else ports
    wires: dict[str, SerialWire] = {}
    results: dict[str, Found | SourceError] = {}
    try:
        for port in ports:
            try:
                wires[port.device] = open_wire(port.device)
            except SourceError as error:
                results[port.device] = error
        results |= run_searches({device: search(wire, clock) for device, wire in wires.items()}, clock)
    finally:
        for wire in wires.values():
            wire.close()
    return [(port, results[port.device]) for port in ports]


def pick_port(clock: Clock, found: Sequence[tuple[Port, Found | SourceError]] | None = None) -> str:
    """The address (``/dev/ttyUSB0@9600``) of the port that speaks NMEA, the one found first where several do.

    Raises SourceError that says what was tried.
    """
    results = find_ports(clock) if found is None else found
    if not results:
        raise SourceError("this computer has no serial port: plug in the receiver, or name a log or 'tcp://HOST:PORT'")
    speaking = [(p, f) for p, f in results if isinstance(f, Found) and f.hearing.content == "nmea"]
    if speaking:
        port, found_there = min(speaking, key=lambda row: row[1].seconds)
        return f"{port.device}@{found_there.baud}"
    raise SourceError("no port speaks NMEA: " + "; ".join(f"{port.device} {told(f)}" for port, f in results))


def told(found: Found | SourceError) -> str:
    """One clause for people."""
    if isinstance(found, SourceError):
        return str(found)
    if found.hearing.content == "nmea":
        return f"speaks NMEA at {found.baud} baud, {found.hearing.framing}"
    if found.hearing.content == "silent":
        return f"is silent (heard nothing for {found.seconds:.0f} s): is the receiver powered, is its output on?"
    at = f" at {found.baud} baud" if found.baud is not None else " at any rate from 4800 to 921600 baud"
    return f"sends {found.hearing.what}{at}"


def open_found(device: str, label: str, clock: Clock) -> SerialPort:
    """Search the rate of one port and open it there; what the search heard at that rate comes first.

    Raises SourceError when it cannot be opened, or speaks no NMEA.
    """
    from gnssmon.sources.serial_port import SerialPort

    wire = SerialWire(device)
    try:
        found = run_searches({device: search(wire, clock)}, clock)[device]
        if isinstance(found, SourceError):
            raise found
        if found.hearing.content != "nmea" or found.baud is None:
            raise SourceError(f"'{device}' {told(found)}; to read it all the same, give its rate: {device}@9600")
        if found.hearing.framing != "8N1":
            wire.close()
            return SerialPort(label, clock, port=device, baud=found.baud, framing=found.hearing.framing)
        source = SerialPort(label, clock, port=device, baud=found.baud, line=wire.line, heard=found.heard)
        if os.path.realpath(device).startswith("/dev/pts/"):
            source.baud = None  # Any rate "works" on a pseudo-terminal: the one found says nothing.
        return source
    except BaseException:
        wire.close()
        raise
