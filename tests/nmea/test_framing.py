"""Framing: sentences in anything, the same however a stream is cut, every byte counted once."""

from __future__ import annotations

import functools
import json
import math
import operator
import re
from dataclasses import asdict
from datetime import UTC, datetime

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.chunks import Chunk, joined
from gnssmon.nmea.framing import LONGEST_LINE, LONGEST_SENTENCE, Framer
from tests.journeys.program import REAL_LOGS
from tests.strategies import RUBBISH, bodies, cut, line, long_lines, streams


def frame(*pieces: bytes) -> tuple[Framer, list[bytes], list[float]]:
    """Feed the pieces; return the framer, the sentences' texts, and their stamps."""
    framer = Framer()
    texts: list[bytes] = []
    stamps: list[float] = []
    blocks = [framer.feed(Chunk(piece)) for piece in pieces]
    blocks.append(framer.finish())
    for block in blocks:
        texts += [block.buffer[a:b].tobytes() for a, b in zip(block.start, block.end, strict=True)]
        stamps += block.stamped_s.tolist()
    framer.check()
    return framer, texts, stamps


@settings(max_examples=150, deadline=None)
@given(st.data())
def test_any_cut_gives_the_same_sentences_and_tally(data):
    """Whole, in pieces, byte by byte: sentences, their order, stamps and the tally do not change."""
    stream = data.draw(streams())
    whole, texts, stamps = frame(stream)
    for pieces in (data.draw(cut(stream)), [stream[i : i + 1] for i in range(len(stream))]):
        other, other_texts, other_stamps = frame(*pieces)

        assert texts == other_texts
        assert np.array_equal(stamps, other_stamps, equal_nan=True)
        assert asdict(whole.tally) == asdict(other.tally)


@settings(max_examples=60, deadline=None)
@given(st.data())
def test_any_cut_of_long_lines_gives_the_same(data):
    """Lines too long to be held are broken where their own bytes say, in a block of any size."""
    stream = data.draw(long_lines())
    whole, texts, stamps = frame(stream)
    for pieces in (data.draw(cut(stream)), [stream[i : i + 37] for i in range(0, len(stream), 37)]):
        other, other_texts, other_stamps = frame(*pieces)

        assert texts == other_texts
        assert np.array_equal(stamps, other_stamps, equal_nan=True)
        assert asdict(whole.tally) == asdict(other.tally)


@settings(max_examples=60, deadline=None)
@given(st.data())
def test_any_cut_gives_the_same_arrivals(data):
    """A sentence came with its last byte, whether its chunks are fed one by one or put together before."""
    pieces = data.draw(cut(data.draw(st.one_of(streams(), long_lines()))))
    chunks = [Chunk(piece, 100.0 + i) for i, piece in enumerate(pieces)]
    one_by_one, together = Framer(), Framer()
    came = [block.received_s for block in map(one_by_one.feed, chunks)] + [one_by_one.finish().received_s]
    block = together.feed(joined(chunks))

    assert np.concatenate(came).tolist() == [*block.received_s, *together.finish().received_s]


@settings(max_examples=100, deadline=None)
@given(stream=streams(), rubbish=st.binary(max_size=60))
def test_rubbish_behind_takes_nothing_away(stream, rubbish):
    """What follows on a later line does not change what was found before."""
    _, texts, _ = frame(stream + b"\r\n")
    _, more, _ = frame(stream + b"\r\n" + rubbish)

    assert more[: len(texts)] == texts


@settings(max_examples=100, deadline=None)
@given(st.lists(bodies(), min_size=1, max_size=8))
def test_sound_sentences_are_all_found(lines):
    """A clean stream loses nothing, and no byte of it is foreign."""
    framer, texts, _ = frame(b"".join(line(body) for body in lines))

    assert [body.encode("latin-1") for body in lines] == texts
    assert framer.tally.non_nmea_bytes == framer.tally.malformed == framer.tally.checksum_failures == 0


@settings(max_examples=100, deadline=None)
@given(st.binary(max_size=3000))
def test_any_bytes_are_survived_and_bounded(noise):
    """Nothing in a stream raises, and no more bytes are foreign than there were."""
    framer, _, _ = frame(noise, noise, b"\x00" * 10)

    assert 0 <= framer.tally.non_nmea_bytes <= framer.tally.bytes == 2 * len(noise) + 10


STAMPS = (
    "{utc:%Y-%m-%dT%H:%M:%S}.{ms:03d}Z @",
    "[{utc:%Y-%m-%d %H:%M:%S},{ms:03d}] @",
    "{utc:%Y-%m-%dT%H:%M:%S}.{ms:03d}+00:00\t@",
    "{time}.{ms:03d} @",
    "{time}{ms:03d},@",
    "NMEA,@,{time}{ms:03d}",
    "{time}.{ms:03d} gps0: @",
)
"""How programs stamp the lines of a log; ``@`` is the sentence."""

