"""What the dashboard costs: bytes painted a second, share of a core, time from key to paint. Prints; asserts nothing.

A receiver is played into one pseudo-terminal, the dashboard runs in another of 80x24 cells in true colour. Usage:

    python tests/benchmarks/painted_bytes.py [seconds a view] [epochs a second]
"""

from __future__ import annotations

import fcntl
import itertools
import os
import pty
import random
import select
import struct
import subprocess
import sys
import tempfile
import termios
import threading
import time
import tty
from collections.abc import Callable, Iterator
from pathlib import Path

SYSTEMS = (("GP", 1, (1, 8)), ("GL", 2, (1, 3)), ("GA", 3, (7, 2)), ("GB", 4, (1, 8)))
"""Talker, system identifier and two signal identifiers (NMEA 0183 4.11)."""

VIEWS = (("1", "now"), ("2", "sky"), ("3", "signals"), ("4", "position"), ("5", "stream"), ("6", "verdict"),
         ("7", "events"), ("8", "sentences"))  # fmt: skip

SETTLE_S = 4.0


def _sentence(body: str) -> str:
    check = 0
    for byte in body.encode():
        check ^= byte
    return f"${body}*{check:02X}\r\n"


def bursts(rate_hz: float) -> Iterator[bytes]:
    """Epochs of an invented receiver: four systems of ten satellites on two bands, every level changing."""
    dice = random.Random(3)
    east = north = up = 0.0
    tick = 0
    began = int(time.time()) * 1000
    while True:
        ms = (began + round(tick * 1000 / rate_hz)) % 86_400_000
        clock = f"{ms // 3_600_000:02d}{ms // 60_000 % 60:02d}{ms // 1000 % 60:02d}.{ms % 1000 // 10:02d}"
        east, north, up = (0.99 * v + dice.gauss(0, 0.1) for v in (east, north, up))
        place = f"1250.{500000 + round(north * 540):06d},S,04515.{250000 + round(east * 550):06d},E"
        day = time.strftime("%d%m%y", time.gmtime())
        lines = [
            f"GNRMC,{clock},A,{place},{abs(dice.gauss(0, 0.02)):.3f},,{day},,,D,V",
            f"GNGGA,{clock},{place},2,32,{dice.uniform(0.5, 0.6):.2f},{100 + up:.3f},M,-12.5,M,1.0,0101",
        ]
        for talker, system, signals in SYSTEMS:
            used = ",".join(f"{k:02d}" for k in range(1, 11))
            lines.append(f"GNGSA,A,3,{used},,,{dice.uniform(1, 1.1):.2f},0.55,0.9,{system}")
            for signal in signals:
                for part in range(3):
                    rows = ""
                    for k in range(part * 4 + 1, min(part * 4 + 5, 11)):
                        level = 32 + k + dice.gauss(0, 1)
                        number = k + (64 if talker == "GL" else 0)
                        rows += f",{number:02d},{5 + k * 7:02d},{(k * 36 + system * 17) % 360:03d},{level:.0f}"
                    lines.append(f"{talker}GSV,3,{part + 1},10{rows},{signal}")
        yield "".join(map(_sentence, lines)).encode()
        tick += 1


class Receiver:
    """Plays bursts into a pseudo-terminal."""

    def __init__(self, rate_hz: float) -> None:
        self._master, slave = pty.openpty()
        tty.setraw(slave)
        os.set_blocking(self._master, False)
        self.port = os.ttyname(slave)
        self._rate_hz, self._stop = rate_hz, threading.Event()
        threading.Thread(target=self._play, daemon=True).start()

    def _play(self) -> None:
        began = time.monotonic()
        for i, burst in enumerate(bursts(self._rate_hz)):
            if self._stop.wait(max(0.0, began + i / self._rate_hz - time.monotonic())):
                return
            try:
                os.write(self._master, burst)
            except BlockingIOError:
                continue  # nobody reads yet

    def close(self) -> None:
        self._stop.set()


