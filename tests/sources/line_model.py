"""A model of a serial line, bit by bit: what a UART hears that listens at another rate than the sender's.

The receiver follows the textbook: it waits for a falling edge, samples the middle of the start bit, of each data bit
and of the stop bit at its own rate, and hands the byte on; a stop bit that is low is a framing error, delivered as a
zero byte (what Linux does without IGNPAR and PARMRK: termios(3)), and the line must be high before the next edge.
"""

from __future__ import annotations

from bisect import bisect_right

import numpy as np

from gnssmon.clocks import ManualClock


def bits_of(data: bytes, framing: str) -> np.ndarray:
    """The line's levels, one per bit time: start bit, data bits from the lowest, parity, stop bits."""
    width, parity, stops = int(framing[0]), framing[1], int(framing[2])
    values = np.frombuffer(data, dtype=np.uint8)
    low_first = np.unpackbits(values[:, None], axis=1, bitorder="little")[:, :width]
    columns = [np.zeros((len(values), 1), dtype=np.uint8), low_first]
    if parity == "E":
        columns.append(low_first.sum(axis=1, keepdims=True).astype(np.uint8) % 2)
    columns.append(np.ones((len(values), stops), dtype=np.uint8))
    return np.concatenate(columns, axis=1).ravel()


def hear(levels: np.ndarray, sent_baud: int, heard_baud: int, start_s: float) -> tuple[list[float], bytes]:
    """What a UART at ``heard_baud`` (8N1) makes of levels sent from ``start_s`` on: times and bytes."""
    bit_s = 1.0 / sent_baud
    edges = (np.flatnonzero(np.diff(np.concatenate([[1], levels.astype(np.int8)])) == -1) * bit_s).tolist()

    def level(at_s: float) -> int:
        index = int(at_s / bit_s)
        return int(levels[index]) if index < len(levels) else 1

    times, heard = [], bytearray()
    number = 0
    while number < len(edges):
        edge_s = edges[number]
        samples = [level(edge_s + (k + 0.5) / heard_baud) for k in range(10)]
        done_s = edge_s + 9.5 / heard_baud
        if samples[0] == 0:
            value = sum(bit << k for k, bit in enumerate(samples[1:9]))
            heard.append(value if samples[9] else 0)
            times.append(start_s + done_s)
        else:
            done_s = edge_s + 0.5 / heard_baud
        number = bisect_right(edges, done_s)
    return times, bytes(heard)


class ModelWire:
    """A receiver that sends ``burst(k)`` at ``first_s + k * period_s``, as a port that can be searched."""

    def __init__(
        self,
        clock: ManualClock,
        baud: int,
        bursts: list[bytes],
        *,
        framing: str = "8N1",
        period_s: float = 1.0,
        first_s: float = 0.5,
    ) -> None:
        self._clock, self._baud, self._period_s, self._first_s = clock, baud, period_s, first_s
        self._levels = [bits_of(burst, framing) for burst in bursts]
        self._listening = 9600
        self._from_s = 0.0
        self._cache: dict[tuple[int, int], tuple[list[float], bytes]] = {}

    def set_rate(self, baud: int) -> None:
        self._listening, self._from_s = baud, self._clock.steady()

    def read(self) -> bytes:
        now = self._clock.steady()
        # A burst may last longer than its period on a line that is too slow for it: then it is never all sent.
        first = max(0, int((self._from_s - self._first_s) / self._period_s) - 1)
        last = int((now - self._first_s) / self._period_s)
        data = b""
        for k in range(first, last + 1):
            times, heard = self._burst(k)
            data += heard[bisect_right(times, self._from_s) : bisect_right(times, now)]
        self._from_s = now
        return data

    def _burst(self, k: int) -> tuple[list[float], bytes]:
        number = k % len(self._levels)
        key = number, self._listening
        if key not in self._cache:
            most = int(self._baud * self._period_s)
            self._cache[key] = hear(self._levels[number][:most], self._baud, self._listening, 0.0)
        times, heard = self._cache[key]
        shift = self._first_s + k * self._period_s
        return [t + shift for t in times], heard
