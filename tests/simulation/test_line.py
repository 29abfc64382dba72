"""The line: speed, saturation, damage, by arithmetic."""

from __future__ import annotations

import numpy as np
import pytest

from gnssmon.simulation.line import Wire
from gnssmon.simulation.rtcm import crc24q, frame

SENTENCE = "$" + "X" * 77 + "\r\n"
"""80 bytes."""


def wire(baud: int, *, bit_error_rate: float = 0.0, byte_loss_rate: float = 0.0, jitter_s: float = 0.0) -> Wire:
    return Wire(
        baud,
        bit_error_rate=bit_error_rate,
        byte_loss_rate=byte_loss_rate,
        jitter_s=jitter_s,
        rng=np.random.default_rng(1),
    )


def test_time_of_arrival_is_that_of_the_last_byte():
    """80 bytes take 800 bits: 83 ms at 9600 Bd (8N1, ten bits a byte)."""
    assert wire(9600).send(5.0, [SENTENCE]) == [(pytest.approx(5.0 + 800 / 9600), SENTENCE.encode())]


def test_slow_bytes_come_in_pieces():
    """An epoch that takes longer than a reading comes in several pieces, in order, none lost."""
    pieces = wire(4800).send(0.0, [SENTENCE] * 10)
    times = [at for at, _ in pieces]

    assert b"".join(data for _, data in pieces) == (SENTENCE * 10).encode()
    assert times == sorted(times)
    assert times[-1] == pytest.approx(8000 / 4800)
    assert len(pieces) >= 5


def test_saturation_arithmetic():
    """19 330 B/s offered to 115 200 Bd fill 4096 bytes in 0.52 s; then 40.4 % of the bytes are lost and sentences are
    0.36 s late (NMEA sheet, section 12)."""
    line = wire(115_200)
    late, full_s = [], None
    for number in range(60 * 19_330 // 80):
        ready_s = number * 80 / 19_330
        pieces = line.send(ready_s, [SENTENCE])
        late += [at - ready_s for at, _ in pieces]
        if full_s is None and line.losses.missing_sentences + line.losses.cut_sentences:
            full_s = ready_s

    assert full_s == pytest.approx(0.52, abs=0.02)
    assert 1 - line.losses.sent_bytes / line.losses.offered_bytes == pytest.approx(0.404, abs=0.005)
    assert np.median(late[1000:]) == pytest.approx(0.36, abs=0.01)
    assert line.losses.missing_sentences > 5 * line.losses.cut_sentences > 0


@pytest.mark.parametrize(("baud", "load"), [(9600, 2.23), (19_200, 1.12), (38_400, 0.56), (115_200, 0.19)])
def test_load_of_the_reference_epoch(baud, load):
    """2142 bytes a second are 223, 112, 56 and 19 % of these rates (NMEA sheet, section 9)."""
    assert 2142 * 10 / baud == pytest.approx(load, abs=0.005)
    line = wire(baud)
    for epoch in range(60):
        line.send(float(epoch), ["X" * 21] * 102)

    assert (line.losses.missing_sentences > 0) == (load > 1.0)
    assert (line.losses.longest_delay_s > 1.0) == (load > 1.0)


def test_damage_is_what_is_asked_for():
    """Flipped bits and lost bytes come at their rates, and what is counted is what happened."""
    line = wire(921_600, bit_error_rate=1e-4, byte_loss_rate=2e-4)
    sent = got = 0
    for epoch in range(200):
        pieces = line.send(float(epoch), [SENTENCE] * 40)
        sent += 40 * 80
        got += sum(len(data) for _, data in pieces)

    bits = 8 * sent
    assert line.losses.damaged_bits == pytest.approx(1e-4 * bits, abs=4 * (1e-4 * bits) ** 0.5)
    assert line.losses.lost_bytes == pytest.approx(2e-4 * sent, abs=4 * (2e-4 * sent) ** 0.5)
    assert sent - got == line.losses.lost_bytes
    assert 0 < line.losses.damaged_sentences <= line.losses.damaged_bits + line.losses.lost_bytes


def test_arrivals_never_go_back():
    """Jitter delays, it never reorders."""
    line = wire(115_200, jitter_s=0.05)
    times = [at for epoch in range(500) for at, _ in line.send(epoch * 0.02, [SENTENCE])]

    assert times == sorted(times)


def test_cyclic_redundancy_check():
    """CRC-24Q of "123456789" is CDE703 (catalogue of parametrised CRC algorithms, CRC-24/LTE-A)."""
    assert crc24q(b"123456789") == 0xCDE703


def test_binary_frame():
    """A well-known message from the standard's own example: type 1005, 19 bytes, ends in its check (RTCM 10403.1,
    section 4.2, as quoted widely)."""
    published = bytes.fromhex("D300133ED7D30202980EDEEF34B4BD62AC0941986F33360B98")

    assert frame(published[3:-3]) == published
