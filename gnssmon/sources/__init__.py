"""Sources: open what the user named.

The list of kinds is ``SCHEMES``; each opener imports what it needs when it is called, so that reading a log never
loads pyserial.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from gnssmon.clocks import Clock
from gnssmon.errors import SourceError
from gnssmon.sources.address import Address, parse_address
from gnssmon.sources.source import Source

RATELESS = ("socket://", "loop://")
"""pyserial's URLs that lead to no line with a rate."""


@dataclass(frozen=True, slots=True)
class Scheme:
    """One kind of source."""

    key: str
    """As in ``Address.scheme``."""
    example: str
    meaning: str
    """One line of help."""
    open: Callable[[Address, Clock], Source]
    """Raises SourceError."""
    may_return: bool = False
    """Lost, it may come back: worth trying again."""


def _serial(address: Address, clock: Clock) -> Source:
    from gnssmon.sources.finding import open_found
    from gnssmon.sources.serial_port import SerialPort

    if address.target.lower().startswith(RATELESS):
        return SerialPort(address.text, clock, port=address.target, baud=None)
    if address.baud is None:
        return open_found(address.target, address.text, clock)
    return SerialPort(address.text, clock, port=address.target, baud=address.baud)


def _tcp(address: Address, clock: Clock) -> Source:
    from gnssmon.sources.network import TcpStream

    return TcpStream(address, clock)


def _udp(address: Address, clock: Clock) -> Source:
    from gnssmon.sources.network import UdpDatagrams

    return UdpDatagrams(address, clock)


def _log(address: Address, clock: Clock) -> Source:
    from gnssmon.recording.folder import has_arrivals
    from gnssmon.sources.log_file import LogFile

    path = Path(address.target)
    if has_arrivals(path):
        return _recording(address, clock)
    return LogFile(path, label=address.text)


def _recording(address: Address, clock: Clock) -> Source:
    from gnssmon.sources.recorded import Recording

    return Recording(Path(address.target), label=address.text)


def _pipe(address: Address, clock: Clock) -> Source:
    from gnssmon.sources.standard_input import named_pipe

    return named_pipe(address.target, clock)


def _stdin(address: Address, clock: Clock) -> Source:
    from gnssmon.sources.standard_input import standard_input

    return standard_input(clock)


def _sim(address: Address, clock: Clock) -> Source:
    from gnssmon.sources.simulated import Simulated

    return Simulated(address.text, address.target)


SCHEMES: tuple[Scheme, ...] = (
    Scheme("serial", "/dev/ttyUSB0@9600", "a serial port; without @BAUD the rate is found", _serial, may_return=True),
    Scheme("url", "rfc2217://server:4000", "any URL that pyserial opens", _serial, may_return=True),
    Scheme("tcp", "tcp://192.168.1.20:10110", "a TCP server", _tcp, may_return=True),
    Scheme("udp", "udp://:10110", "datagrams to a port of this computer; a multicast group is joined", _udp),
    Scheme("log", "site.nmea.gz", "a log file, plain, .gz, .bz2, .xz (.zst from Python 3.14 on)", _log),
    Scheme("recording", "2025-05-20_roof/", "a folder that 'gnssmon record' has written", _recording),
    Scheme("pipe", "receiver.fifo", "a named pipe", _pipe),
    Scheme("stdin", "-", "standard input", _stdin),
    Scheme("sim", "sim:open_roof", "a simulated receiver; 'sim:open_roof?seed=7&duration=24h' chooses the run", _sim),
)


def scheme_of(address: Address) -> Scheme:
    """The row of ``SCHEMES`` for this address."""
    for scheme in SCHEMES:
        if scheme.key == address.scheme:
            return scheme
    raise SourceError(f"'{address.text}' cannot be read: a source of the kind '{address.scheme}' is not known")


def open_source(text: str, *, clock: Clock) -> Source:
    """Open what ``text`` names (see ``SCHEMES``). Raises SourceError: what, why, what to try, in one line."""
    address = parse_address(text)
    return scheme_of(address).open(address, clock)


def hold_source(text: str, *, clock: Clock, give_up_s: float | None = None) -> Source:
    """Open what ``text`` names and hold on to it: a live source that is lost is opened again when it returns.

    ``give_up_s``: a loss that lasts so long is final; None: never. Logs, pipes and simulations are opened as by
    ``open_source``. Raises SourceError when it cannot be opened now.
    """
    from gnssmon.sources.reconnecting import Reconnecting

    address = parse_address(text)
    scheme = scheme_of(address)
    if not scheme.may_return:
        return scheme.open(address, clock)
    if scheme.key == "serial":
        from gnssmon.sources.same_device import SameDevice

        return Reconnecting(SameDevice(address, clock), clock, give_up_s=give_up_s)
    return Reconnecting(lambda: scheme.open(address, clock), clock, give_up_s=give_up_s)
