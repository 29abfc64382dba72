"""Kills ``gnssmon record`` at random moments and prints how old the newest lost byte was.

usage: python -m tests.benchmarks.kill_recordings [--times 50] [--lines-per-second 200]

A server on the loopback interface sends numbered lines at a steady pace and notes when; the program records them from
``tcp://``, is killed (SIGKILL), and its folder is opened as it lies. A line counts as lost when the server had sent it
and the folder does not hold it; its age is what it had at the kill.
"""

from __future__ import annotations

import argparse
import os
import random
import signal
import socket
import subprocess
import sys
import tempfile
import threading
import time
from pathlib import Path

from gnssmon.clocks import SystemClock
from gnssmon.sources import open_source

LINE_BYTES = 21


class Server:
    """Sends ``$GPTXT,000000001*00`` and so on to whoever connects, one after the other."""

    def __init__(self, lines_per_s: float) -> None:
        self._socket = socket.create_server(("127.0.0.1", 0))
        self.port = self._socket.getsockname()[1]
        self._pause_s = 1.0 / lines_per_s
        self.sent_s: list[float] = []
        self._gone = threading.Event()

    def serve_one(self) -> threading.Thread:
        thread = threading.Thread(target=self._serve, daemon=True)
        thread.start()
        return thread

    def _serve(self) -> None:
        peer, _ = self._socket.accept()
        self.sent_s = []
        with peer:
            try:
                while True:
                    peer.sendall(b"$GPTXT,%09d*00\r\n" % len(self.sent_s))
                    self.sent_s.append(time.monotonic())
                    time.sleep(self._pause_s)
            except OSError:
                return


def kill_once(server: Server, folder: Path, after_s: float) -> tuple[int, int, float]:
    """Lines sent, lines kept, and the age of the oldest lost one at the kill (0 where none is lost)."""
    serving = server.serve_one()
    command = [sys.executable, "-m", "gnssmon", "record", f"tcp://127.0.0.1:{server.port}", "--to", str(folder)]
    process = subprocess.Popen([*command, "--rotate-mb", "0.01", "--compress"], stderr=subprocess.DEVNULL)
    while not folder.is_dir() or not any(folder.glob("*.nmea")):
        time.sleep(0.01)
    time.sleep(after_s)
    os.kill(process.pid, signal.SIGKILL)
    killed_s = time.monotonic()
    process.wait()
    serving.join()
    sent_s = [at for at in server.sent_s if at < killed_s]
    source = open_source(str(folder), clock=SystemClock())
    data = b"".join(chunk.data for chunk in source.chunks())
    expected = b"".join(b"$GPTXT,%09d*00\r\n" % number for number in range(len(server.sent_s)))
    if not expected.startswith(data) or source.doubts:
        raise SystemExit(f"the recording in {folder} is not what was sent: {source.doubts}")
    kept = len(data) // LINE_BYTES
    return len(sent_s), kept, killed_s - sent_s[kept] if kept < len(sent_s) else 0.0


def main() -> None:
    parser = argparse.ArgumentParser()
    parser.add_argument("--times", type=int, default=50)
    parser.add_argument("--lines-per-second", type=float, default=200.0)
    arguments = parser.parse_args()
    chance = random.Random(1)
    server = Server(arguments.lines_per_second)
    ages = []
    sent = kept = 0
    with tempfile.TemporaryDirectory() as room:
        for number in range(arguments.times):
            result = kill_once(server, Path(room) / str(number), chance.uniform(0.0, 2.0))
            sent, kept = sent + result[0], kept + result[1]
            ages.append(result[2])
    print(f"killed {len(ages)} times: {sent} lines sent, {kept} kept; every folder opened as it lay")
    print(f"age of the oldest lost line at the kill: longest {max(ages):.3f} s, mean {sum(ages) / len(ages):.3f} s")


if __name__ == "__main__":
    main()