GGA = b"$GPGGA,092725.00,4717.11399,N,00833.91590,E,1,08,1.01,499.6,M,48.0,M,,*5B"
"""A published sample with a good checksum (receiver protocol description UBX-18010854, 4.2.4)."""


@pytest.mark.parametrize("end", [b"\r\n", b"\n", b"\r", b""])
def test_line_ends(end):
    """CR LF, LF, CR, and the end of the stream end a sentence."""
    assert frame(GGA + end)[1] == [GGA[1:-3]]


@pytest.mark.parametrize(
    ("before", "behind", "stamp_s"),
    [
        (b"2014-12-11T00:00:01.0020Z ", b"", 1418256001.002),
        (b"1699400577.561\t", b"", 1699400577.561),
        (b"1699400577561,", b"", 1699400577.561),
        (b"NMEA,", b",1699400577561", 1699400577.561),
        (b"\\c:1241544035*5C\\", b"", 1241544035.0),
        (b"\\c:1241544035123\\", b"", 1241544035.123),
        (b"\\g:1-2-73,n:157,s:r3669945,c:1241544035*4A\\", b"", None),
        (b"\\s:HE0002,c:1474107266,n:5*20\\", b"", None),
    ],
)
def test_stamps_before_and_behind(before, behind, stamp_s):
    """Host times and TAG blocks are recognised and not foreign; a TAG block with a wrong checksum loses its time, not
    the sentence (a published sample has one: 20 printed, 7C computed)."""
    framer, texts, stamps = frame(before + GGA + behind + b"\r\n")

    assert texts == [GGA[1:-3]]
    assert framer.tally.non_nmea_bytes == 0
    assert stamps == [pytest.approx(stamp_s)] if stamp_s else np.isnan(stamps[0])


@settings(max_examples=100)
@given(st.lists(st.tuples(st.sampled_from(STAMPS), st.integers(0, 10**9), st.integers(0, 999)), min_size=1))
def test_many_stamps_are_read_as_one_by_one(made):
    """A log's stamps, read down its columns, are the very numbers that each line gives by itself."""
    lines = [
        form.format(time=1_000_000_000 + s, ms=ms, utc=datetime.fromtimestamp(1_000_000_000 + s, UTC)).encode()
        for form, s, ms in made
    ]
    lines = [text.replace(b"@", GGA) + b"\r\n" for text in lines]
    framer, texts, stamps = frame(b"".join(lines))
    alone = [frame(text) for text in lines]

    assert len(texts) == len(lines)
    assert stamps == [one[2][0] for one in alone]
    assert np.allclose(stamps, [1_000_000_000 + s + ms / 1000 for _, s, ms in made], rtol=0, atol=1e-6)
    assert framer.tally.non_nmea_bytes == 0


@pytest.mark.parametrize(
    ("around", "foreign"),
    [
        (b"hello there world @", 12),  # one word is a logger's, more are text
        (b"2026-13-01T00:00:01Z @", 21),  # no such month
        (b"2026-03-01T00:00:61Z @", 21),  # no such second
        (b"@ \r\n1699400577561\r\n", 14),  # a number on a line of its own stamps nothing
        (b"$GPGGA,1699400577561 @", 0),  # part of a torn sentence, which counts as one
        (b"@,169940057756", 13),  # no Unix time
    ],
)
def test_what_is_no_stamp(around, foreign):
    """Text that only resembles a stamp is not taken for one, and its bytes are foreign."""
    framer, texts, stamps = frame(around.replace(b"@", GGA) + b"\r\n")

    assert texts == [GGA[1:-3]]
    assert math.isnan(stamps[0])
    assert framer.tally.non_nmea_bytes == foreign


def test_published_samples_with_wrong_sums_fail():
    """Samples published with wrong checksums: GBS 5B for 5A (UBX-18010854), DTM, HDT, GSA from public test data."""
    wrong = (
        b"$GPGBS,235458.00,1.4,1.3,3.1,03,,-21.4,3.8,1,0*5B\r\n$GPDTM,999,,0.08,N,0.07,E,-47.7,W84*1C\r\n"
        b"$GPHDT,123.456,T*00\r\n$GNGSA,A,3,,,,,,,,,,,,,1.13,.61,0.94,3*0A\r\n"
    )
    framer, texts, _ = frame(wrong)

    assert texts == []
    assert framer.tally.checksum_failures == 4
    assert dict(framer.tally.failures_by_type) == {"GPGBS": 1, "GPDTM": 1, "GPHDT": 1, "GNGSA": 1}


