"""The one path from bytes to epochs: no cut changes anything, and real logs give the reference results."""

from __future__ import annotations

import json
from collections import Counter
from collections.abc import Sequence
from dataclasses import fields
from functools import reduce
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.chunks import Chunk
from gnssmon.epochs.assembler import Assembler
from gnssmon.epochs.batch import EpochBatch
from gnssmon.nmea.decoding import decode
from gnssmon.nmea.framing import Framer
from gnssmon.pipeline import Pipeline

LOGS = Path(__file__).parents[2] / "shared" / "logs"
REFERENCE = json.loads((LOGS / "REFERENCE.json").read_text()) if LOGS.is_dir() else {}


def sentence(text: str) -> bytes:
    return f"${text}*{reduce(lambda x, c: x ^ c, text.encode(), 0):02X}\r\n".encode()


def flat(batches: Sequence[EpochBatch]) -> dict[str, list[object]]:
    """Every column of all batches; NaN as None, so that lists compare."""
    columns: dict[str, list[object]] = {}

    def add(name: str, values: np.ndarray) -> None:  # type: ignore[type-arg]
        columns.setdefault(name, []).extend(None if value != value else value for value in values.tolist())

    start = 0
    for batch in batches:
        for column in fields(batch):
            value = getattr(batch, column.name)
            if column.name in ("signals", "used"):
                for inner in fields(value):
                    add(
                        f"{column.name}.{inner.name}",
                        getattr(value, inner.name) + (start if inner.name == "epoch" else 0),
                    )
            else:
                add(column.name, value)
        start += len(batch)
    return columns


def run(data: bytes, cuts: Sequence[int] = ()) -> tuple[dict[str, list[object]], Pipeline]:
    pipeline = Pipeline()
    edges = [0, *sorted(cuts), len(data)]
    batches = [pipeline.feed(Chunk(data[a:b])) for a, b in pairwise(edges)]
    return flat([*batches, pipeline.finish()]), pipeline


TIMES = """000000.00 000000.01 000000.10 000000.99 000001.00 000001.02 000002.00 000012.00 093000.00 110000.00
120000.00 235959.00 235959.99 235960.00 235960.50"""
CLOCK = st.sampled_from(["", *TIMES.split()])
DATE = st.sampled_from(["", "311216", "010117", "200525", "060180", "991399"])
NUMBER = st.sampled_from(["", "1", "7", "33", "46", "65", "88", "195", "201", "301"])
TALKER = st.sampled_from(["GP", "GN", "GL", "GA", "BD", "PQ"])
PLACE = st.sampled_from([",,,", "4717.11,N,00833.91,E", "3412.76,S,10849.67,W"])
TEXTS = st.one_of(
    st.builds(
        "{}GGA,{},{},{},08,1.01,499.6,M,48.0,M,,".format, TALKER, CLOCK, PLACE, st.sampled_from(["", "0", "1", "4"])
    ),
    st.builds(
        "{}GNS,{},{},{},08,1.01,499.6,48.0,1.0,5".format, TALKER, CLOCK, PLACE, st.sampled_from(["", "N", "RRAN"])
    ),
    st.builds("{}RMC,{},{},{},1.0,90.0,{},,,A".format, TALKER, CLOCK, st.sampled_from("AV"), PLACE, DATE),
    st.builds("{}GLL,{},{},A,A".format, TALKER, PLACE, CLOCK),
    st.builds("{}ZDA,{},{},00,00".format, TALKER, CLOCK, st.sampled_from(["31,12,2016", "01,01,2017", "00,00,0000"])),
    st.builds("{}GST,{},1.8,,,,1.7,1.3,2.2".format, TALKER, CLOCK),
    st.builds(
        "{}GSA,A,3,{},{},,,,,,,,,,,1.8,0.8,1.6{}".format, TALKER, NUMBER, NUMBER, st.sampled_from(["", ",1", ",3"])
    ),
    st.builds(
        "{}GSV,2,1,05,{},40,100,44,{},50,200,{}".format, TALKER, NUMBER, NUMBER, st.sampled_from(["", ",1", ",7"])
    ),
    st.sampled_from(["GPVTG,80.0,T,,M,9.0,N,16.7,K,A", "HEHDT,119.9,T", "PXYZ,1", "GPTXT,01,01,02,ANTSTATUS=OK"]),
)


