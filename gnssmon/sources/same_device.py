"""Opens a serial receiver again: the same device though its name changed, at the rate that it has now."""

from __future__ import annotations

import os
from collections.abc import Callable

from gnssmon.clocks import Clock
from gnssmon.errors import SourceError
from gnssmon.sources.address import Address
from gnssmon.sources.finding import Port, open_found, serial_ports
from gnssmon.sources.hearing import Framing
from gnssmon.sources.serial_port import SerialPort


class SameDevice:
    """Call it for an open source; call it again when that one was lost."""

    def __init__(self, address: Address, clock: Clock, *, ports: Callable[[], list[Port]] = serial_ports) -> None:
        self._address = address
        self._clock = clock
        self._ports = ports
        self._identity: str | None = None
        """Of the device first opened; None before, empty where it has none."""
        self._last: SerialPort | None = None

    def __call__(self) -> SerialPort:
        """Raises SourceError when the device is not there or cannot be opened."""
        device, last = self._device(), self._last
        if last is None and self._address.baud is None:
            self._last = open_found(device, self._address.text, self._clock)
        elif last is None:
            self._last = self._at(device, self._address.baud, "8N1")
        elif not last.spoiled:
            self._last = self._at(device, last.rate, last.framing)
            self._last.baud = last.baud
        else:
            try:
                self._last = open_found(device, self._address.text, self._clock)
            except SourceError:
                # No rate makes sense, so it was not the rate: stay with the last one and wait for better.
                self._last = self._at(device, last.rate, last.framing)
        return self._last

    def _at(self, device: str, baud: int | None, framing: Framing) -> SerialPort:
        return SerialPort(self._address.text, self._clock, port=device, baud=baud, framing=framing)

    def _device(self) -> str:
        """Where our device is now."""
        device = self._address.target
        if "://" in device:
            return device
        there = {os.path.realpath(port.device): port for port in self._ports()}
        here = there.get(os.path.realpath(device))
        if self._identity is None:
            self._identity = here.identity if here is not None else ""
        if not self._identity or (here is not None and here.identity == self._identity):
            return device
        for port in there.values():
            if port.identity == self._identity:
                return port.device
        raise SourceError(f"'{device}' is not plugged in")
