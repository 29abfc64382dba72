"""Network sources over the loopback interface: refused, closed, reset, unknown, in use."""

from __future__ import annotations

import errno
import socket
import struct

import pytest

from gnssmon.clocks import SystemClock
from gnssmon.errors import SourceError
from gnssmon.sources import open_source
from gnssmon.sources.network import reason

CLOCK = SystemClock()


def free_port(kind: int = socket.SOCK_STREAM) -> int:
    with socket.socket(socket.AF_INET, kind) as probe:
        probe.bind(("127.0.0.1", 0))
        port: int = probe.getsockname()[1]
        return port


def test_a_peer_that_says_goodbye_is_the_end() -> None:
    """An orderly close ends the stream without an error, behind all of its bytes."""
    with socket.create_server(("127.0.0.1", 0)) as server:
        source = open_source(f"tcp://127.0.0.1:{server.getsockname()[1]}", clock=CLOCK)
        peer, _ = server.accept()
        peer.sendall(b"abc" * 50_000)
        peer.close()

    assert b"".join(chunk.data for chunk in source.chunks()) == b"abc" * 50_000


def test_a_peer_that_breaks_off_is_a_loss() -> None:
    """A reset connection is told as lost."""
    with socket.create_server(("127.0.0.1", 0)) as server:
        source = open_source(f"tcp://127.0.0.1:{server.getsockname()[1]}", clock=CLOCK)
        peer, _ = server.accept()
        # Closing with linger 0 sends a reset (socket(7), SO_LINGER).
        peer.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, struct.pack("ii", 1, 0))
        peer.close()

    with pytest.raises(SourceError, match="is lost: the peer cut the connection"):
        list(source.chunks())


def test_each_datagram_is_a_chunk() -> None:
    """Datagrams keep their borders, and need no sender to be there first."""
    port = free_port(socket.SOCK_DGRAM)
    source = open_source(f"udp://127.0.0.1:{port}", clock=CLOCK)
    with socket.socket(socket.AF_INET, socket.SOCK_DGRAM) as sender:
        sent = [b"one", b"x" * 60_000, b"three"]
        for data in sent:
            sender.sendto(data, ("127.0.0.1", port))
    chunks = source.chunks()

    assert [next(chunks).data for _ in sent] == sent
    source.close()


def test_multicast_is_joined() -> None:
    """A multicast address is joined as a group; two listeners on one computer both can."""
    port = free_port(socket.SOCK_DGRAM)
    sources = [open_source(f"udp://239.255.77.77:{port}", clock=CLOCK) for _ in range(2)]
    for source in sources:
        source.close()


def test_errors_at_opening() -> None:
    """Refused, unknown host, a port in use, an address of nobody here: each with its reason in one line."""
    with pytest.raises(SourceError, match="nothing listens there"):
        open_source(f"tcp://127.0.0.1:{free_port()}", clock=CLOCK)
    with pytest.raises(SourceError, match=r"name cannot be resolved|no host name"):
        open_source("tcp://no-such-host.invalid:10110", clock=CLOCK)
    with pytest.raises(SourceError, match=r"no host name|cannot be resolved"):
        open_source(f"tcp://{'a' * 70}.invalid:10110", clock=CLOCK)
    with pytest.raises(SourceError, match="none of this computer's interfaces"):
        open_source("udp://192.0.2.1:10110", clock=CLOCK)
    port = free_port(socket.SOCK_DGRAM)
    first = open_source(f"udp://127.0.0.1:{port}", clock=CLOCK)
    with pytest.raises(SourceError, match="another program already listens"):
        open_source(f"udp://127.0.0.1:{port}", clock=CLOCK)
    first.close()


def test_every_reason_is_a_sentence_for_people() -> None:
    """Known error numbers get advice, others the system's own words."""
    assert "firewall" in reason(TimeoutError("timed out"))
    assert reason(OSError(errno.ENOSPC, "No space left on device")) == "No space left on device"
