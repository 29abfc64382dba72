"""Logs: plain and compressed, whole and damaged."""

from __future__ import annotations

import bz2
import gzip
import hashlib
import lzma
import random
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

from gnssmon.clocks import ManualClock
from gnssmon.errors import SourceError
from gnssmon.sources import open_source
from gnssmon.sources.log_file import BLOCK_BYTES, STORED_BYTES, LogFile
from tests.sources.sentences import stream

DATA = stream(60)
COMPRESS: dict[str, Callable[[bytes], bytes]] = {
    "plain": bytes,
    "gz": gzip.compress,
    "bz2": bz2.compress,
    "xz": lzma.compress,
}


def read(path: Path, **how: int) -> tuple[bytes, LogFile, str]:
    """All that can be read, the source, and what it said at the end."""
    source = LogFile(path, **how)
    data = b""
    try:
        for chunk in source.chunks():
            data += chunk.data
            assert chunk.received_s != chunk.received_s
    except SourceError as error:
        return data, source, str(error)
    return data, source, ""


@pytest.mark.parametrize("kind", COMPRESS)
@pytest.mark.parametrize("name", ["log.nmea", "log.gz"])
def test_bytes_size_and_hash(tmp_path: Path, kind: str, name: str) -> None:
    """The bytes come out as they went in, whatever the file is called; size and SHA-256 are those of what is stored."""
    stored = COMPRESS[kind](DATA)
    path = tmp_path / name
    path.write_bytes(stored)

    data, source, said = read(path)

    assert (data, said) == (DATA, "")
    assert (source.size, source.sha256, source.consumed) == (
        len(stored),
        hashlib.sha256(stored).hexdigest(),
        len(stored),
    )


@pytest.mark.parametrize("kind", ["gz", "bz2", "xz"])
@pytest.mark.parametrize("block", [1, 1000, BLOCK_BYTES])
def test_members_behind_each_other(tmp_path: Path, kind: str, block: int) -> None:
    """Files joined after compression (``cat a.gz b.gz``), and zeros behind them, unpack to the joined bytes."""
    parts = [DATA[:20_000], b"", DATA[20_000:50_000]]
    path = tmp_path / "log"
    path.write_bytes(b"".join(COMPRESS[kind](part) for part in parts) + (b"\0" * 512 if kind != "bz2" else b""))

    assert read(path, block_bytes=block)[::2] == (b"".join(parts), "")


@pytest.mark.parametrize("kind", ["gz", "bz2", "xz"])
def test_a_file_cut_off_gives_what_it_holds(tmp_path: Path, kind: str) -> None:
    """A cut file gives a beginning of the log and then says that it is cut off; its hash is that of what is there."""
    chance = random.Random(5)
    log = b"".join(b"$GPTXT,%d*00\r\n" % chance.getrandbits(60) for _ in range(60_000))
    stored = COMPRESS[kind](log)
    path = tmp_path / "log"
    for keep in (len(stored) - 1, len(stored) // 2, 40):
        path.write_bytes(stored[:keep])

        data, source, said = read(path)

        assert log.startswith(data)
        assert "cut off" in said
        assert source.sha256 == hashlib.sha256(stored[:keep]).hexdigest()
        # bzip2 unpacks blocks of 900 kB or nothing; the others nearly all that was kept.
        assert len(data) > (0.3 if kind == "bz2" else 0.9) * len(log) * keep / len(stored) - 400_000


@pytest.mark.parametrize("kind", ["gz", "bz2", "xz"])
def test_damage_in_the_middle(tmp_path: Path, kind: str) -> None:
    """Damaged data gives what lies before it and one line that names the file; the checksum behind the data may be
    the first to notice, so wrong bytes can come before the line is told."""
    log = random.Random(6).randbytes(3_000_000)
    stored = bytearray(COMPRESS[kind](log))
    middle = len(stored) // 2
    stored[middle : middle + 100] = bytes(100)
    path = tmp_path / "log"
    path.write_bytes(stored)

    data, source, said = read(path)

    assert said.startswith(f"'{path}' is damaged")
    assert "unpacked behind byte" in said
    assert data[:890_000] == log[:890_000]
    assert source.sha256 == hashlib.sha256(stored).hexdigest()


def test_junk_behind_a_member(tmp_path: Path) -> None:
    """Bytes behind the compressed data that are no compressed data are told, not skipped in silence."""
    path = tmp_path / "log.gz"
    path.write_bytes(gzip.compress(DATA) + b"and then this")

    data, _, said = read(path)

    assert data == DATA
    assert "damaged" in said


def test_a_bomb_stays_small(tmp_path: Path) -> None:
    """A file that unpacks to a thousand times its size comes in blocks of the usual size."""
    path = tmp_path / "log.gz"
    path.write_bytes(gzip.compress(bytes(64 * 1024 * 1024)))
    source = LogFile(path)

    sizes = [len(chunk.data) for chunk in source.chunks()]

    assert sum(sizes) == 64 * 1024 * 1024
    assert max(sizes) <= BLOCK_BYTES + STORED_BYTES


@pytest.mark.skipif(sys.version_info >= (3, 14), reason="this Python unpacks .zst")
def test_zstd_is_named_where_it_cannot_be_unpacked(tmp_path: Path) -> None:
    """Without zstd in the interpreter the answer says what to do (frame: RFC 8878's magic number)."""
    path = tmp_path / "log.zst"
    path.write_bytes(b"\x28\xb5\x2f\xfd\x04\x00\x01\x00\x00")

    assert "zstd -d" in read(path)[2]


def test_empty_file(tmp_path: Path) -> None:
    """An empty log has no bytes, and ends without a complaint."""
    path = tmp_path / "log"
    path.write_bytes(b"")

    assert read(path)[::2] == (b"", "")


def test_errors_at_opening(tmp_path: Path) -> None:
    """What cannot be opened is told in one line: not there, a folder that holds nothing."""
    with pytest.raises(SourceError, match="no such file"):
        LogFile(tmp_path / "missing")
    with pytest.raises(SourceError, match=r"no recording: it holds no \.nmea file"):
        open_source(str(tmp_path), clock=ManualClock())


def test_closing_ends_the_reading(tmp_path: Path) -> None:
    """After ``close`` a running iteration ends without an error, and without a hash, as the end was not reached."""
    path = tmp_path / "log"
    path.write_bytes(DATA)
    source = LogFile(path, block_bytes=1000)

    got = []
    for chunk in source.chunks():
        got.append(chunk)
        source.close()

    assert len(got) == 1
    assert source.sha256 is None