class Screen:
    """Runs a command in a pseudo-terminal and counts what it paints."""

    def __init__(self, command: list[str], columns: int = 80, rows: int = 24) -> None:
        self.master, slave = pty.openpty()
        fcntl.ioctl(slave, termios.TIOCSWINSZ, struct.pack("HHHH", rows, columns, 0, 0))
        environment = {k: v for k, v in os.environ.items() if k != "NO_COLOR"}
        environment |= {"TERM": "xterm-256color", "COLORTERM": "truecolor", "LC_ALL": "C.UTF-8"}
        self.process = subprocess.Popen(
            command, stdin=slave, stdout=slave, stderr=slave, env=environment, start_new_session=True
        )
        os.close(slave)
        self.seen = b""
        """The last of what was painted."""

    def read(self, seconds: float) -> int:
        """Bytes painted within so many seconds."""
        until, count = time.monotonic() + seconds, 0
        while (left := until - time.monotonic()) > 0:
            if select.select([self.master], [], [], left)[0]:
                try:
                    painted = os.read(self.master, 65536)
                except OSError:
                    return count
                count += len(painted)
                self.seen = (self.seen + painted)[-100_000:]
        return count

    def press(self, key: str) -> float:
        """Seconds from a key to the first byte painted after it."""
        self.read(0.05)
        began = time.monotonic()
        os.write(self.master, key.encode())
        select.select([self.master], [], [], 5.0)
        return time.monotonic() - began

    def cpu_s(self) -> float:
        """Processor time used so far."""
        import psutil

        times = psutil.Process(self.process.pid).cpu_times()
        return float(times.user + times.system)

    def close(self) -> int:
        os.write(self.master, b"q")
        self.read(1.0)
        return self.process.wait(10)


def measure(seconds: float, rate_hz: float, *options: str) -> None:
    """Print a line a view."""
    receiver = Receiver(rate_hz)
    screen = Screen([sys.executable, "-m", "gnssmon", "watch", f"{receiver.port}@115200", *options])
    screen.read(SETTLE_S + 2.0)
    print(f"{rate_hz:g} Hz {' '.join(options) or 'default'}, 80x24, {seconds:.0f} s a view")
    for key, name in VIEWS:
        screen.press(key)
        screen.read(1.0)
        cpu_s = screen.cpu_s()
        painted = screen.read(seconds)
        share = (screen.cpu_s() - cpu_s) / seconds
        print(f"  {name:10} {painted / seconds:7.0f} B/s  {share:6.1%} of a core")
    code = screen.close()
    receiver.close()
    print(f"  left with exit code {code}")


def latency(epochs: int) -> None:
    """Time from a key to its paint while a log is read as fast as it goes."""
    with tempfile.TemporaryDirectory() as folder:
        log = Path(folder) / "long.nmea"
        log.write_bytes(b"".join(itertools.islice(bursts(1.0), epochs)))
        screen = Screen([sys.executable, "-m", "gnssmon", "replay", str(log), "--speed", "max"])
        while screen.read(0.1) == 0:
            pass
        screen.read(1.0)
        waits = []
        for i in range(24):
            waits.append(screen.press(VIEWS[(i + 1) % len(VIEWS)][0]))
            screen.read(0.1)
        still = b"ended" not in screen.seen
        screen.close()
        waits.sort()
        if not still:
            print("  (the log had ended before the last key)")
        size = log.stat().st_size / 1e6
        print(f"key to paint while {size:.0f} MB are read at full speed: median {waits[12] * 1000:.0f} ms, ", end="")
        print(f"worst of {len(waits)} {waits[-1] * 1000:.0f} ms")


def start() -> None:
    """Time to the first painted frame, against the bare import of the screen library."""

    def shortest(run: Callable[[], None]) -> float:
        times = []
        for _ in range(3):
            began = time.monotonic()
            run()
            times.append(time.monotonic() - began)
        return min(times)

    def frame() -> None:
        screen = Screen([sys.executable, "-m", "gnssmon", "replay", str(log)])
        painted = b""
        while "─ Fix".encode() not in painted:
            painted += os.read(screen.master, 65536)
        frames.append(screen)

    frames: list[Screen] = []
    bare = "from textual.app import App; from textual.widgets import Footer"
    with tempfile.TemporaryDirectory() as folder:
        log = Path(folder) / "short.nmea"
        log.write_bytes(b"".join(itertools.islice(bursts(1.0), 60)))
        imported_s = shortest(lambda: subprocess.run([sys.executable, "-c", bare], check=True) and None)
        first_s = shortest(frame)
        for screen in frames:
            screen.close()
    print(f"first frame after {first_s:.2f} s; importing the screen library alone {imported_s:.2f} s: ", end="")
    print(f"{first_s / imported_s:.1f} times that")


def main() -> None:
    seconds = float(sys.argv[1]) if len(sys.argv) > 1 else 10.0
    rates = [float(text) for text in sys.argv[2:]] or [1.0]
    for rate_hz in rates:
        measure(seconds, rate_hz)
    measure(seconds, rates[0], "--thin")
    latency(60_000)
    start()


if __name__ == "__main__":
    main()
