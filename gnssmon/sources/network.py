"""TCP streams and UDP datagrams. We listen; nothing is ever sent to the peer."""

from __future__ import annotations

import errno
import ipaddress
import select
import socket
import struct

from gnssmon.clocks import Clock
from gnssmon.errors import SourceError
from gnssmon.sources.address import Address
from gnssmon.sources.source import MOST_BYTES, LiveSource

CONNECT_S = 4.0
"""How long a peer may take to answer; a satellite link needs below 1 s."""

KEEPALIVE = (("TCP_KEEPIDLE", 5), ("TCP_KEEPINTVL", 2), ("TCP_KEEPCNT", 3))
"""Seconds of silence before the peer is probed, between probes, and how many: a vanished peer is lost after 11 s."""

RECEIVE_BUFFER_BYTES = 1 << 20
"""Asked of the kernel for UDP, which drops what does not fit: 10 s at 100 kB/s."""

REASONS = {
    errno.ECONNREFUSED: "nothing listens there; is the server running, is the port right?",
    errno.EHOSTUNREACH: "no route to that host; is this computer on the same network?",
    errno.ENETUNREACH: "no route to that network; is the cable plugged, the radio on?",
    errno.ETIMEDOUT: "no answer; is the device powered, does a firewall block it?",
    errno.ECONNRESET: "the peer cut the connection",
    errno.EADDRINUSE: "another program already listens on that port",
    errno.EADDRNOTAVAIL: "that address belongs to none of this computer's interfaces",
    errno.EACCES: "permission denied; ports below 1024 need special rights",
}
"""What the operating system's number means to a technician."""


def reason(error: OSError) -> str:
    """One clause for people: what failed and what to look at."""
    if isinstance(error, socket.gaierror):
        return f"the host's name cannot be resolved ({error.strerror}); is it spelt right, does the network work?"
    if isinstance(error, TimeoutError):
        return REASONS[errno.ETIMEDOUT]
    return REASONS.get(error.errno or 0, error.strerror or str(error))


class TcpStream(LiveSource):
    """A client's end of a TCP connection."""

    def __init__(self, address: Address, clock: Clock) -> None:
        """Connect. Raises SourceError when that fails."""
        super().__init__(address.text, clock)
        try:
            self._socket = socket.create_connection((address.host, address.port), timeout=CONNECT_S)
        except (OSError, UnicodeError) as error:
            why = reason(error) if isinstance(error, OSError) else "that is no host name"
            raise SourceError(f"cannot connect to '{address.text}': {why}") from error
        self._socket.setsockopt(socket.SOL_SOCKET, socket.SO_KEEPALIVE, 1)
        for option, value in KEEPALIVE:
            if hasattr(socket, option):
                self._socket.setsockopt(socket.IPPROTO_TCP, getattr(socket, option), value)
        self._socket.setblocking(False)

    def _receive(self, wait_s: float) -> bytes | None:
        try:
            if not select.select([self._socket], [], [], wait_s)[0]:
                return b""
            return self._socket.recv(MOST_BYTES) or None
        except BlockingIOError:
            return b""
        except (OSError, ValueError) as error:
            if self._closing:
                return None
            why = reason(error) if isinstance(error, OSError) else str(error)
            raise SourceError(f"the connection to '{self.label}' is lost: {why}") from error

    def _release(self) -> None:
        self._socket.close()


class UdpDatagrams(LiveSource):
    """Datagrams to one port of this computer: unicast, broadcast, or of a multicast group; one chunk each."""

    def __init__(self, address: Address, clock: Clock) -> None:
        """Bind, and join where the address is a multicast group. Raises SourceError when that fails."""
        super().__init__(address.text, clock)
        self._socket = None
        try:
            family, _, _, _, where = socket.getaddrinfo(
                address.host or None, address.port, type=socket.SOCK_DGRAM, flags=socket.AI_PASSIVE
            )[0]
            self._socket = socket.socket(family, socket.SOCK_DGRAM)
            self._socket.setsockopt(socket.SOL_SOCKET, socket.SO_RCVBUF, RECEIVE_BUFFER_BYTES)
            group = ipaddress.ip_address(str(where[0]).partition("%")[0])
            if group.is_multicast:
                # Several programs may listen to one group on one computer.
                self._socket.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
            self._socket.bind(where)
            if group.is_multicast:
                _join(self._socket, group)
        except (OSError, UnicodeError) as error:
            if self._socket is not None:
                self._socket.close()
            why = reason(error) if isinstance(error, OSError) else "that is no address"
            raise SourceError(f"cannot listen on '{address.text}': {why}") from error
        self._socket.setblocking(False)

    def _receive(self, wait_s: float) -> bytes | None:
        assert self._socket is not None
        try:
            if not select.select([self._socket], [], [], wait_s)[0]:
                return b""
            return self._socket.recv(MOST_BYTES)
        except BlockingIOError:
            return b""
        except (OSError, ValueError) as error:
            if self._closing:
                return None
            why = reason(error) if isinstance(error, OSError) else str(error)
            raise SourceError(f"'{self.label}' can no longer be listened to: {why}") from error

    def _release(self) -> None:
        if self._socket is not None:
            self._socket.close()


def _join(listener: socket.socket, group: ipaddress.IPv4Address | ipaddress.IPv6Address) -> None:
    if group.version == 4:
        membership = struct.pack("4s4s", group.packed, socket.inet_aton("0.0.0.0"))
        listener.setsockopt(socket.IPPROTO_IP, socket.IP_ADD_MEMBERSHIP, membership)
    else:
        membership = struct.pack("16sI", group.packed, 0)
        listener.setsockopt(socket.IPPROTO_IPV6, socket.IPV6_JOIN_GROUP, membership)
