"""The dashboard in a real terminal: what reaches it, and what happens when it goes away or stands still."""

from __future__ import annotations

import contextlib
import json
import os
import pty
import re
import select
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from tests.dashboard import snapshots

PATIENCE_S = 20.0


class Terminal:
    """A command in a pseudo-terminal of 80x24; its picture is read all the time unless told otherwise."""

    def __init__(self, *command: str, controlling: bool = True) -> None:
        self._master, slave = pty.openpty()
        import fcntl
        import struct
        import termios

        fcntl.ioctl(slave, termios.TIOCSWINSZ, struct.pack("HHHH", 24, 80, 0, 0))

        def adopt() -> None:
            if controlling:
                fcntl.ioctl(0, termios.TIOCSCTTY, 0)

        environment = os.environ | {"TERM": "xterm-256color", "LC_ALL": "C.UTF-8"}
        self.process = subprocess.Popen(
            [sys.executable, "-m", "gnssmon", *command],
            stdin=slave,
            stdout=slave,
            stderr=slave,
            env=environment,
            start_new_session=True,
            preexec_fn=adopt,
        )
        os.close(slave)
        self.painted = b""
        self._changed = threading.Condition()
        self._reading = threading.Event()
        self._reading.set()
        self._thread = threading.Thread(target=self._read, daemon=True)
        self._thread.start()

    def _read(self) -> None:
        while self._reading.is_set():
            if select.select([self._master], [], [], 0.05)[0]:
                try:
                    data = os.read(self._master, 65536)
                except OSError:
                    return
                with self._changed:
                    self.painted += data
                    self._changed.notify_all()

    def press(self, keys: str) -> None:
        """Type."""
        os.write(self._master, keys.encode())

    def until(self, condition: Callable[[bytes], bool]) -> bytes:
        """What was painted, once it fulfils the condition."""
        with self._changed:
            assert self._changed.wait_for(lambda: condition(self.painted), PATIENCE_S), self.painted[-2000:]
            return self.painted

    def stand_still(self) -> None:
        """Take no further byte of the picture."""
        self._reading.clear()
        self._thread.join()

    def hang_up(self) -> None:
        """Go away."""
        self.stand_still()
        os.close(self._master)

    def left(self) -> int:
        """The exit code, once the program has ended."""
        return self.process.wait(PATIENCE_S)


@contextlib.contextmanager
def opened(*command: str, controlling: bool = True) -> Iterator[Terminal]:
    """A terminal with a command in it that has painted its first view."""
    terminal = Terminal(*command, controlling=controlling)
    try:
        terminal.until(lambda painted: b"Fix" in painted)
        yield terminal
    finally:
        if terminal.process.poll() is None:
            terminal.process.kill()
            terminal.process.wait()
        with contextlib.suppress(OSError):
            terminal.hang_up()


@contextlib.contextmanager
def receiver(data: bytes) -> Iterator[str]:
    """A receiver on a pseudo-terminal that says the same over and over, ten times a second; gives its path."""
    master, slave = pty.openpty()
    import tty

    tty.setraw(slave)
    ended = threading.Event()

    def talk() -> None:
        while not ended.wait(0.1):
            with contextlib.suppress(OSError):
                os.write(master, data)

    thread = threading.Thread(target=talk, daemon=True)
    thread.start()
    try:
        yield os.ttyname(slave)
    finally:
        ended.set()
        thread.join()
        os.close(master)
        os.close(slave)


def until_kept(folder: Path, least: int) -> int:
    """Waits until a recording under way holds so many bytes; how many it holds."""
    until = time.monotonic() + PATIENCE_S
    while (kept := sum(path.stat().st_size for path in folder.glob("*.nmea"))) < least:
        assert time.monotonic() < until
        time.sleep(0.02)
    return kept


def closed_recording(folder: Path) -> int:
    """Bytes of a recording that was closed in order, each file hashed."""
    manifest = json.loads((folder / "manifest.json").read_text())
    assert all(file["sha256"] and file["closed_utc"] for file in manifest["files"])
    return sum(file["bytes"] for file in manifest["files"])


OURS = re.compile(
    rb"\x1b(?:"
    rb"\[\??[0-9;]*[mHhl]"  # colour, place, modes
    rb"|\[[<>]\d*u|\[\?\d+\$p"  # keyboard protocol, questions to the terminal
    rb"|\[[0-9;]*[ABCDJK]"
    rb"|\]22;[a-z-]*(?:\x07|\x1b\\)"  # shape of the mouse pointer
    rb")"
)
"""Escape sequences that the screen library uses (ECMA-48, and the keyboard protocol it asks for)."""


