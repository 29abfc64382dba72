"""Finding ports and rates: on a bit-by-bit model of the line, and on pseudo-terminals."""

from __future__ import annotations

import os
import random

import pytest

from gnssmon.clocks import ManualClock, SystemClock
from gnssmon.errors import SourceError
from gnssmon.sources.finding import (
    RATES,
    SILENT_S,
    Found,
    Port,
    find_ports,
    pick_port,
    run_searches,
    search,
    told,
)
from gnssmon.sources.hearing import NEEDED, Hearing, judge
from tests.sources.line_model import ModelWire, bits_of, hear
from tests.sources.sentences import burst, stream


def find(wire: object, clock: ManualClock) -> Found:
    found = run_searches({"port": search(wire, clock)}, clock)["port"]
    assert isinstance(found, Found)
    return found


def test_model_hears_what_was_sent_at_the_same_rate() -> None:
    """The model of the line is right where the answer is known: equal rates give equal bytes, one each bit time."""
    data = bytes(range(256))

    times, heard = hear(bits_of(data, "8N1"), 9600, 9600, 0.0)

    assert heard == data
    assert times[-1] == pytest.approx((255 * 10 + 9.5) / 9600)


def test_model_shows_a_framing_error_as_zero() -> None:
    """At twice the rate each bit is read twice: U (alternating bits) turns into other bytes, some of them zero."""
    _, heard = hear(bits_of(b"UUUU", "8N1"), 4800, 9600, 0.0)

    assert heard != b"UUUU"
    assert len(heard) > 4


@pytest.mark.parametrize("framing", ["8N1", "8N2", "7E1"])
@pytest.mark.parametrize("baud", RATES)
def test_every_rate_and_framing_is_found(baud: int, framing: str) -> None:
    """A receiver at 1 Hz is found at its own rate within 15 s, whatever moment the search begins at."""
    chance = random.Random(baud)
    clock = ManualClock()
    wire = ModelWire(clock, baud, [burst(k) for k in range(3)], framing=framing, first_s=chance.random())

    found = find(wire, clock)

    assert (found.hearing.content, found.baud) == ("nmea", baud)
    assert found.hearing.framing == ("7E1" if framing == "7E1" else "8N1")
    assert found.seconds <= 15.0


@pytest.mark.parametrize("baud", [4800, 57600, 921600])
def test_what_was_heard_is_handed_on_unaltered(baud: int) -> None:
    """The bytes heard at the right rate are a part of what was sent, so that no sentence need be lost."""
    clock = ManualClock()
    bursts = [burst(k, sentences=4) for k in range(3)]

    found = find(ModelWire(clock, baud, bursts), clock)

    heard = b"".join(chunk.data for chunk in found.heard)
    assert judge(heard).sentences >= NEEDED
    assert heard in b"".join(bursts) * 5
    assert all(chunk.received_s <= clock.now() for chunk in found.heard)