@settings(max_examples=150, deadline=None)
@given(st.lists(TEXTS, max_size=30), st.data())
def test_no_cut_changes_anything(texts: list[str], data: st.DataObject) -> None:
    """Any stream cut into any chunks gives the same epochs, the same tally and the same extent."""
    stream = b"".join(sentence(text) for text in texts)
    whole, pipeline = run(stream)
    cuts = data.draw(st.lists(st.integers(0, len(stream)), max_size=8))
    parts, other = run(stream, cuts)
    assert parts == whole
    assert other.tally == pipeline.tally
    assert other.extent == pipeline.extent


@settings(max_examples=100, deadline=None)
@given(st.lists(TEXTS, min_size=1, max_size=30))
def test_assembler_holds_what_it_must(texts: list[str]) -> None:
    """Between any two sentences the assembler's own check passes, and its open epochs turn into the closed ones."""
    framer, assembler, batches = Framer(), Assembler(), []
    for text in texts:
        batches.append(assembler.feed(decode(framer.feed(Chunk(sentence(text))))))
        assembler.check()
    opened = flat([assembler.opened])
    batches.append(assembler.finish())
    assembler.check()
    assert opened == flat([batches[-1]])
    assert len(assembler.opened) == 0


@pytest.mark.parametrize("name", sorted(REFERENCE) or ["(no real logs beside this project)"])
def test_real_log(name: str) -> None:
    """Epochs, qualities, levels and sentence counts of real logs are exactly those of an independent script."""
    if not REFERENCE:
        assert not LOGS.is_dir()
        return
    expected = REFERENCE[name]
    data = (LOGS / name).read_bytes()
    columns, pipeline = run(data, range(0, len(data), 65_537))
    quality = Counter(str(q) for q, counted in zip(columns["quality"], columns["counted"], strict=True) if counted)
    levels = [level for level in columns["signals.cn0_dbhz"] if level is not None]
    assert sum(quality.values()) == expected["epochs"]
    assert quality == expected["quality"]
    assert len(levels) == expected["cn0_entries"]
    assert dict(pipeline.tally.by_type) == expected["sentences"]
    assert pipeline.tally.checksum_failures == expected["checksum_failures"]


def test_extent() -> None:
    """First and last instant are known with the open epochs, and the first one's date once there is any."""
    pipeline = Pipeline()
    pipeline.feed(Chunk(sentence("GPGGA,235958.00,4717.11,N,00833.91,E,1,08,1.01,499.6,M,48.0,M,,")))
    assert pipeline.extent.first == pipeline.extent.last == (86_398_000, -1)
    assert pipeline.first_utc_ms is None
    pipeline.feed(Chunk(sentence("GPGGA,235959.00,4717.11,N,00833.91,E,1,08,1.01,499.6,M,48.0,M,,")))
    pipeline.feed(Chunk(sentence("GPRMC,000000.00,A,4717.11,N,00833.91,E,1.0,90.0,010100,,,A")))
    pipeline.finish()
    # date -u -d "2000-01-01T00:00:00Z" +%s: 946684800
    assert pipeline.first_utc_ms == 946_684_798_000
    assert pipeline.last_utc_ms == 946_684_800_000
    assert pipeline.utc_offset_ms == 946_684_800_000 - 86_400_000


def test_silence_and_noise() -> None:
    """Chunks without a sentence give no epochs and change nothing that is open."""
    pipeline = Pipeline()
    pipeline.feed(Chunk(sentence("GPGGA,000000.00,4717.11,N,00833.91,E,1,08,1.01,499.6,M,48.0,M,,"), 5.0))
    for data in (b"", b"\x00\xff\xb5b\n", b"no sentence\r\n"):
        assert len(pipeline.feed(Chunk(data, 6.0))) == 0
        assert pipeline.block is not None
        assert len(pipeline.block.opened) == 1
    assert len(pipeline.finish()) == 1
