"""The feed: the newest snapshot of a session, windows, marks, and a log that is played again."""

from __future__ import annotations

import math
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path

from gnssmon.chunks import Chunk
from gnssmon.clocks import SystemClock
from gnssmon.dashboard.feed import WINDOWS, Feed
from gnssmon.monitor import Monitor, Settings
from gnssmon.recording.recorder import Recorder
from gnssmon.replay.index import build_index
from gnssmon.replay.player import Player
from gnssmon.snapshot import Snapshot, SourceFacts
from gnssmon.sources.log_file import LogFile
from gnssmon.sources.source import Kind, Source
from tests.dashboard import snapshots

PATIENCE_S = 10.0


class Seen:
    """Takes what a feed posts; waits for one that fulfils a condition."""

    def __init__(self) -> None:
        self.all: list[Snapshot] = []
        self._changed = threading.Condition()

    def __call__(self, snapshot: Snapshot) -> None:
        with self._changed:
            self.all.append(snapshot)
            self._changed.notify_all()

    def wait(self, condition: Callable[[Snapshot], bool]) -> Snapshot:
        """The newest snapshot, once it fulfils the condition; fails after a while."""
        with self._changed:
            assert self._changed.wait_for(lambda: bool(self.all) and condition(self.all[-1]), PATIENCE_S)
            return self.all[-1]


def _player(path: Path, data: bytes, rate: float = math.inf) -> Player:
    path.write_bytes(data)
    return Player(lambda: LogFile(path), SystemClock(), rate=rate)


def test_at_the_end_the_numbers_are_those_of_one_go(tmp_path: Path) -> None:
    """What the screen shows of a whole log is what a monitor says that was fed with it at once."""
    data = snapshots.stream(90)
    seen = Seen()
    feed = Feed(_player(tmp_path / "log.nmea", data), Settings(), SystemClock())
    feed.start(seen)
    shown = seen.wait(lambda s: s.source.state == "ended")
    feed.stop()
    monitor = Monitor(Settings(), SourceFacts(label="", kind="log"))
    monitor.feed(Chunk(data))
    monitor.finish()
    expected = monitor.snapshot()
    assert repr(shown.estimates) == repr(expected.estimates)
    assert shown.stream == expected.stream


def test_windows_and_mark(tmp_path: Path) -> None:
    """A window holds the epochs of its length, of a log at its end too; a mark those that follow."""
    seen = Seen()
    feed = Feed(_player(tmp_path / "log.nmea", snapshots.stream(150)), Settings(), SystemClock())
    feed.start(seen)
    seen.wait(lambda s: s.source.state == "ended")
    minute = next(window for window in WINDOWS if window.words == "last minute")
    feed.choose(minute)
    shown = seen.wait(lambda s: s.window == "last minute")
    assert shown.estimates["stream.epochs"].value == 60
    feed.mark()
    shown = seen.wait(lambda s: s.window == "since mark")
    assert shown.estimates["stream.epochs"].value == 1
    feed.stop()


def test_back_from_the_end(tmp_path: Path) -> None:
    """A log at its end goes back: what is shown is what was known at that time, and it stands still there."""
    seen = Seen()
    player = _player(tmp_path / "log.nmea", snapshots.stream(120))
    feed = Feed(player, Settings(), SystemClock(), index=lambda: build_index(LogFile(tmp_path / "log.nmea")))
    feed.start(seen)
    seen.wait(lambda s: s.source.state == "ended")
    at_ms = player.axis_ms
    assert at_ms is not None
    feed.jump(at_ms - 60_000)
    shown = seen.wait(lambda s: s.source.state != "ended" and s.progress.get("paused") == 1.0)
    shown = seen.wait(lambda s: (s.estimates["stream.epochs"].value or 0) >= 58)  # type: ignore[operator]
    assert shown.estimates["stream.epochs"].value in (58, 59, 60)
    assert 0.4 < shown.progress["share"] < 0.6
    feed.stop()


class Endless(Source):
    """A live source that says the same over and over, as fast as it is read."""

    kind: Kind = "live"

    def __init__(self, data: bytes) -> None:
        super().__init__("endless")
        self._data = data

    def chunks(self) -> Iterator[Chunk]:
        for _ in range(1_000_000):
            if self._closing:
                return
            time.sleep(0.001)  # a live line takes its time
            yield Chunk(self._data, time.time())


def test_at_most_two_a_second_and_all_recorded(tmp_path: Path) -> None:
    """A burst gives few snapshots; the recorder has every byte before the monitor; stopping closes the recording."""
    clock = SystemClock()
    recorder = Recorder(tmp_path / "rec", clock, source="endless")
    seen = Seen()
    feed = Feed(Endless(snapshots.stream(1)), Settings(), clock, recorder=recorder)
    began = time.monotonic()
    feed.start(seen)
    seen.wait(lambda s: len(seen.all) >= 3)
    feed.stop()
    took_s = time.monotonic() - began
    assert len(seen.all) <= took_s / 0.5 + 2
    kept = b"".join(path.read_bytes() for path in sorted((tmp_path / "rec").glob("*.nmea")))
    assert len(kept) >= seen.all[-1].stream.bytes
    assert recorder.bytes == len(kept)


def test_a_fault_of_our_own_is_told(tmp_path: Path) -> None:
    """What a monitor raises does not vanish in a thread: it is kept, and shown as the source's state."""
    seen = Seen()
    feed = Feed(_player(tmp_path / "log.nmea", snapshots.stream(5)), Settings(), SystemClock())

    def broken(_chunk: Chunk) -> None:
        raise ZeroDivisionError("planted")

    feed._monitor.feed = broken  # type: ignore[method-assign]
    feed.start(seen)
    shown = seen.wait(lambda s: "planted" in s.source.state)
    assert isinstance(feed.failure, ZeroDivisionError)
    assert shown.source.state == "ZeroDivisionError: planted"
    feed.stop()