def test_wrong_rates_never_give_a_sentence() -> None:
    """No rate but the right one may be called NMEA: 72 pairs of rates, some hundred sentences each."""
    levels = bits_of(stream(20), "8N1")

    wrong = {}
    for sent in RATES:
        for heard_at in RATES:
            if sent != heard_at:
                # Slow listeners hear little of a fast line; a tenth of the stream is enough for fast ones.
                part = levels if sent > heard_at else levels[: len(levels) // 10]
                wrong[sent, heard_at] = judge(hear(part, sent, heard_at, 0.0)[1]).sentences

    assert len(wrong) == 72
    assert set(wrong.values()) == {0}


def test_silent_port() -> None:
    """A port without a single byte is called silent after one wait, not after a tour of all rates."""

    class Silent:
        def set_rate(self, baud: int) -> None: ...
        def read(self) -> bytes:
            return b""

    clock = ManualClock()

    found = find(Silent(), clock)

    assert (found.hearing.content, found.baud) == ("silent", None)
    assert SILENT_S <= found.seconds < SILENT_S + 0.1
    assert "silent" in told(found)


def test_binary_only_port() -> None:
    """A line with RTCM 3 and nothing else is named as what it is, with its rate.

    The frame is RTCM 10403's own example of message 1005, checksum included (from memory).
    """
    message = bytes.fromhex("d300133ed7d30202980edeef34b4bd62ac0941986f33360b98")
    clock = ManualClock()

    found = find(ModelWire(clock, 115200, [message * 20]), clock)

    assert (found.hearing.content, found.hearing.what, found.baud) == ("binary", "RTCM 3 messages", 115200)
    assert found.seconds <= 15.0


def test_sentences_between_binary_messages_are_found() -> None:
    """A burst that begins with a kilobyte of an unknown protocol does not hide the sentences behind it."""
    chance = random.Random(3)
    bursts = [chance.randbytes(900) + burst(k) for k in range(3)]
    clock = ManualClock()

    found = find(ModelWire(clock, 38400, bursts), clock)

    assert (found.hearing.content, found.baud) == ("nmea", 38400)


def test_random_bytes_are_no_sentences() -> None:
    """A megabyte of random bytes holds not one sentence (expected by the odds in ``hearing``: 10^-8)."""
    chance = random.Random(11)

    hearings = [judge(chance.randbytes(65536)) for _ in range(16)]

    assert [h.sentences for h in hearings] == [0] * 16
    assert {h.content for h in hearings} == {"garbage"}


def test_other_text_is_not_nmea() -> None:
    """A device that talks, but not in sentences, is told from noise."""
    assert judge(b"boot ok, waiting for host\r\n" * 10).content == "text"


class Pseudo:
    """A pseudo-terminal with bytes waiting on it; any rate reads them."""

    def __init__(self) -> None:
        import tty

        self.master, slave = os.openpty()
        tty.setraw(slave)
        self.name = os.ttyname(slave)
        self._slave = slave

    def close(self) -> None:
        os.close(self.master)
        os.close(self._slave)


def test_ports_are_searched_side_by_side() -> None:
    """Two real ports and one that does not exist: each gets its own answer, and the talking one is picked."""
    from gnssmon.sources.finding import SerialWire

    talking, silent = Pseudo(), Pseudo()

    class Prompted(SerialWire):
        """Bytes come after the port was opened, as opening drops what waited."""

        def set_rate(self, baud: int) -> None:
            super().set_rate(baud)
            if self.device == talking.name:
                os.write(talking.master, stream(2))

    try:
        ports = [Port(talking.name), Port(silent.name), Port("/dev/ttyUSB_none")]
        clock = Hurried()
        results = dict(zip("tsn", [f for _, f in find_ports(clock, ports=ports, open_wire=Prompted)], strict=True))
    finally:
        talking.close()
        silent.close()

    assert isinstance(results["t"], Found)
    assert results["t"].hearing.content == "nmea"
    assert isinstance(results["s"], Found)
    assert results["s"].hearing == Hearing("silent", what="nothing")
    assert isinstance(results["n"], SourceError)
    assert pick_port(clock, list(zip(ports, results.values(), strict=True))) == f"{talking.name}@9600"


class Hurried(SystemClock):
    """The host's clock, with a thousandth of its waits counted as whole ones: for ports that stay silent."""

    def __init__(self) -> None:
        self._ahead_s = 0.0

    def steady(self) -> float:
        return super().steady() + self._ahead_s

    def sleep(self, seconds: float) -> None:
        super().sleep(seconds / 20.0)
        self._ahead_s += seconds


def test_no_port_speaks() -> None:
    """Without a port that speaks, the error says of each what was heard."""
    silent = Found(Hearing("silent", what="nothing"), None, 6.0)
    results = [(Port("/dev/ttyA"), silent), (Port("/dev/ttyB"), SourceError("cannot open '/dev/ttyB': busy"))]

    with pytest.raises(SourceError, match=r"ttyA is silent.*ttyB.*busy"):
        pick_port(ManualClock(), results)
    with pytest.raises(SourceError, match="no serial port"):
        pick_port(ManualClock(), [])


def test_a_port_lost_during_the_search_ends_only_its_own() -> None:
    """One device unplugged while all are listened to."""

    class Lost:
        def set_rate(self, baud: int) -> None: ...
        def read(self) -> bytes:
            raise SourceError("gone")

    clock = ManualClock()
    wires = {"a": Lost(), "b": ModelWire(clock, 9600, [burst(1)])}

    results = run_searches({name: search(wire, clock) for name, wire in wires.items()}, clock)

    assert isinstance(results["a"], SourceError)
    assert isinstance(results["b"], Found)
    assert results["b"].baud == 9600
