"""A recording program killed at random moments loses nothing that is older than a second, and leaves a folder that
opens as it is."""

from __future__ import annotations

import os
import random
import signal
import subprocess
import sys
import time
from pathlib import Path

from gnssmon.clocks import ManualClock
from gnssmon.sources import open_source
from tests.test_chunks import parts

PROGRAM = """
import sys, time
from pathlib import Path
from gnssmon.chunks import Chunk
from gnssmon.clocks import SystemClock
from gnssmon.recording.recorder import Recorder

clock = SystemClock()
recorder = Recorder(Path(sys.argv[1]), clock, source="roof", rotate_bytes=20_000, compress=True)
number = 0
while True:
    line = b"$GPTXT,%09d*00\\r\\n" % number
    now = clock.now()
    recorder(Chunk(line, now))
    sys.stderr.write(f"{number} {now!r}\\n")
    number += 1
    if number % 40 == 0:
        time.sleep(0.001)
"""
"""Records numbered lines as fast as it can, rotating and compressing, and tells on stderr when each was handed over."""


def kill_once(folder: Path, after_s: float) -> tuple[int, int]:
    """Start, kill after a while, read; returns the numbers of lines handed over and of lines found."""
    told = folder.with_suffix(".told")
    with told.open("wb") as stderr:
        process = subprocess.Popen([sys.executable, "-c", PROGRAM, str(folder)], stderr=stderr)
        while not told.stat().st_size:
            time.sleep(0.005)
        time.sleep(after_s)
        os.kill(process.pid, signal.SIGKILL)
        process.wait()
    lines = told.read_text().split("\n")[:-1]
    handed = {int(number): float(now) for number, now in (line.split() for line in lines)}

    source = open_source(str(folder), clock=ManualClock())
    pieces = [piece for chunk in source.chunks() for piece in parts(chunk)]
    data = b"".join(piece for piece, _ in pieces)
    expected = b"".join(b"$GPTXT,%09d*00\r\n" % number for number in range(len(handed) + 1))
    assert expected.startswith(data)
    assert source.doubts == ()
    # Each piece has the very time that it was handed over with.
    for number, (piece, received_s) in enumerate(pieces):
        if len(piece) == 21 and number in handed:
            assert received_s == handed[number]
    return len(handed), len(data) // 21


def test_killed_at_random_moments(tmp_path: Path) -> None:
    """Not one line that was handed over is lost, whatever the recorder was doing: far below the second allowed."""
    chance = random.Random(20310504)

    counts = [kill_once(tmp_path / str(number), chance.uniform(0.0, 0.25)) for number in range(6)]

    assert all(found >= handed for handed, found in counts), counts
    assert max(handed for handed, _ in counts) > 1000
