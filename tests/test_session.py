"""Sessions: order, ends, stops, slow watchers, slow monitors; and one answer on three paths."""

from __future__ import annotations

import hashlib
import os
import signal
import threading
import time
import tty
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from gnssmon.chunks import Chunk
from gnssmon.clocks import ManualClock, SystemClock
from gnssmon.errors import SourceError
from gnssmon.recording.recorder import Recorder
from gnssmon.replay.player import Player
from gnssmon.session import JOINED_BYTES, LIVE_CHUNKS, LOG_CHUNKS, Line, Outcome, run, stop_on_signals
from gnssmon.sources import open_source
from gnssmon.sources.source import Kind, Source
from tests.sources.sentences import stream
from tests.test_chunks import parts


class Given(Source):
    """Gives chunks as told, then perhaps an error; notes what it gave."""

    def __init__(
        self, chunks: list[Chunk], *, kind: Kind = "log", error: Exception | None = None, pause_s: float = 0.0
    ) -> None:
        super().__init__("given")
        self.kind = kind
        self._chunks, self._error, self._pause_s = chunks, error, pause_s
        self.given = 0

    def chunks(self) -> Iterator[Chunk]:
        for chunk in self._chunks:
            if self._closing:
                return
            if self._pause_s:
                time.sleep(self._pause_s)
            self.given += 1
            yield chunk
        if self._error is not None:
            raise self._error

    @property
    def closed(self) -> bool:
        return self._closing


class Noting:
    """A monitor that keeps what it is fed."""

    def __init__(self, on_feed: Callable[[Chunk], None] = lambda chunk: None) -> None:
        self.fed: list[Chunk] = []
        self.finished = 0
        self._on_feed = on_feed

    def feed(self, chunk: Chunk) -> None:
        assert not self.finished
        self._on_feed(chunk)
        self.fed.append(chunk)

    def finish(self) -> None:
        self.finished += 1

    @property
    def data(self) -> bytes:
        return b"".join(chunk.data for chunk in self.fed)


CLOCK = SystemClock()
BLOCKS = [Chunk(bytes([65 + number]) * 10) for number in range(20)]


def go(
    source: Source, monitor: Noting, watchers: list[Callable[[Chunk], None]] | None = None, **how: object
) -> Outcome:
    how.setdefault("stop", threading.Event())
    before = threading.active_count()
    outcome = run(source, monitor, watchers or [], CLOCK, **how)  # type: ignore[arg-type]
    assert threading.active_count() <= before
    return outcome


@pytest.mark.parametrize("kind", ["log", "live", "simulated"])
@pytest.mark.parametrize("watched", [False, True])
def test_everything_in_order_and_watchers_first(kind: Kind, watched: bool) -> None:
    """Watchers see each byte before the monitor does; the monitor sees all bytes in order and is finished once."""
    seen: list[bytes] = []

    def first(chunk: Chunk) -> None:
        seen.append(chunk.data)

    def check_order(chunk: Chunk) -> None:
        assert not watched or (b"".join(monitor_data) + chunk.data) in b"".join(seen)
        monitor_data.append(chunk.data)

    monitor_data: list[bytes] = []
    monitor = Noting(check_order)
    source = Given(BLOCKS, kind=kind)

    outcome = go(source, monitor, [first] if watched else [])

    whole = b"".join(chunk.data for chunk in BLOCKS)
    assert outcome == Outcome("end")
    assert (monitor.data, monitor.finished, source.closed) == (whole, 1, True)
    assert not watched or b"".join(seen) == whole
    if kind == "log":
        assert monitor.fed == BLOCKS


def test_a_source_that_ends_early_gives_all_it_had() -> None:
    """What came before the loss is fed and watched; the loss is told, not raised."""
    monitor, seen = Noting(), []

    outcome = go(Given(BLOCKS, error=SourceError("cut off behind byte 200")), monitor, [seen.append])

    assert outcome == Outcome("early", "cut off behind byte 200")
    assert (monitor.fed, seen, monitor.finished) == (BLOCKS, BLOCKS, 1)


@pytest.mark.parametrize("where", ["source", "watcher", "monitor", "look"])
def test_faults_of_the_program_are_raised(where: str) -> None:
    """An error that is no fact of the world is raised to the caller, with all threads gone and the source closed."""

    def fail(*_: object) -> None:
        raise ZeroDivisionError(where)

    source = Given(BLOCKS, error=ZeroDivisionError(where) if where == "source" else None)
    monitor = Noting(fail if where == "monitor" else lambda chunk: None)

    with pytest.raises(ZeroDivisionError, match=where):
        go(source, monitor, [fail] if where == "watcher" else [], look=fail if where == "look" else None)

    assert source.closed


