"""Feed: runs a session in a thread and hands its newest snapshot to the screen.

The snapshot is taken in the monitor's own thread, at most twice a second and never for more than a fifth of its time.
One that was not yet drawn is replaced by the newer one: a slow screen misses pictures, never data.
"""

from __future__ import annotations

import math
import threading
from collections.abc import Callable
from contextlib import suppress
from dataclasses import dataclass, replace

from gnssmon import session
from gnssmon.chunks import Chunk
from gnssmon.clocks import Clock
from gnssmon.errors import GnssmonError
from gnssmon.monitor import Monitor, Settings
from gnssmon.recording.recorder import Recorder
from gnssmon.replay.index import Index
from gnssmon.replay.player import Player
from gnssmon.snapshot import Snapshot, SourceFacts
from gnssmon.sources.source import Source
from gnssmon.statistics.subject import Span

PACE_S = 0.5
"""Least time between two snapshots."""

MOST_EVENTS = 5000
"""Instants kept to jump to."""

NEAR_MS = 3000
"""An event that was just jumped to must not hold the way back."""

LOOK_S = 0.1
"""How often the end of a log looks for a wish."""

LARGEST_SHARE = 0.2
"""Of the monitor's time that may go into snapshots."""


@dataclass(frozen=True, slots=True)
class Window:
    """A window of time that a key chooses."""

    words: str
    length_s: float | None = None
    """Back from now; None: since start, or since the mark."""
    marked: bool = False


WINDOWS = (
    Window("since start"),
    Window("last hour", 3600.0),
    Window("last 10 min", 600.0),
    Window("last minute", 60.0),
    Window("since mark", marked=True),
)


