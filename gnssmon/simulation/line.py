"""The serial line: how fast bytes leave, what is lost when they cannot, and what is damaged on the way.

A receiver writes an epoch into a transmit buffer that drains at the baud rate (10 bits a byte, 8N1). What does not fit
is lost: mostly whole sentences, now and then the rest of one that was begun. The host reads what has come a few times
a second.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from gnssmon.simulation.rtcm import frame

BUFFER_BYTES = 4096
BITS_PER_BYTE = 10
CUT_SHARE = 0.1
"""Share of the sentences lost to a full buffer of which the beginning still got through."""
READING_S = 0.25
"""Bytes that come within so long are read at once, at the end of it."""


@dataclass(slots=True)
class Losses:
    """What the line has done, as truth."""

    offered_bytes: int = 0
    """Of sentences and binary messages that the receiver wanted to send."""
    sent_bytes: int = 0
    """That arrived at the host."""
    sentences: int = 0
    missing_sentences: int = 0
    cut_sentences: int = 0
    damaged_bits: int = 0
    damaged_sentences: int = 0
    """With flipped bits or dropped bytes anywhere, line end included."""
    lost_bytes: int = 0
    """Dropped on the way."""
    binary_bytes: int = 0
    longest_delay_s: float = 0.0
    """From the first moment an epoch could be sent to the arrival of its last byte."""


class Wire:
    """Takes epochs, gives bytes with their times of arrival."""

    def __init__(
        self, baud: int, *, bit_error_rate: float, byte_loss_rate: float, jitter_s: float, rng: np.random.Generator
    ) -> None:
        self._rate = baud / BITS_PER_BYTE
        self._bit_errors, self._byte_losses = bit_error_rate, byte_loss_rate
        self._jitter_s = jitter_s
        self._rng = rng
        self._free_s = 0.0
        """When the buffer will be empty."""
        self._last_s = -np.inf
        self.losses = Losses()

    def send(
        self, ready_s: float, sentences: list[str], *, binary: int = 0, bit_errors: float = 0.0
    ) -> list[tuple[float, bytes]]:
        """Pieces of bytes that leave for an epoch that is ready at ``ready_s``, each with the arrival of its last."""
        free_s = max(self._free_s, ready_s)
        waiting: list[bytes] = []
        pieces: list[tuple[float, bytes]] = []
        begun_s = free_s
        for data in self._fitting(ready_s, free_s, self._messages(sentences, binary)):
            free_s += len(data) / self._rate
            waiting.append(self._damaged(data, bit_errors))
            if free_s - begun_s >= READING_S:
                pieces.append((self._read_at(free_s), b"".join(waiting)))
                waiting, begun_s = [], free_s
        if any(waiting):
            pieces.append((self._read_at(free_s), b"".join(waiting)))
        self._free_s = free_s
        self.losses.sent_bytes += sum(len(data) for _, data in pieces)
        self.losses.longest_delay_s = max(self.losses.longest_delay_s, free_s - ready_s)
        return pieces

    def _messages(self, sentences: list[str], binary: int) -> list[bytes]:
        messages = [text.encode("ascii") for text in sentences]
        self.losses.sentences += len(messages)
        if binary:
            message = frame(self._rng.bytes(binary))
            self.losses.binary_bytes += len(message)
            messages.insert(int(self._rng.integers(0, len(messages) + 1)), message)
        return messages

    def _fitting(self, ready_s: float, free_s: float, messages: list[bytes]) -> list[bytes]:
        """What the buffer takes, all at once, at the moment the epoch is ready."""
        losses = self.losses
        room = BUFFER_BYTES - (free_s - ready_s) * self._rate
        taken = []
        for data in messages:
            losses.offered_bytes += len(data)
            if len(data) > room:
                cut = room >= 10 and self._rng.random() < CUT_SHARE
                losses.cut_sentences += cut
                losses.missing_sentences += not cut
                if not cut:
                    continue
                data = data[: int(room)]
            room -= len(data)
            taken.append(data)
        return taken

    def _read_at(self, free_s: float) -> float:
        jitter_s = float(self._rng.exponential(self._jitter_s)) if self._jitter_s else 0.0
        self._last_s = max(self._last_s, free_s + jitter_s)
        return self._last_s

    def _damaged(self, data: bytes, more: float) -> bytes:
        rate = self._bit_errors + more
        if rate <= 0.0 and self._byte_losses <= 0.0:
            return data
        values = np.frombuffer(data, dtype=np.uint8).copy()
        flips = int(self._rng.binomial(8 * len(data), min(rate, 1.0)))
        at = self._rng.choice(8 * len(data), flips, replace=False)
        np.bitwise_xor.at(values, at // 8, (1 << (at % 8)).astype(np.uint8))
        kept = self._rng.random(len(data)) >= self._byte_losses
        lost = int((~kept).sum())
        self.losses.damaged_bits += flips
        self.losses.lost_bytes += lost
        self.losses.damaged_sentences += bool(flips or lost)
        return values[kept].tobytes()