def test_no_sequence_of_the_stream_reaches_the_terminal(tmp_path: Path) -> None:
    """Whatever a receiver sends: the terminal gets the screen library's own sequences and printable text, no more."""
    attack = snapshots.ESCAPES + b"\x1b]52;c;bWFs\x07\x1bc\x1b[6n\x9b5n\x90q\x9c\x0e"
    log = tmp_path / "log.nmea"
    log.write_bytes(
        b"".join(
            snapshots.stream(1, start_s=40_000 + t)
            + attack
            + snapshots.sentence(f"GPTXT,01,01,02,{attack.decode('latin-1')}")
            + snapshots.sentence(f"GNGGA,1106{t:02d}.00,{attack.decode('latin-1')},S,,,1,,,,,,,,")
            for t in range(20)
        )
    )
    with opened("replay", str(log), "--speed", "max") as terminal:
        terminal.until(lambda painted: b"ended" in painted)
        for key in "2345678":
            before = len(terminal.painted)
            terminal.press(key)
            terminal.until(lambda painted, before=before: len(painted) > before + 200)  # type: ignore[misc]
        terminal.press("q")
        assert terminal.left() == 0
        rest = OURS.sub(b"", terminal.painted).decode("utf-8")
        assert {c for c in rest if not c.isprintable()} <= {"\r", "\n"}


def test_leaving_gives_the_terminal_back(tmp_path: Path) -> None:
    """q: exit code 0, the former screen, the cursor, and no mode left switched on."""
    log = tmp_path / "log.nmea"
    log.write_bytes(snapshots.stream(5))
    with opened("replay", str(log), "--speed", "max") as terminal:
        terminal.press("q")
        assert terminal.left() == 0
        painted = terminal.painted
        modes = {m[1] for m in re.finditer(rb"\x1b\[\?(\d+)h", painted)} - {b"25", b"7"}
        for mode in modes:
            assert painted.rfind(b"\x1b[?%bl" % mode) > painted.rfind(b"\x1b[?%bh" % mode), mode
        for mode in (b"25", b"7"):
            assert painted.rfind(b"\x1b[?%bh" % mode) > painted.rfind(b"\x1b[?%bl" % mode)


@pytest.mark.parametrize("controlling", [True, False], ids=["with SIGHUP", "without a signal"])
def test_a_terminal_that_goes_away_ends_the_dashboard(tmp_path: Path, controlling: bool) -> None:
    """A hung-up terminal ends the dashboard, whether or not a signal tells of it; the recording is closed."""
    folder = tmp_path / "kept"
    with (
        receiver(snapshots.stream(1)) as port,
        opened("watch", f"{port}@115200", "--record", str(folder), controlling=controlling) as terminal,
    ):
        until_kept(folder, 1_000)
        terminal.hang_up()
        assert terminal.left() == 0
        assert closed_recording(folder) > 1000


def test_a_terminal_that_stands_still_holds_up_neither_recording_nor_end(tmp_path: Path) -> None:
    """Where nobody takes what is painted, recording goes on; a stop from outside ends it all the same."""
    folder = tmp_path / "kept"
    with (
        receiver(snapshots.stream(1)) as port,
        opened("watch", f"{port}@115200", "--record", str(folder)) as terminal,
    ):
        until_kept(folder, 1_000)
        terminal.stand_still()
        for turn in range(60):  # pictures that fill whatever lies between, and more
            terminal.press("34"[turn % 2])
            time.sleep(0.05)
        kept = until_kept(folder, 0)
        until_kept(folder, kept + 4_000)
        terminal.process.send_signal(signal.SIGTERM)
        terminal.left()
        assert closed_recording(folder) >= kept + 4_000


@pytest.mark.parametrize("name", ["SIGTERM", "SIGINT", "SIGHUP"])
def test_signals_end_the_dashboard_in_order(tmp_path: Path, name: str) -> None:
    """A stop from outside gives the terminal back and leaves with 0."""
    log = tmp_path / "log.nmea"
    log.write_bytes(snapshots.stream(5))
    with opened("replay", str(log)) as terminal:
        terminal.process.send_signal(getattr(signal, name))
        assert terminal.left() == 0
        assert b"\x1b[?1049l" in terminal.painted