def test_lower_case_checksum_and_exclamation_mark():
    """`*5b` counts like `*5B`; `!` opens a sentence too, but not every `!` in a text does."""
    assert len(frame(GGA[:-2] + b"5b\r\n")[1]) == 1
    assert frame(b"!AIVDM,1,1,,B,177KQJ5000G?tO`K>RA1wUbN0TKH,0*5C\r\n")[1] != []
    assert frame(line("GPTXT,01,01,02,Hello! Bye!"))[1] == [b"GPTXT,01,01,02,Hello! Bye!"]
    assert len(frame(b"$GPGGA,0927!AIVDM,1,1,,B,177KQJ5000G?tO`K>RA1wUbN0TKH,0*5C\r\n")[1]) == 1


def test_long_sentences_of_real_receivers_pass():
    """85 and 87 bytes, beyond the standard's 82, as published by a receiver's users."""
    long = (
        b"$GNRMC,015107.00,A,3412.76124010,N,10849.67444051,E,0.003,114.8,010323,3.4,W,A,V*4C\r\n"
        b"$GNGGA,015111.00,3412.76134514,N,10849.67440085,E,1,28,0.6,399.1382,M,-33.6324,M,,*55\r\n"
    )
    assert len(frame(long)[1]) == 2


def test_over_length_is_no_sentence():
    """Beyond LONGEST_SENTENCE nothing is taken for a sentence, whatever its checksum."""
    assert frame(line("PXYZ," + "0" * (LONGEST_SENTENCE - 20)))[1] != []
    framer, texts, _ = frame(line("PXYZ," + "0" * LONGEST_SENTENCE))

    assert texts == []
    assert framer.tally.malformed == 1


def test_over_length_counts_to_the_end_of_the_checksum():
    """LONGEST_SENTENCE bytes from start character to checksum are the most."""
    spare = LONGEST_SENTENCE - len("$PXYZ,*hh")
    assert len(frame(line("PXYZ," + "0" * spare))[1]) == 1
    assert len(frame(line("PXYZ," + "0" * (spare + 1)))[1]) == 0


def test_long_addresses_of_makers():
    """Makers' own addresses of more than eight letters are counted under all of their letters."""
    framer, texts, _ = frame(
        line("PQTMVERNO,1") + line("PQTMCFGMSGRATE,OK") + line("PSTMVERNO,1") + b"$PQTMVERNO,1*00\n"
    )

    assert len(texts) == 3
    assert framer.tally.by_type == {"PQTMVERNO": 1, "PQTMCFGMSGRATE": 1, "PSTMVERNO": 1}
    assert framer.tally.talkers == {"P": 3}
    assert framer.tally.failures_by_type == {"PQTMVERNO": 1}


def test_unprintable_bytes_make_a_sentence_malformed():
    """Interleaved binary inside a sentence spoils it even where the checksum happens to fit."""
    framer, texts, _ = frame(line("GPTXT,01,01,02,\x07bell"))

    assert (texts, framer.tally.malformed) == ([], 1)


def test_without_checksums():
    """A stream without checksums is taken as it is; in one with checksums a line without is torn or not NMEA."""
    plain = GGA[:-3] + b"\r\n"
    framer, texts, _ = frame(plain * 3)
    assert (len(texts), framer.tally.unverified, framer.tally.malformed) == (3, 3, 0)

    framer, texts, _ = frame(GGA + b"\r\n" + plain)
    assert (len(texts), framer.tally.unverified, framer.tally.malformed) == (1, 0, 1)

    framer, texts, _ = frame(b"$ADVER,3080,2.4P\r\n" + GGA + b"\r\n")
    assert (len(texts), framer.tally.malformed) == (1, 1)


@pytest.mark.parametrize("torn", [b"$GPGGA,092725.00,4717.1", b"$GPGGA\r\n", b"$PGGGA,1\r\n", b"$GPXYZ,1\r\n"])
def test_without_checksum_a_sentence_must_be_whole(torn):
    """Torn at the stream's end, without a field, a maker's own, or of no known kind: not taken without a checksum."""
    framer, texts, _ = frame(GGA[:-3] + b"\r\n" + torn)

    assert (len(texts), framer.tally.malformed) == (1, 1)


def test_a_line_without_end_is_bounded():
    """Megabytes without a line end are not kept; a sentence behind them is found."""
    framer = Framer()
    for _ in range(300):
        framer.feed(Chunk(b"\x00\x55" * 2000))
        framer.check()
    found = framer.feed(Chunk(GGA + b"\r\n"))

    assert len(found) == 1
    assert framer.tally.non_nmea_bytes == 300 * 4000
    assert len(framer._held.data) <= LONGEST_LINE


