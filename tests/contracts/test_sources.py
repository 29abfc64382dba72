"""Every kind of source keeps the contract; a kind without a line here fails the last test."""

from __future__ import annotations

import gzip
import os
import socket
import threading
import tty
from collections.abc import Iterator
from contextlib import AbstractContextManager, contextmanager, suppress
from pathlib import Path

import pytest

from gnssmon.chunks import Chunk
from gnssmon.clocks import ManualClock, SystemClock
from gnssmon.recording.recorder import Recorder
from gnssmon.replay.between import Between
from gnssmon.replay.player import Player
from gnssmon.sources import SCHEMES, hold_source, open_source
from gnssmon.sources.source import Source
from gnssmon.sources.standard_input import Pipe
from tests.contracts.source_contract import check_source
from tests.sources.sentences import stream

DATA = stream(4)
CLOCK = SystemClock()


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "log.nmea").write_bytes(DATA)
    (tmp_path / "log.nmea.gz").write_bytes(gzip.compress(DATA))
    recorder = Recorder(tmp_path / "recording", ManualClock(), source="x")
    for at in range(0, len(DATA), 97):
        recorder(Chunk(DATA[at : at + 97], 1_700_000_000.0 + at / 1000))
    recorder.close()
    return tmp_path


@contextmanager
def opened(text: str, *, hold: bool = False) -> Iterator[tuple[Source, bytes]]:
    source = (hold_source if hold else open_source)(text, clock=CLOCK)
    try:
        yield source, DATA
    finally:
        source.close()


@contextmanager
def writing(descriptor: int) -> Iterator[None]:
    """Write DATA from another thread; pipes and terminals hold only so much."""

    def write() -> None:
        with suppress(BrokenPipeError):  # The reader may close first: that is part of the contract.
            os.write(descriptor, DATA)

    thread = threading.Thread(target=write, daemon=True)
    thread.start()
    yield
    thread.join(5.0)


@contextmanager
def pseudo_terminal(baud: str, hold: bool) -> Iterator[tuple[Source, bytes]]:
    master, slave = os.openpty()
    tty.setraw(slave)
    try:
        with opened(os.ttyname(slave) + baud, hold=hold) as made, writing(master):
            yield made
    finally:
        os.close(master)
        os.close(slave)


@contextmanager
def found_terminal() -> Iterator[tuple[Source, bytes]]:
    """A port whose rate is found: it must be sending while it is opened."""
    master, slave = os.openpty()
    tty.setraw(slave)
    stop = threading.Event()

    def send() -> None:
        while not stop.wait(0.03):
            os.write(master, DATA[:400])

    thread = threading.Thread(target=send, daemon=True)
    thread.start()
    try:
        with opened(os.ttyname(slave)) as (source, _):
            yield source, b""
    finally:
        stop.set()
        thread.join(5.0)
        os.close(master)
        os.close(slave)


@contextmanager
def tcp(prefix: str, hold: bool) -> Iterator[tuple[Source, bytes]]:
    with (
        socket.create_server(("127.0.0.1", 0)) as server,
        opened(f"{prefix}://127.0.0.1:{server.getsockname()[1]}", hold=hold) as made,
    ):
        peer, _ = server.accept()
        with peer:
            peer.sendall(DATA)
            yield made


@contextmanager
def udp(hold: bool) -> Iterator[tuple[Source, bytes]]:
    with socket.socket(socket.AF_INET, socket.SOCK_DGRAM) as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    with opened(f"udp://127.0.0.1:{port}", hold=hold) as made:
        with socket.socket(socket.AF_INET, socket.SOCK_DGRAM) as sender:
            for at in range(0, len(DATA), 500):
                sender.sendto(DATA[at : at + 500], ("127.0.0.1", port))
        yield made


@contextmanager
def fifo(path: Path) -> Iterator[tuple[Source, bytes]]:
    os.mkfifo(path)
    try:
        with opened(str(path)) as made:
            descriptor = os.open(path, os.O_WRONLY)
            with writing(descriptor):
                yield made
            os.close(descriptor)
    finally:
        path.unlink()


@contextmanager
def pipe() -> Iterator[tuple[Source, bytes]]:
    """As standard input is opened, but on a descriptor of our own."""
    reader, writer = os.pipe()
    source = Pipe("-", CLOCK, descriptor=reader)
    with writing(writer):
        yield source, DATA
    os.close(writer)
    source.close()


@contextmanager
def played(path: Path) -> Iterator[tuple[Source, bytes]]:
    yield Player(lambda: open_source(str(path), clock=CLOCK), CLOCK, rate=1000.0), DATA


@contextmanager
def cut(path: Path) -> Iterator[tuple[Source, bytes]]:
    yield Between(open_source(str(path), clock=CLOCK), for_s=60.0), DATA


@contextmanager
def simulated(rate: float | None) -> Iterator[tuple[Source, bytes]]:
    text = "sim:open_roof?duration=20s"
    expected = b"".join(chunk.data for chunk in open_source(text, clock=CLOCK).chunks())
    if rate is None:
        yield open_source(text, clock=CLOCK), expected
    else:
        yield Player(lambda: open_source(text, clock=CLOCK), CLOCK, rate=rate), expected


def makings(folder: Path) -> dict[str, AbstractContextManager[tuple[Source, bytes]]]:
    return {
        "serial": pseudo_terminal("@4800", hold=False),
        "serial, held": pseudo_terminal("@4800", hold=True),
        "serial, found": found_terminal(),
        "url": tcp("socket", hold=False),
        "url, held": tcp("socket", hold=True),
        "tcp": tcp("tcp", hold=False),
        "tcp, held": tcp("tcp", hold=True),
        "udp": udp(hold=False),
        "log": opened(str(folder / "log.nmea")),
        "log, compressed": opened(str(folder / "log.nmea.gz")),
        "log, played": played(folder / "log.nmea"),
        "log, cut": cut(folder / "log.nmea"),
        "recording": opened(str(folder / "recording")),
        "recording, played": played(folder / "recording"),
        "pipe": fifo(folder / "fifo"),
        "stdin": pipe(),
        "sim": simulated(None),
        "sim, played": simulated(100.0),
    }


NAMES = list(makings(Path()))


@pytest.mark.parametrize("name", NAMES)
def test_contract(name: str, folder: Path) -> None:
    """A source gives its bytes in order with proper stamps, and closes at any time."""
    check_source(lambda: makings(folder)[name])


def test_every_scheme_is_checked() -> None:
    """Each row of SCHEMES has at least one line above."""
    assert {scheme.key for scheme in SCHEMES} <= {name.partition(",")[0] for name in NAMES}