def test_stopping_keeps_the_result_so_far() -> None:
    """When ``stop`` is set the session ends soon, with the monitor finished, and the watchers saw what it was fed."""
    stop = threading.Event()
    monitor, seen = Noting(lambda chunk: stop.set() if chunk.data[:1] == b"F" else None), []

    outcome = go(Given(BLOCKS * 50), monitor, [seen.append], stop=stop)

    assert outcome == Outcome("stopped")
    assert monitor.finished == 1
    assert 6 <= len(monitor.fed) <= 7
    assert seen[: len(monitor.fed)] == monitor.fed


def test_for_ends_a_live_session_by_the_clock() -> None:
    """``for_s`` of a live source is the host's time."""
    began = time.monotonic()

    outcome = go(Given([Chunk(b"x", 1.0)] * 100_000, kind="live", pause_s=0.01), Noting(), for_s=0.2)

    assert outcome == Outcome("elapsed")
    assert 0.2 <= time.monotonic() - began < 1.0


def test_a_live_source_that_ends_before_the_time_asked_for() -> None:
    """The natural end of a live source before ``for_s`` is early, and told so."""
    outcome = go(Given([Chunk(b"x", 1.0)], kind="live"), Noting(), for_s=600.0)

    assert outcome.ended == "early"
    assert "of the 600 s asked for" in outcome.problem


def test_for_cuts_a_log_by_its_own_time(tmp_path: Path) -> None:
    """``for_s`` of a log is the log's time, exact to the epoch; its hash is of the whole log all the same."""
    (tmp_path / "log").write_bytes(stream(100))
    source, monitor = open_source(str(tmp_path / "log"), clock=CLOCK), Noting()

    outcome = go(source, monitor, for_s=7.0)

    assert outcome == Outcome("end")
    assert monitor.data == stream(7)
    assert source.sha256 == hashlib.sha256(stream(100)).hexdigest()


def test_a_log_waits_for_a_slow_monitor() -> None:
    """Of a log only a few blocks are read ahead: memory does not grow with its size."""
    ahead = []
    source = Given(BLOCKS * 5)
    monitor = Noting(lambda chunk: (time.sleep(0.002), ahead.append(source.given - len(monitor.fed)))[0])

    go(source, monitor)

    # The line's own blocks, the one in hand, and the one that waits to be put.
    assert max(ahead) <= LOG_CHUNKS + 2
    assert len(monitor.fed) == 100


def test_a_live_source_never_waits_for_a_slow_monitor() -> None:
    """A monitor that stands still does not hold up the reader; afterwards it gets every byte with its time."""
    count = 3000
    pieces = [Chunk(b"%06d\r\n" % number, float(number)) for number in range(count)]
    source = Given(pieces, kind="live")
    read_up_to = []

    def slow(chunk: Chunk) -> None:
        if not read_up_to:
            time.sleep(0.2)
            read_up_to.append(source.given)

    monitor, kept = Noting(slow), []
    go(source, monitor, [kept.append])

    assert read_up_to == [count]
    assert [piece for chunk in monitor.fed for piece in parts(chunk)] == [(p.data, p.received_s) for p in pieces]
    assert [piece for chunk in kept for piece in parts(chunk)] == [(p.data, p.received_s) for p in pieces]
    assert len(monitor.fed) < count / 10
    assert all(len(chunk.data) <= JOINED_BYTES for chunk in monitor.fed)


def test_silence_is_not_joined_with_bytes() -> None:
    """An empty chunk reaches the monitor as one: between bytes it would be lost."""
    pieces = [Chunk(b"a", 1.0), Chunk(b"b", 2.0), Chunk(b"", 3.0), Chunk(b"", 4.0), Chunk(b"c", 5.0)]
    line = Line(live=True)
    for piece in pieces:
        line.put(piece)

    taken = [line.take(), line.take(), line.take()]

    assert [(chunk.data, chunk.received_s) for chunk in taken if chunk] == [(b"ab", 2.0), (b"", 4.0), (b"c", 5.0)]


def test_a_line_that_piles_up_joins() -> None:
    """Beyond LIVE_CHUNKS waiting pieces the next ones are joined to the last; none is dropped."""
    line = Line(live=True)
    for number in range(3 * LIVE_CHUNKS):
        assert line.put(Chunk(b"x", float(number)))

    taken = []
    while (chunk := line.take(0.0)) is not None:
        taken += parts(chunk)

    assert taken == [(b"x", float(number)) for number in range(3 * LIVE_CHUNKS)]


def test_an_abandoned_line_lets_go() -> None:
    """Who puts into a full line that nobody reads any more is told so and does not wait."""
    line = Line(live=False)
    for chunk in BLOCKS[:LOG_CHUNKS]:
        line.put(chunk)
    line.abandon()

    assert line.put(BLOCKS[5]) is False