def test_silence_is_not_kept():
    """Empty chunks, one a second, while half a sentence waits for days: nothing grows, and its arrival is its own."""
    framer = Framer()
    framer.feed(Chunk(GGA[:30], 100.0))
    for second in range(1000):
        framer.feed(Chunk(b"", 101.0 + second))
    framer.check()
    assert framer._held == Chunk(GGA[:30], 100.0)

    assert framer.feed(Chunk(GGA[30:] + b"\r\n", 2000.0)).received_s.tolist() == [2000.0]


def test_sentences_run_together_on_one_line():
    """Two sentences without a line end between them are two, and the first does not wait for one."""
    assert len(frame(GGA + GGA + b"\r\n")[1]) == 2

    framer = Framer()
    assert [len(framer.feed(Chunk(GGA))) for _ in range(3)] == [0, 1, 1]
    assert len(framer.finish()) == 1


def test_a_start_in_mid_sentence_begins_anew():
    """A torn sentence that runs into the next one costs only itself."""
    framer, texts, _ = frame(b"$GPGGA,092725.00,47" + GGA + b"\r\n")

    assert texts == [GGA[1:-3]]
    assert framer.tally.malformed == 1


def test_arrival_is_that_of_the_completing_chunk():
    """A sentence came when its line end did."""
    framer = Framer()
    framer.feed(Chunk(GGA[:30], 100.0))
    block = framer.feed(Chunk(GGA[30:] + b"\r\n" + GGA + b"\r\n", 101.5))

    assert block.received_s.tolist() == [101.5, 101.5]


def test_binary_messages_with_start_characters_between_sentences():
    """Messages of any bytes, dollars and line ends among them, cost no sentence before or behind."""
    rng = np.random.default_rng(7)
    stream, count = b"", 0
    for _ in range(200):
        stream += GGA + b"\r\n" + b"\xd3" + rng.integers(0, 256, 120).astype(np.uint8).tobytes() + b"\r\n"
        count += 1
    framer, texts, _ = frame(stream)

    assert texts.count(GGA[1:-3]) == count
    assert len(texts) - count <= 1  # noise passes a checksum once in 256 tries
    assert framer.tally.non_nmea_bytes > 100 * count


def test_many_different_addresses_are_bounded():
    """Noise with lucky checksums cannot fill the tally."""
    framer, _, _ = frame(b"".join(line(f"P{i:06d},1") for i in range(3000)))

    assert framer.tally.sentences == 3000
    assert len(framer.tally.by_type) <= 513


@pytest.mark.parametrize(
    "flood", [b"$", b"$$GPGGA,", b"!AIVDM,", b"\\", b"*00", b"$GPGGA,1*", b"\r", b"1699400577561 "]
)
def test_floods_are_survived(flood):
    """One thing over and over, without and with an end: bounded, nothing found, and the next sentence is."""
    _, texts, _ = frame(*[flood * 3000] * 5, b"\r\n", GGA)

    assert texts[-1:] == [GGA[1:-3]]
    assert len(texts) <= 1 + 5 * 3000


def reference_sentences(stream: bytes) -> list[bytes]:
    """Sentences with a good checksum as the independent script beside the real logs finds them (``reference.py``)."""
    found = re.finditer(rb"[$!]([^$*\r\n]*)\*([0-9A-Fa-f]{2})", stream)
    return [m[1] for m in found if functools.reduce(operator.xor, m[1], 0) == int(m[2], 16)]


@settings(max_examples=150, deadline=None)
@given(st.lists(st.one_of(bodies().map(line), RUBBISH.filter(lambda r: b"!" not in r and len(r) < 4000)), max_size=14))
def test_as_the_independent_reference_finds_them(parts):
    """The same sentences as a plain pattern over the whole text finds, of those that have an address and are printable.
    A good sentence comes first, so that none is taken without a checksum."""
    stream = GGA + b"\r\n" + b"".join(parts)
    proper = re.compile(rb"[0-9A-Z]{3,16}(,[ -~]*)?\Z")

    assert frame(stream)[1] == [text for text in reference_sentences(stream) if proper.match(text)]


LOGS = sorted(REAL_LOGS.glob("*.nmea"))


@pytest.mark.parametrize("path", LOGS, ids=lambda path: path.name)
def test_counts_of_the_real_logs(path):
    """Sentences by type and checksum failures of real logs are those of the independent reference, exactly."""
    expected = json.loads((REAL_LOGS / "REFERENCE.json").read_text())[path.name]
    framer, _, _ = frame(path.read_bytes())

    assert framer.tally.by_type == expected["sentences"]
    assert framer.tally.checksum_failures == expected["checksum_failures"]
