"""What bytes look like, and when a line has turned to garbage."""

from __future__ import annotations

import random

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.sources.hearing import JUDGED_BYTES, NEEDED, Spoiling, judge
from tests.sources.sentences import burst, stream


def seven_bits(data: bytes) -> bytes:
    """As a line with 7 data bits and even parity sounds to an eight-bit ear: the parity bit on top."""
    return bytes(byte | (byte.bit_count() % 2) << 7 for byte in data)


def test_sentences_are_needed_with_good_checksums() -> None:
    """One sentence is not enough, two are; sentences with wrong checksums are text."""
    lines = burst(0).splitlines(keepends=True)

    assert judge(lines[0]).content == "text"
    assert judge(lines[0] + lines[1]).sentences == NEEDED
    assert judge(lines[0] + lines[1]).content == "nmea"
    assert judge(burst(0).replace(b"*", b"*Z")).content == "text"


def test_seven_bits_and_even_parity() -> None:
    """7E1 is heard as such, and only then; text whose bytes happen to have even parity stays what it is."""
    assert (judge(seven_bits(stream(2))).content, judge(seven_bits(stream(2))).framing) == ("nmea", "7E1")
    assert judge(stream(2)).framing == "8N1"
    assert judge(b"33333\r\n" * 50).framing == "8N1"


@pytest.mark.parametrize(
    ("frame", "name"),
    [
        # RTCM 10403's own example of message 1005 (from memory).
        (bytes.fromhex("d300133ed7d30202980edeef34b4bd62ac0941986f33360b98"), "RTCM 3 messages"),
        # Class 05, id 01, payload 06 01: checksum 0F 38 by hand from RFC 1145's algorithm.
        (bytes.fromhex("b56205010200060 10f38".replace(" ", "")), "a maker's binary messages with sync bytes B5 62"),
    ],
)
def test_binary_protocols_are_named(frame: bytes, name: str) -> None:
    """Known binary messages are named when their checksums are good; damaged ones are not."""
    assert (judge(frame * 4).content, judge(frame * 4).what) == ("binary", name)
    assert judge((frame[:-1] + bytes([frame[-1] ^ 1])) * 4).content != "binary"


@settings(max_examples=100, deadline=None)
@given(st.binary(max_size=300))
def test_any_bytes_are_judged(data: bytes) -> None:
    """Whatever comes is called something, and nothing only when nothing came."""
    hearing = judge(data)

    assert (hearing.content == "silent") == (not data)
    assert hearing.bytes == len(data)


def test_a_line_that_turns_to_garbage_is_noticed_in_time() -> None:
    """Within two seconds of the first garbage at 1 Hz, and not before there is enough of it to judge."""
    spoiling = Spoiling()
    chance = random.Random(2)

    good = [spoiling.feed(burst(second), float(second)) for second in range(5)]
    soon = spoiling.feed(chance.randbytes(200), 5.0)
    late = spoiling.feed(chance.randbytes(200), 6.0)

    assert (any(good), soon, late) == (False, False, True)


def test_what_is_no_garbage_is_let_pass() -> None:
    """Silence, text, known binary messages, damage between good sentences, and noise before any sentence."""
    chance = random.Random(3)
    frame = bytes.fromhex("d300133ed7d30202980edeef34b4bd62ac0941986f33360b98")

    for later in (b"", b"restarting, please wait\r\n" * 10, frame * 10):
        spoiling = Spoiling()
        spoiling.feed(burst(0), 0.0)
        assert not any(spoiling.feed(later, 1.0 + second) for second in range(20))
    spoiling = Spoiling()
    assert not any(spoiling.feed(chance.randbytes(300), float(second)) for second in range(20))
    assert not any(spoiling.feed(chance.randbytes(300) + burst(second), 20.0 + second) for second in range(20))


def test_sentences_cut_by_chunks_count() -> None:
    """A stream that comes in small pieces is as good as one in whole bursts."""
    spoiling = Spoiling()
    data = stream(30)

    told = [spoiling.feed(data[at : at + 7], at * 30.0 / len(data)) for at in range(0, len(data), 7)]

    assert not any(told)
    assert len(burst(0)) > JUDGED_BYTES
