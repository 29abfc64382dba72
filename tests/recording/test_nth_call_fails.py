"""Every call to the operating system fails once: the evidence written before survives, and nothing is raised."""

from __future__ import annotations

from pathlib import Path

import pytest

from gnssmon.chunks import Chunk
from gnssmon.clocks import ManualClock
from gnssmon.errors import RecordingError
from gnssmon.recording.recorder import Recorder
from gnssmon.sources import open_source
from tests.recording.failing_disk import FailingDisk
from tests.sources.sentences import stream

DATA = stream(6)
PIECES = [DATA[at : at + 150] for at in range(0, len(DATA), 150)]


def run(folder: Path, disk: FailingDisk) -> tuple[int, str]:
    """Record DATA in some rotated, compressed files; returns the bytes that the recorder says it kept."""
    clock = ManualClock()
    try:
        recorder = Recorder(folder, clock, source="roof", rotate_bytes=900, compress=True, disk=disk)
    except RecordingError as error:
        return 0, str(error)
    for piece in PIECES:
        recorder(Chunk(piece, clock.now()))
        clock.sleep(0.5)
    recorder.close()
    return recorder.bytes, recorder.problem


def read(folder: Path) -> bytes:
    try:
        source = open_source(str(folder), clock=ManualClock())
    except Exception:
        return b""
    return b"".join(chunk.data for chunk in source.chunks())


@pytest.mark.parametrize("how", ["full", "one error", "half a write"])
def test_nothing_kept_is_lost(tmp_path: Path, how: str) -> None:
    """Let the 1st, 2nd, 3rd … call fail, until none does: what was kept is a beginning of the stream, as long as the
    recorder said; a failure that stopped it is told, and one that did not (compressing) lost nothing."""
    failing = 0
    while True:
        failing += 1
        folder = tmp_path / str(failing)
        disk = FailingDisk(failing, lasting=how != "one error", short=how == "half a write")
        kept, problem = run(folder, disk)
        there = read(folder)
        if not disk.failed:
            break

        assert DATA.startswith(there)
        assert len(there) >= kept
        assert problem == "" or "no space left on device" in problem
        assert (kept == len(DATA)) or problem
    assert failing > 100
    assert (kept, there, problem) == (len(DATA), DATA, "")
