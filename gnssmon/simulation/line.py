"""The serial line: how fast bytes leave, what is lost when they cannot, and what is damaged on the way.

A receiver writes an epoch into a transmit buffer that drains at the baud rate (10 bits a byte, 8N1). What does not fit
is lost: mostly whole sentences, now and then the rest of one that was begun.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

BUFFER_BYTES = 4096
BITS_PER_BYTE = 10
CUT_SHARE = 0.1
"""Share of the sentences lost to a full buffer of which the beginning still got through."""
PREAMBLE = 0xD3
"""First byte of a binary correction message (RTCM 3)."""


@dataclass(slots=True)
class Losses:
    """What the line has done, as truth."""

    sent_bytes: int = 0
    offered_bytes: int = 0
    sentences: int = 0
    missing_sentences: int = 0
    cut_sentences: int = 0
    damaged_bits: int = 0
    lost_bytes: int = 0
    binary_bytes: int = 0
    longest_delay_s: float = 0.0


class Wire:
    """Takes epochs, gives bytes with their time of arrival."""

    def __init__(self, baud: int, *, bit_error_rate: float, byte_loss_rate: float, rng: np.random.Generator) -> None:
        self._rate = baud / BITS_PER_BYTE
        self._bit_errors, self._byte_losses = bit_error_rate, byte_loss_rate
        self._rng = rng
        self._free_s = 0.0
        """When the buffer will be empty."""
        self.losses = Losses()

    def send(
        self, ready_s: float, sentences: list[str], *, binary: int = 0, bit_errors: float = 0.0
    ) -> tuple[float, bytes]:
        """Bytes that leave for an epoch that is ready at ``ready_s``, and when the last of them arrives."""
        parts: list[bytes] = []
        losses = self.losses
        for text in sentences:
            data = text.encode("ascii")
            losses.offered_bytes += len(data)
            losses.sentences += 1
            room = BUFFER_BYTES - max(0.0, self._free_s - ready_s) * self._rate
            if len(data) > room:
                if room >= 10 and self._rng.random() < CUT_SHARE:
                    data = data[: int(room)]
                    losses.cut_sentences += 1
                else:
                    losses.missing_sentences += 1
                    continue
            self._free_s = max(self._free_s, ready_s) + len(data) / self._rate
            parts.append(data)
        if binary:
            message = bytes([PREAMBLE]) + self._rng.bytes(max(0, binary - 1))
            losses.binary_bytes += binary
            self._free_s = max(self._free_s, ready_s) + len(message) / self._rate
            parts.insert(int(self._rng.integers(0, len(parts) + 1)), message)
        data = self._damaged(b"".join(parts), bit_errors)
        losses.sent_bytes += len(data)
        arrival_s = max(self._free_s, ready_s)
        losses.longest_delay_s = max(losses.longest_delay_s, arrival_s - ready_s)
        return arrival_s, data

    def _damaged(self, data: bytes, more: float) -> bytes:
        rate = self._bit_errors + more
        if rate > 0.0 and data:
            flips = int(self._rng.binomial(8 * len(data), min(rate, 1.0)))
            if flips:
                values = np.frombuffer(data, dtype=np.uint8).copy()
                at = self._rng.integers(0, 8 * len(data), flips)
                np.bitwise_xor.at(values, at // 8, (1 << (at % 8)).astype(np.uint8))
                self.losses.damaged_bits += flips
                data = values.tobytes()
        if self._byte_losses > 0.0 and data:
            kept = self._rng.random(len(data)) >= self._byte_losses
            if not kept.all():
                self.losses.lost_bytes += int((~kept).sum())
                data = np.frombuffer(data, dtype=np.uint8)[kept].tobytes()
        return data
