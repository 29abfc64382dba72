"""A session: a source, its keepers, and a monitor, run together. The only place with threads.

    reader thread            keeper thread (where there are watchers)     the caller's thread
    source.chunks()  →  Line  →  watchers (the recorder first)  →  Line  →  monitor.feed, then ``look``

The reader does nothing but read: neither a slow disk nor a slow screen can hold it up. Each chunk is with the
watchers before it is with the monitor: bytes are on disk before anyone interprets them.

Of a log, each line holds a few blocks and then makes the reader wait. Of a live source, a line never makes the
reader wait before ``LIVE_BYTES`` are waiting, because what is not read is lost in the kernel; what piles up is joined
to fewer, larger chunks, which still know when each part came.
"""

from __future__ import annotations

import signal
import threading
from collections import deque
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Literal, Protocol

from gnssmon.chunks import Chunk, joined
from gnssmon.clocks import Clock
from gnssmon.errors import GnssmonError, SourceError
from gnssmon.replay.between import Between
from gnssmon.sources.source import SILENCE_S, Source

LOG_CHUNKS = 2
"""Blocks of a log read ahead: one to be ready, one being made. More only costs memory."""

LIVE_BYTES = 64 * 1024 * 1024
"""Most that waits of a live source: twelve minutes at 921 600 baud. Who is that far behind has stopped."""

LIVE_CHUNKS = 1000
"""Waiting chunks of a live source beyond which the next ones are joined (1.5 MB at 115 200 baud)."""

JOINED_BYTES = 65536
"""A joined chunk is not made larger than this."""

FEED_S = 0.05
"""A live monitor is fed at most this often, with all that came meanwhile: a line at 115 200 baud brings a hundred
chunks a second, and the work per feed is a millisecond whatever it brings."""

DEAF_S = 2.5
"""A live reader that has given nothing for so long, not even silence, hangs in the operating system (a name being
looked up, a driver): the session tells the monitor of the silence in its place."""

LETTING_GO_S = 1.0
"""A reader that does not end so soon after its source was closed hangs in the operating system, or searches a rate:
nobody waits for it, and it ends with the program."""

PATIENCE_S = 0.25
"""How often a waiting thread looks whether it should stop."""


class MonitorFace(Protocol):
    """What a session asks of a monitor."""

    def feed(self, chunk: Chunk) -> None: ...
    def finish(self) -> None: ...


Watcher = Callable[[Chunk], None]
"""Takes each chunk before the monitor does, in the keeper thread: a recorder."""

Look = Callable[[], None]
"""Called in the monitor's own thread after each feed and some four times a second when there is nothing to feed;
takes a snapshot when it is time for one."""


@dataclass(frozen=True, slots=True)
class Outcome:
    """How a session ended."""

    ended: Literal["end", "stopped", "elapsed", "early"]
    """``end``: the source's natural end. ``stopped``: someone set ``stop``. ``elapsed``: the time asked for is over.
    ``early``: the source was lost, cut off, or ended before the time asked for."""
    problem: str = ""
    """One line for people when the source ended early; untrusted."""


class Line:
    """Chunks on their way from one thread to the next: bounded, in order, none dropped."""

    def __init__(self, *, live: bool) -> None:
        self._live = live
        self._waiting: deque[Chunk] = deque()
        self._bytes = 0
        self._ended = False
        self._abandoned = False
        self._changed = threading.Condition()

    def put(self, chunk: Chunk) -> bool:
        """Hand a chunk on; waits while the line is full. False: nobody will take it any more."""
        with self._changed:
            while self._full() and not self._abandoned:
                self._changed.wait(PATIENCE_S)
            if self._abandoned:
                return False
            last = self._waiting[-1] if self._waiting else None
            if last is not None and len(self._waiting) >= LIVE_CHUNKS and _may_join(last, chunk):
                self._waiting[-1] = joined((last, chunk))
            else:
                self._waiting.append(chunk)
            self._bytes += len(chunk.data)
            self._changed.notify_all()
            return True

    def take(self, wait_s: float = PATIENCE_S) -> Chunk | None:
        """What waits: of a log the next block, of a live source all that came meanwhile, joined.

        None when nothing came within ``wait_s`` or nothing more will come.
        """
        with self._changed:
            if not self._waiting and not self._ended:
                self._changed.wait(wait_s)
            if not self._waiting:
                return None
            chunks = [self._waiting.popleft()]
            size = len(chunks[0].data)
            while self._live and self._waiting and _may_join(chunks[0], self._waiting[0], size):
                chunks.append(self._waiting.popleft())
                size += len(chunks[-1].data)
            self._bytes -= size
            self._changed.notify_all()
        return joined(chunks)

    def end(self) -> None:
        """No further chunk will be put."""
        with self._changed:
            self._ended = True
            self._changed.notify_all()

    def abandon(self) -> None:
        """Nobody takes from here any more."""
        with self._changed:
            self._abandoned = True
            self._changed.notify_all()

    @property
    def drained(self) -> bool:
        """Everything was taken and nothing will follow."""
        with self._changed:
            return self._ended and not self._waiting

    def _full(self) -> bool:
        if self._live:
            return self._bytes >= LIVE_BYTES
        return len(self._waiting) >= LOG_CHUNKS


