"""A recording: bytes unaltered, arrivals to the last digit, files that rotate, hashes, folders left as they fell."""

from __future__ import annotations

import gzip
import hashlib
import json
from pathlib import Path
from typing import ClassVar

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.chunks import Chunk, joined
from gnssmon.clocks import ManualClock
from gnssmon.errors import RecordingError
from gnssmon.recording.folder import MANIFEST, TABLE_HEAD, read_folder, table_name
from gnssmon.recording.recorder import OVERDUE_BYTES, Recorder
from gnssmon.sources import open_source
from gnssmon.sources.recorded import Recording
from tests.sources.sentences import stream
from tests.test_chunks import parts


def record(folder: Path, chunks: list[Chunk], clock: ManualClock | None = None, **how: object) -> Recorder:
    recorder = Recorder(folder, clock or ManualClock(), source="roof", **how)  # type: ignore[arg-type]
    for chunk in chunks:
        recorder(chunk)
    recorder.close()
    assert recorder.problem == ""
    return recorder


def replay(folder: Path) -> tuple[list[tuple[bytes, float]], Recording]:
    """The pieces of a recording as they arrived."""
    source = open_source(str(folder), clock=ManualClock())
    assert isinstance(source, Recording)
    return [piece for chunk in source.chunks() for piece in parts(chunk)], source


def cut(data: bytes, size: int, first_s: float = 1.9e9) -> list[Chunk]:
    return [Chunk(data[at : at + size], first_s + at / 777.0) for at in range(0, len(data), size)]


@settings(max_examples=40, deadline=None)
@given(
    st.lists(st.tuples(st.binary(max_size=40), st.floats(1e9, 4e9)), min_size=1, max_size=20),
    st.integers(1, 5),
)
def test_what_was_recorded_comes_back(
    tmp_path_factory: pytest.TempPathFactory, pieces: list[tuple[bytes, float]], together: int
) -> None:
    """Bytes, pieces, silences and times of arrival come back exactly, whether pieces came alone or joined."""
    pieces = sorted(pieces, key=lambda piece: piece[1])
    chunks = [Chunk(*piece) for piece in pieces]
    chunks = [joined(chunks[at : at + together]) for at in range(0, len(chunks), together)]
    folder = tmp_path_factory.mktemp("recording")

    record(folder, chunks)

    assert replay(folder)[0] == pieces


def test_files_table_and_manifest(tmp_path: Path) -> None:
    """The raw bytes are the file; the table says when each piece came; the manifest's hashes are the files' own."""
    data = stream(10)

    record(tmp_path, cut(data, 100))

    (file,) = read_folder(tmp_path)
    raw = (tmp_path / file.name).read_bytes()
    table = (tmp_path / table_name(file.name)).read_bytes()
    manifest = json.loads((tmp_path / MANIFEST).read_bytes())
    assert raw == data
    assert table.startswith(TABLE_HEAD + b"0,1900000000.0\n100,1900000000.1287")
    assert manifest["format"] == "gnssmon recording"
    assert (file.sha256, file.bytes, file.source) == (hashlib.sha256(data).hexdigest(), len(data), "roof")
    assert file.arrivals_sha256 == hashlib.sha256(table).hexdigest()
    assert replay(tmp_path)[1].sha256 == hashlib.sha256(data).hexdigest()


def test_rotation_by_size_cuts_behind_a_line(tmp_path: Path) -> None:
    """A new file begins at the first line end behind the size; together the files are the stream."""
    data = stream(60)
    lines = [Chunk(line, 1.9e9) for line in data.splitlines(keepends=True)]

    record(tmp_path, lines, rotate_bytes=5000)

    files = read_folder(tmp_path)
    raw = [(tmp_path / file.name).read_bytes() for file in files]
    assert b"".join(raw) == data
    assert len(files) > 4
    assert all(5000 <= len(one) < 5100 and one.endswith(b"\n") for one in raw[:-1])
    assert b"".join(piece for piece, _ in replay(tmp_path)[0]) == data


def test_rotation_does_not_wait_for_ever_for_a_line(tmp_path: Path) -> None:
    """A stream without line ends is rotated too, after a bound."""
    record(tmp_path, [Chunk(bytes(1000), 1.9e9)] * 200, rotate_bytes=1000)

    sizes = [file.bytes for file in read_folder(tmp_path)]

    assert sum(size or 0 for size in sizes) == 200_000
    assert max(size or 0 for size in sizes) <= 1000 + OVERDUE_BYTES + 1000


def test_rotation_at_the_full_hour(tmp_path: Path) -> None:
    """With an hour set, a file holds what came within one hour of UTC."""
    clock = ManualClock(1_900_000_000.0)  # 2030-03-17T17:46:40Z
    recorder = Recorder(tmp_path, clock, source="roof")
    for _ in range(180):
        recorder(Chunk(b"$GPTXT,x*00\r\n", clock.now()))
        clock.sleep(60.0)
    recorder.close()

    opened = [file.opened_utc for file in read_folder(tmp_path)]

    assert [text[11:16] if text else "" for text in opened] == ["17:46", "18:00", "19:00", "20:00"]