class Feed:
    """One source under way. Its methods may be called from any thread; ``post`` is called from its own."""

    def __init__(
        self,
        source: Source,
        settings: Settings,
        clock: Clock,
        *,
        recorder: Recorder | None = None,
        pace_s: float = PACE_S,
        index: Callable[[], Index] | None = None,
    ) -> None:
        self.source = source
        self.player = source if isinstance(source, Player) else None
        self.settings = settings
        self.clock = clock
        self.recorder = recorder
        self.pace_s = pace_s
        self._build_index = index
        self._index: Index | None = None
        self._events_ms: set[int] = set()
        """UTC of what was met in a log, before and behind where it stands now."""
        self._went_to_ms = 0
        self.window = WINDOWS[0]
        self.mark_ms: int | None = None
        self.problem = ""
        """Why the source ended early; untrusted."""
        self.failure: BaseException | None = None
        """A fault of our own that ended the session."""
        self._facts = SourceFacts(
            label=source.label, kind=source.kind, size=source.size, simulated=source.kind == "simulated"
        )
        self._monitor = Monitor(settings, self._facts)
        self._stop = threading.Event()
        self._thread: threading.Thread | None = None
        self._post: Callable[[Snapshot], None] = lambda _: None
        self._due_s = 0.0
        self._changed = True
        self._finished = False
        self._ended = False
        """A log is at its end, and may be played again from an earlier place."""
        self._again = threading.Event()
        """Someone wants to go back; set before the player is told, so that a log that ends just then goes back too."""
        self._shown: object = None
        self._acknowledge = False

    # For the screen

    def start(self, post: Callable[[Snapshot], None]) -> None:
        """Run the session; ``post`` gets each snapshot, in the session's thread."""
        self._post = post
        self._thread = threading.Thread(target=self._run, name="gnssmon session", daemon=True)
        self._thread.start()
        if self._build_index is not None:
            threading.Thread(target=self._look_through, name="gnssmon index", daemon=True).start()

    def stop(self) -> None:
        """End the session and wait for it: what was received is with the recorder."""
        self._stop.set()
        self.source.close()
        if self._thread is not None:
            self._thread.join()

    @property
    def running(self) -> bool:
        """Whether the session is under way."""
        return self._thread is not None and self._thread.is_alive()

    def choose(self, window: Window) -> None:
        """Look at another window of time."""
        self.window = window
        self.refresh()

    def mark(self) -> None:
        """Set the mark to now, and look at what follows."""
        self.mark_ms = self._monitor.now_ms
        self.choose(WINDOWS[-1])

    def acknowledge(self) -> None:
        """Mark the open alarms as seen."""
        self._acknowledge = True
        self.refresh()

    def to_event(self, step: int) -> None:
        """Let a log go to the next (1) or last (-1) of the events that were met so far."""
        if self.player is None or (now_ms := self.player.axis_ms) is None:
            return
        # The player's axis of time and the monitor's need not begin together: they meet in UTC.
        there_ms = self.player.utc_offset_ms or 0
        known = [at - there_ms for at in self._events_ms]
        if step > 0:
            # Events inside a gap all show the epoch before it: the one gone to last is behind us.
            ahead = [at for at in known if at > max(now_ms, self._went_to_ms)]
        else:
            ahead = [at for at in known if at < now_ms - NEAR_MS]
        if ahead:
            self.jump(min(ahead) if step > 0 else max(ahead))
            self._went_to_ms = min(ahead) if step > 0 else 0

    def jump(self, axis_ms: int) -> None:
        """Let a log go to an instant; from its end, back."""
        player = self.player
        if player is None or player.axis_ms is None or (self._ended and axis_ms >= player.axis_ms):
            return
        if axis_ms < player.axis_ms and math.isinf(player.rate):
            player.pause()  # at full speed the end would be there again at once
        if axis_ms < player.axis_ms:
            self._again.set()
        player.jump(axis_ms)

    def step(self, epochs: int) -> None:
        """Let a log go some epochs on or back, and pause."""
        player = self.player
        if player is None or (self._ended and epochs >= 0):
            return
        if epochs < 0:
            self._again.set()
        player.step(epochs)

    def refresh(self) -> None:
        """Take a snapshot at the next look."""
        self._changed, self._due_s = True, 0.0
        if not self.running and self._thread is not None:
            self._show()

    def _look_through(self) -> None:
        if self._build_index is not None:
            with suppress(GnssmonError, OSError):
                self._index = self._build_index()

    # In the session's thread

    def _run(self) -> None:
        watchers = () if self.recorder is None else (self.recorder,)
        try:
            while not self._stop.is_set():
                outcome = session.run(self.source, self, watchers, self.clock, stop=self._stop, look=self._look)
                self.problem = outcome.problem
                if self.player is None or self._stop.is_set():
                    break
                if self.player.rewound:
                    self._again.clear()
                else:
                    self._show()
                    self._wait_for_jump(self.player)
                self._monitor, self._finished = Monitor(self.settings, self._facts), False
        except BaseException as error:
            self.failure = error
            self.problem = f"{type(error).__name__}: {error}"
        finally:
            if self.recorder is not None:
                self.recorder.close()
        if not self._stop.is_set():
            self._show()

    def _wait_for_jump(self, player: Player) -> None:
        """At the end of a log: stay, until someone leaves or jumps back."""
        self._ended = True
        while self._ended and not self._stop.is_set():
            if self._again.wait(LOOK_S):
                self._again.clear()
                self._ended = False
                player.rewound = True
            elif self._changed:
                self._changed = False
                self._show()

    def feed(self, chunk: Chunk) -> None:
        """As the session asks of a monitor."""
        self._changed = True
        self._monitor.feed(chunk)

    def finish(self) -> None:
        """As the session asks of a monitor."""
        self._monitor.finish()
        self._finished = True

    def _look(self) -> None:
        now_s = self.clock.steady()
        if now_s < self._due_s:
            return
        state = (self.source.state, self.player.paused, self.player.rate) if self.player else self.source.state
        if not self._changed and state == self._shown:
            return
        self._changed, self._shown = False, state
        self._show()
        after_s = self.clock.steady()
        self._due_s = max(now_s + self.pace_s, after_s + (after_s - now_s) * (1.0 / LARGEST_SHARE - 1.0))

    def _show(self) -> None:
        monitor = self._monitor
        if self._acknowledge:
            self._acknowledge = False
            monitor.acknowledge()
        source = self.source
        # The source has ended before its last epoch is closed: the numbers are final a little later.
        state = self.problem or ("reading" if source.state == "ended" and not self._finished else source.state)
        if self.recorder is not None and self.recorder.problem:
            state = f"RECORDING FAILED: {self.recorder.problem}"
        monitor.source = replace(self._facts, size=source.size, sha256=source.sha256, state=state)
        snapshot = monitor.snapshot(self._span(monitor.now_ms), window=self.window.words)
        if self.player is not None and len(self._events_ms) < MOST_EVENTS:
            here_ms = snapshot.utc_offset_ms or 0
            self._events_ms |= {event.raised_ms + here_ms for event in snapshot.alarms}
            self._events_ms |= {at_ms + here_ms for at_ms, _ in snapshot.pictures.stream.gaps}
        self._post(replace(snapshot, progress=self._progress()))

    def _span(self, now_ms: int | None) -> Span:
        if self.window.marked:
            return Span(from_ms=self.mark_ms)
        if self.window.length_s is None or now_ms is None:
            return Span()
        # Half-open: the epoch of now and those of the length before it.
        return Span(from_ms=now_ms + 1 - round(self.window.length_s * 1000.0))

    def _progress(self) -> dict[str, float]:
        progress: dict[str, float] = {}
        at_ms = None if self.player is None else self.player.axis_ms
        share = None if self._index is None or at_ms is None else self._index.share_at(at_ms)
        if share is not None:
            progress["share"] = share
        if self.recorder is not None:
            progress["recorded_bytes"] = float(self.recorder.bytes)
        if self.player is not None:
            progress["speed"] = self.player.rate
            progress["paused"] = float(self.player.paused)
        return progress