def test_a_deaf_reader_is_told_as_silence(monkeypatch: pytest.MonkeyPatch) -> None:
    """A live reader that hangs in the operating system gives nothing, so the session tells the silence itself."""
    monkeypatch.setattr("gnssmon.session.DEAF_S", 0.05)
    stop = threading.Event()
    monitor = Noting(lambda chunk: stop.set() if not chunk.data else None)

    outcome = go(Given([Chunk(b"x", 1.0), Chunk(b"y", 2.0)], kind="live", pause_s=0.4), monitor, stop=stop)

    assert outcome == Outcome("stopped")
    assert monitor.fed[-1].data == b""
    assert abs(monitor.fed[-1].received_s - time.time()) < 2.0


def test_a_reader_that_hangs_does_not_hold_up_the_end() -> None:
    """A source that does not notice its closing is left behind; the watchers have had all that it gave."""

    class Hanging(Given):
        def chunks(self) -> Iterator[Chunk]:
            yield from BLOCKS
            released.wait(10.0)

    released, stop, kept = threading.Event(), threading.Event(), []
    monitor = Noting(lambda chunk: stop.set() if chunk.data.endswith(b"T") else None)
    began = time.monotonic()

    outcome = run(Hanging([], kind="live"), monitor, [kept.append], CLOCK, stop=stop)
    took_s = time.monotonic() - began
    released.set()

    assert outcome == Outcome("stopped")
    assert took_s < 3.0
    assert b"".join(chunk.data for chunk in kept) == monitor.data == b"".join(chunk.data for chunk in BLOCKS)


def test_signals_set_the_flag_once() -> None:
    """SIGINT and SIGTERM set the flag; a second SIGINT interrupts as usual; afterwards everything is as it was."""
    before = signal.getsignal(signal.SIGINT), signal.getsignal(signal.SIGHUP)
    with stop_on_signals(signal.SIGHUP) as stop:
        assert not stop.is_set()
        os.kill(os.getpid(), signal.SIGHUP)
        assert stop.wait(1.0)
    with stop_on_signals() as stop:
        os.kill(os.getpid(), signal.SIGINT)
        assert stop.wait(1.0)
        with pytest.raises(KeyboardInterrupt):
            signal.raise_signal(signal.SIGINT)

    assert (signal.getsignal(signal.SIGINT), signal.getsignal(signal.SIGHUP)) == before


def without_host_times(numbers: dict[str, object]) -> dict[str, object]:
    """Every quantity that does not speak of host times: those differ where host times do."""
    return {name: value for name, value in numbers.items() if not name.startswith("timing.")}


def test_three_paths_one_answer(tmp_path: Path) -> None:
    """The same bytes as a log, replayed at ten times their speed, live over a pseudo-terminal, and replayed from the
    recording of that: every number equal to the last digit."""
    from gnssmon.monitor import Monitor, Settings
    from gnssmon.snapshot import SourceFacts

    data = stream(40)
    (tmp_path / "log").write_bytes(data)
    log = str(tmp_path / "log")
    results = {}

    def judge(name: str, source: Source, watchers: list[Callable[[Chunk], None]] | None = None, clock=CLOCK) -> None:
        monitor = Monitor(Settings(), SourceFacts(label="x", kind="log"))
        run(source, monitor, watchers or [], clock, stop=threading.Event())
        assert monitor.estimates()["stream.epochs"].value == 40
        results[name] = {key: estimate.value for key, estimate in monitor.estimates().items()}

    judge("log", open_source(log, clock=CLOCK))
    manual = ManualClock()
    judge("replay", Player(lambda: open_source(log, clock=manual), manual, rate=10.0), clock=CLOCK)
    near, far = os.openpty()
    tty.setraw(far)
    port = open_source(os.ttyname(far) + "@9600", clock=CLOCK)

    def send() -> None:
        for at in range(0, len(data), 333):
            os.write(near, data[at : at + 333])
            time.sleep(0.002)
        while port.consumed < len(data):
            time.sleep(0.01)
        port.close()

    sender = threading.Thread(target=send)
    sender.start()
    recorder = Recorder(tmp_path / "recording", CLOCK, source="x")
    judge("live", port, [recorder])
    sender.join()
    recorder.close()
    os.close(near)
    os.close(far)
    judge("recording", open_source(str(tmp_path / "recording"), clock=CLOCK))

    for name in ("replay", "live", "recording"):
        assert repr(without_host_times(results["log"])) == repr(without_host_times(results[name]))
    # Delay and jitter come out of the recording as they were.
    assert repr(results["recording"]) == repr(results["live"])
    assert isinstance(results["log"]["scatter.r95_m"], float)
    assert any(isinstance(value, float) for name, value in results["live"].items() if name.startswith("timing."))