@pytest.mark.parametrize("rotate_bytes", [2000, 1 << 30])
def test_closed_files_are_compressed(tmp_path: Path, rotate_bytes: int) -> None:
    """Compressed, a recording reads the same; the manifest's hashes stay those of the unpacked bytes."""
    data = stream(30)
    chunks = cut(data, 90)

    record(tmp_path, chunks, rotate_bytes=rotate_bytes, compress=True)

    names = sorted(path.name for path in tmp_path.iterdir())
    assert all(name.endswith((".nmea.gz", ".arrivals.csv.gz")) or name == MANIFEST for name in names)
    assert len(names) == 2 * len(read_folder(tmp_path)) + 1
    for file in read_folder(tmp_path):
        raw = gzip.decompress((tmp_path / (file.name + ".gz")).read_bytes())
        assert hashlib.sha256(raw).hexdigest() == file.sha256
    pieces, source = replay(tmp_path)
    assert pieces == [(chunk.data, chunk.received_s) for chunk in chunks]
    assert source.doubts == ()


def test_a_later_recording_goes_on_behind(tmp_path: Path) -> None:
    """A second recording in one folder adds to it; one left open is closed in the manifest, and said to be."""
    first = Recorder(tmp_path, ManualClock(), source="roof")
    first(Chunk(b"one\r\n", 1.9e9))
    with pytest.raises(RecordingError, match="another program is recording"):
        Recorder(tmp_path, ManualClock(), source="roof")
    first._unlock()  # As the system does when a program is killed.

    record(tmp_path, [Chunk(b"two\r\n", 1.9e9 + 60)])

    files = read_folder(tmp_path)
    assert [file.bytes for file in files] == [5, 5]
    assert files[0].sha256 == hashlib.sha256(b"one\r\n").hexdigest()
    assert "not closed" in files[0].note
    assert [data for data, _ in replay(tmp_path)[0]] == [b"one\r\n", b"two\r\n"]


def test_changed_evidence_is_told(tmp_path: Path) -> None:
    """Bytes changed after the recording are read, and named as changed."""
    record(tmp_path, cut(stream(3), 100))
    (file,) = read_folder(tmp_path)
    path = tmp_path / file.name
    path.write_bytes(path.read_bytes().replace(b"4807", b"4808", 1))

    _, source = replay(tmp_path)

    assert source.doubts == (f"'{file.name}' is not what its manifest says: its bytes were changed",)


@pytest.mark.parametrize("lost", ["manifest", "table", "half a row", "zeros", "rows without bytes", "no newline"])
def test_folders_need_no_repair(tmp_path: Path, lost: str) -> None:
    """Whatever a kill or a power cut can leave: all bytes are read, times where they are still known."""
    data = stream(5)
    chunks = cut(data, 100)
    record(tmp_path, chunks)
    (file,) = read_folder(tmp_path)
    table = tmp_path / table_name(file.name)
    rows = table.read_bytes()
    if lost == "manifest":
        (tmp_path / MANIFEST).write_bytes(b"{")
    elif lost == "table":
        table.unlink()
    elif lost == "half a row":
        table.write_bytes(rows[:-9])
    elif lost == "no newline":
        table.write_bytes(rows + b"99999999,1.9")
    elif lost == "zeros":
        table.write_bytes(rows[:-40] + bytes(40))
    else:
        table.write_bytes(rows + b"%d,1900000099.5\n" % (len(data) + 7))

    source = open_source(str(tmp_path), clock=ManualClock())
    pieces = [piece for chunk in source.chunks() for piece in parts(chunk)]

    assert b"".join(piece for piece, _ in pieces) == data
    expected = [(chunk.data, chunk.received_s) for chunk in chunks]
    if lost in ("manifest", "no newline"):
        assert pieces == expected
    elif lost == "table":
        assert all(time != time for _, time in pieces)
    elif lost == "rows without bytes":
        assert pieces == [*expected, (b"", 1900000099.5)]
    else:
        assert pieces[:-2] == expected[: len(pieces) - 2]


def test_a_recorded_file_alone(tmp_path: Path) -> None:
    """One file of a recording, named by itself, still knows when its bytes came."""
    chunks = cut(stream(3), 100)
    record(tmp_path, chunks)
    (file,) = read_folder(tmp_path)

    assert replay(tmp_path / file.name)[0] == [(chunk.data, chunk.received_s) for chunk in chunks]


def test_a_log_without_times_is_kept_without(tmp_path: Path) -> None:
    """Recording a log keeps its bytes; a time that nobody knows is not invented."""
    record(tmp_path, [Chunk(stream(3))])

    pieces, _ = replay(tmp_path)

    assert b"".join(data for data, _ in pieces) == stream(3)
    assert all(time != time for _, time in pieces)


def test_disk_is_told_every_second(tmp_path: Path) -> None:
    """What came is with the disk itself after a second, also when it comes slowly."""
    from gnssmon.recording.disk import Disk

    clock = ManualClock()

    class Noting(Disk):
        synced: ClassVar[list[float]] = []

        def sync(self, descriptor: int) -> None:
            self.synced.append(clock.steady())
            super().sync(descriptor)

    recorder = Recorder(tmp_path, clock, source="roof", disk=Noting())
    Noting.synced.clear()
    for _ in range(100):
        clock.sleep(0.3)
        recorder(Chunk(b"x", clock.now()))

    times = sorted(set(Noting.synced))
    assert max(b - a for a, b in zip([0.0, *times], [*times, 30.0], strict=True)) <= 1.0 + 0.3
    recorder.close()


def test_folder_that_cannot_be_written(tmp_path: Path) -> None:
    """A folder that is a file, or inside one, is an error before anything is read."""
    (tmp_path / "file").write_bytes(b"")

    for folder in (tmp_path / "file", tmp_path / "file" / "inside"):
        with pytest.raises(RecordingError, match="cannot record to"):
            Recorder(folder, ManualClock(), source="roof")
