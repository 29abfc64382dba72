"""gnssmon record, as a user runs it."""

from __future__ import annotations

import os
import signal
import socket
import subprocess
import sys
import threading
import time
from pathlib import Path

import pytest

from gnssmon.clocks import ManualClock, SystemClock
from gnssmon.recording.folder import read_folder
from gnssmon.recording.recorder import Recorder
from gnssmon.session import run
from gnssmon.sources import open_source
from tests.recording.failing_disk import FailingDisk
from tests.sources.sentences import stream
from tests.test_session import Noting

RECORD = [sys.executable, "-m", "gnssmon", "record"]


def read(folder: Path) -> bytes:
    return b"".join(chunk.data for chunk in open_source(str(folder), clock=ManualClock()).chunks())


@pytest.mark.parametrize("name", ["SIGINT", "SIGTERM", "SIGHUP"])
def test_signals_end_a_recording_cleanly(tmp_path: Path, name: str) -> None:
    """Ctrl-C, SIGTERM and SIGHUP close the recording: all bytes, hashed, exit code 0, nothing on standard output."""
    folder = tmp_path / "r"
    with socket.create_server(("127.0.0.1", 0)) as server:
        source = f"tcp://127.0.0.1:{server.getsockname()[1]}"
        process = subprocess.Popen(
            [*RECORD, source, "--to", str(folder)], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
        )
        peer, _ = server.accept()
        with peer:
            peer.sendall(stream(5))
            deadline = time.monotonic() + 20.0
            while not folder.is_dir() or read_size(folder) < len(stream(5)):
                assert time.monotonic() < deadline
                time.sleep(0.02)
            os.kill(process.pid, getattr(signal, name))
            out, err = process.communicate(timeout=20.0)

    assert (process.returncode, out) == (0, "")
    assert err == f"{len(stream(5))} bytes kept in '{folder}'\n"
    assert read(folder) == stream(5)
    (file,) = read_folder(folder)
    assert (file.bytes, file.source, file.note) == (len(stream(5)), source, "")
    assert file.sha256 is not None


def read_size(folder: Path) -> int:
    return sum(path.stat().st_size for path in folder.glob("*.nmea"))


def test_errors_and_exit_codes(tmp_path: Path) -> None:
    """A source that is not there and a folder that is none: exit code 4, one line; no folder left behind."""
    (tmp_path / "file").write_bytes(stream(1))
    for arguments in (
        ["missing.nmea", "--to", str(tmp_path / "r")],
        [str(tmp_path / "file"), "--to", str(tmp_path / "file" / "r")],
    ):
        ended = subprocess.run([*RECORD, *arguments], capture_output=True, text=True, check=False)

        assert (ended.returncode, ended.stdout) == (4, "")
        assert ended.stderr.startswith("gnssmon: ")
        assert ended.stderr.count("\n") == 1
    assert not (tmp_path / "r").exists()


def test_a_disk_that_takes_no_more_ends_the_command(tmp_path: Path) -> None:
    """A file that may not grow (the shell's limit stands for a full disk) ends the recording with its reason and
    exit code 4; what was kept stays and opens."""
    log = tmp_path / "log"
    log.write_bytes(stream(600))
    command = " ".join([*RECORD, str(log), "--to", str(tmp_path / "r"), "--rotate-mb", "100"])

    # 64 blocks of 1024 bytes (bash's ulimit -f).
    ended = subprocess.run(["bash", "-c", f"ulimit -f 64; {command}"], capture_output=True, text=True, check=False)

    assert ended.returncode == 4
    assert "stopped after" in ended.stderr
    assert "file too large" in ended.stderr
    assert read(tmp_path / "r") == stream(600)[:65536]


def test_a_full_disk_stops_recording_not_monitoring(tmp_path: Path) -> None:
    """The monitor gets every byte although the recorder can write no more, and the recorder says why."""
    data = stream(60)
    (tmp_path / "log").write_bytes(data)
    clock = SystemClock()
    recorder = Recorder(tmp_path / "r", clock, source="x", disk=FailingDisk(11))
    monitor = Noting()

    run(open_source(str(tmp_path / "log"), clock=clock), monitor, [recorder], clock, stop=threading.Event())
    recorder.close()

    assert monitor.data == data
    assert "stopped after 0 bytes: no space left on device" in recorder.problem