def _may_join(first: Chunk, second: Chunk, size: int | None = None) -> bool:
    """Bytes are joined with bytes and silence with silence: an empty chunk means something by itself."""
    size = len(first.data) if size is None else size
    return bool(first.data) == bool(second.data) and size + len(second.data) <= JOINED_BYTES


def run(
    source: Source,
    monitor: MonitorFace,
    watchers: Sequence[Watcher],
    clock: Clock,
    *,
    stop: threading.Event,
    for_s: float | None = None,
    look: Look | None = None,
) -> Outcome:
    """Feed the source's bytes to the watchers and the monitor until it ends, ``stop`` is set, or ``for_s`` is over.

    ``for_s`` is the host's time for a live source, and the stream's own (exact to the epoch) for any other. Closes
    the source, and finishes the monitor, in every case. What a watcher or the monitor raises is raised here; what
    the source raises (SourceError) is told in the outcome, behind everything that it gave before.
    """
    if for_s is not None:
        source = Between(source, for_s=for_s)
    threads = _Threads(source, watchers)
    started_s = heard_s = clock.steady()
    ended: Literal["end", "stopped", "elapsed"] = "end"
    try:
        while True:
            chunk = threads.last.take()
            if chunk is None and threads.last.drained:
                break
            if chunk is not None:
                heard_s = clock.steady()
            elif source.kind == "live" and clock.steady() - heard_s >= DEAF_S:
                heard_s += SILENCE_S
                chunk = Chunk(b"", clock.now())
            if chunk is not None:
                monitor.feed(chunk)
            if look is not None:
                look()
            if stop.is_set() or (source.kind == "live" and stop.wait(FEED_S)):
                ended = "stopped"
                break
            if source.kind == "live" and for_s is not None and clock.steady() - started_s >= for_s:
                ended = "elapsed"
                break
    finally:
        threads.end()
        monitor.finish()
    threads.reraise()
    if ended != "end":
        return Outcome(ended)
    if threads.lost is not None:
        if not isinstance(threads.lost, SourceError):
            raise threads.lost
        return Outcome("early", str(threads.lost))
    if for_s is not None and source.kind == "live":
        over_s = clock.steady() - started_s
        return Outcome("early", f"'{source.label}' ended after {over_s:.0f} s of the {for_s:.0f} s asked for")
    return Outcome("end")


class _Threads:
    """The reader, the keeper, and the lines between them and the caller."""

    def __init__(self, source: Source, watchers: Sequence[Watcher]) -> None:
        self._source = source
        self._watchers = watchers
        self.lost: GnssmonError | None = None
        """What the source raised."""
        self._broken: BaseException | None = None
        first = Line(live=source.kind == "live")
        self._lines = [first]
        self._running = [threading.Thread(target=self._read, name="gnssmon reader", daemon=True)]
        if watchers:
            self._lines.append(Line(live=source.kind == "live"))
            self._running.append(threading.Thread(target=self._keep, name="gnssmon keeper", daemon=True))
        self.last = self._lines[-1]
        """The line that the caller takes from."""
        for thread in self._running:
            thread.start()

    def _read(self) -> None:
        try:
            for chunk in self._source.chunks():
                if not self._lines[0].put(chunk):
                    break
        except GnssmonError as error:
            self.lost = error
        except BaseException as error:
            self._broken = error
        finally:
            self._lines[0].end()

    def _keep(self) -> None:
        first, last = self._lines
        try:
            while (chunk := first.take()) is not None or not first.drained:
                if chunk is not None:
                    for watcher in self._watchers:
                        watcher(chunk)
                    last.put(chunk)
        except BaseException as error:
            self._broken = error
            first.abandon()
        finally:
            last.end()

    def end(self) -> None:
        """Stop reading; what was read reaches the watchers, so that the recording holds it."""
        self._source.close()
        self.last.abandon()
        if len(self._lines) == 1:
            self._lines[0].abandon()
        reader, *keepers = self._running
        reader.join(LETTING_GO_S)
        self._lines[0].end()
        for keeper in keepers:
            keeper.join()

    def reraise(self) -> None:
        """Raise what went wrong in a thread of ours, a fault of the program."""
        if self._broken is not None:
            raise self._broken


@contextmanager
def stop_on_signals(*more: signal.Signals) -> Iterator[threading.Event]:
    """An event that SIGINT and SIGTERM (and ``more``) set; a second one of them ends the program the usual way.

    Only in the main thread. The former handlers are put back at the end.
    """
    stop = threading.Event()
    former = {}

    def note(number: int, _frame: object) -> None:
        stop.set()
        signal.signal(number, signal.default_int_handler if number == signal.SIGINT else signal.SIG_DFL)

    for name in (signal.SIGINT, signal.SIGTERM, *more):
        former[name] = signal.signal(name, note)
    try:
        yield stop
    finally:
        for name, handler in former.items():
            signal.signal(name, handler)
