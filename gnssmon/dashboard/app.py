"""The dashboard: keys, palette and views over the newest snapshot; what is drawn is the panels' work."""

from __future__ import annotations

import math
import os
from collections.abc import Iterable
from typing import ClassVar

from textual.app import App, ComposeResult, SystemCommand
from textual.binding import Binding, BindingType
from textual.message import Message
from textual.screen import Screen
from textual.widgets import Footer

from gnssmon.dashboard import terminal
from gnssmon.dashboard.canvas import Canvas
from gnssmon.dashboard.drawing import Size
from gnssmon.dashboard.feed import WINDOWS, Feed
from gnssmon.dashboard.pages import HelpPage, Question
from gnssmon.dashboard.views import VIEWS, compose
from gnssmon.errors import ConfigurationError
from gnssmon.snapshot import Snapshot
from gnssmon.utc import parse_instant

SPEEDS = (0.1, 0.5, 1.0, 2.0, 5.0, 10.0, 30.0, 60.0, 300.0, math.inf)

AGE_S = 1.0
"""How often the age of a live source's fix is told anew."""

SMALL_JUMP_S = 10.0


class Newer(Message):
    """A newer snapshot waits."""

    bubble = False


class Dashboard(App[None]):
    """Shows one feed at a time."""

    TITLE = "gnssmon"
    CSS_PATH = "theme.tcss"
    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("question_mark", "help", "Help", key_display="?"),
        Binding("q", "quit", "Quit"),
        *(Binding(view.key, f"view('{view.name}')", view.title) for view in VIEWS),
        Binding("w", "window", "Window", show=False),
        Binding("m", "mark", "Mark", show=False),
        Binding("space", "pause", "Pause", show=False),
        Binding("plus,equals_sign", "speed(1)", "Faster", show=False),
        Binding("minus", "speed(-1)", "Slower", show=False),
        Binding("left", "jump(-1)", "Back 10 s", show=False),
        Binding("right", "jump(1)", "On 10 s", show=False),
        Binding("shift+left", "jump(-6)", "Back 1 min", show=False),
        Binding("shift+right", "jump(6)", "On 1 min", show=False),
        Binding("full_stop", "step(1)", "Next epoch", show=False),
        Binding("comma", "step(-1)", "Epoch before", show=False),
        Binding("left_square_bracket", "event(-1)", "Event before", show=False),
        Binding("right_square_bracket", "event(1)", "Next event", show=False),
        Binding("g", "go_to", "Go to time", show=False),
        Binding("f", "freeze", "Freeze", show=False),
        Binding("a", "acknowledge", "Seen", show=False),
        Binding("up", "row(1)", "Older", show=False),
        Binding("down", "row(-1)", "Newer", show=False),
        Binding("t", "choice", "Kind", show=False),
        Binding("n", "next_source", "Next source", show=False),
    ]

    def __init__(self, feeds: tuple[Feed, ...], *, plain: bool = False) -> None:
        # Without colours, the library would turn the palette's names into grey values, black among them.
        super().__init__(
            driver_class=terminal.driver(self.put_away), ansi_color=True if "NO_COLOR" in os.environ else None
        )
        self._feeds = feeds
        self._feed = feeds[0]
        self._newest: dict[int, Snapshot] = {}
        self._told = False
        self._view = VIEWS[0]
        self._frozen: Snapshot | None = None
        self._plain = plain
        self._row, self._choice = 0, ""
        self._canvas = Canvas()
        self._painted_s = 0.0

    def compose(self) -> ComposeResult:
        yield self._canvas
        yield Footer(compact=True, show_command_palette=False)

    def on_mount(self) -> None:
        self.theme = "ansi-dark"
        for feed in self._feeds:
            feed.start(lambda snapshot, feed=feed: self._take(feed, snapshot))  # type: ignore[misc]
        self.set_interval(AGE_S, self._grow_older)
        self._paint()

    def on_unmount(self) -> None:
        self.put_away()

    def put_away(self) -> None:
        """End the sessions: what was received is with the recorders, and those are closed."""
        for feed in self._feeds:
            feed.stop()

    # From the feeds

    def _take(self, feed: Feed, snapshot: Snapshot) -> None:
        """In the session's thread: keep the newest, and tell the screen once."""
        self._newest[id(feed)] = snapshot
        if not self._told:
            self._told = True
            self.post_message(Newer())

    def on_newer(self) -> None:
        self._told = False
        if self._frozen is None:
            self._paint()

    def _grow_older(self) -> None:
        quiet_s = self._feed.clock.steady() - self._painted_s
        if self._frozen is None and self._feed.source.kind == "live" and quiet_s >= max(AGE_S, self._feed.pace_s):
            self._paint()

    def on_canvas_resized(self) -> None:
        self._paint()

    def snapshot(self) -> Snapshot | None:
        """What is on the screen."""
        return self._frozen or self._newest.get(id(self._feed))

    def _paint(self) -> None:
        width, height = self._canvas.size
        self._painted_s = self._feed.clock.steady()
        if width and height:
            size = Size(width, height, self._plain, self._row, self._choice)
            note = "FROZEN" if self._frozen is not None else ""
            self._canvas.show(compose(self.snapshot(), self._view, size, now_s=self._feed.clock.now(), note=note))

    # Keys

    def action_view(self, name: str) -> None:
        """Show another view."""
        self._view = next(view for view in VIEWS if view.name == name)
        self._row, self._choice = 0, ""
        self._paint()

    def action_window(self) -> None:
        """Look at the next window of time."""
        usable = [window for window in WINDOWS if not window.marked or self._feed.mark_ms is not None]
        at = usable.index(self._feed.window) if self._feed.window in usable else -1
        self._feed.choose(usable[(at + 1) % len(usable)])

    def action_mark(self) -> None:
        """Set the mark to now."""
        self._feed.mark()

    def action_pause(self) -> None:
        """Let a log stand still, or run on; freeze a live screen."""
        player = self._feed.player
        if player is None:
            self.action_freeze()
        elif player.paused:
            player.resume()
        else:
            player.pause()

    def action_speed(self, step: int) -> None:
        """Play a log faster or slower."""
        player = self._feed.player
        if player is not None:
            faster = [speed for speed in SPEEDS if speed > player.rate]
            slower = [speed for speed in SPEEDS if speed < player.rate]
            if step > 0 and faster:
                player.set_rate(faster[0])
            elif step < 0 and slower:
                player.set_rate(slower[-1])

    def action_jump(self, steps: int) -> None:
        """Go on or back in a log by steps of ten seconds."""
        player = self._feed.player
        if player is not None and player.axis_ms is not None:
            self._feed.jump(player.axis_ms + round(steps * SMALL_JUMP_S * 1000.0))

    def action_step(self, epochs: int) -> None:
        """Go one epoch on or back in a log, and pause."""
        self._feed.step(epochs)

    def action_event(self, step: int) -> None:
        """Go to the next or last event met in a log."""
        self._feed.to_event(step)

    def action_go_to(self) -> None:
        """Ask for a time and go there."""
        if self._feed.player is not None:
            self.push_screen(Question("Go to which UTC? 05:30:00, or with a date 2025-05-20T05:30Z"), self._go_to)

    def _go_to(self, text: str | None) -> None:
        player = self._feed.player
        if not text or player is None or player.axis_ms is None:
            return
        try:
            at_ms = parse_instant(text).on_axis(player.axis_ms, player.utc_offset_ms)
        except ConfigurationError as error:
            self.notify(str(error), severity="warning", markup=False)
            return
        if at_ms is not None:
            self._feed.jump(at_ms)

    def action_freeze(self) -> None:
        """Hold the picture; what comes is still received, recorded and counted."""
        self._frozen = None if self._frozen is not None else self.snapshot()
        self._paint()

    def action_acknowledge(self) -> None:
        """Mark the open alarms as seen."""
        self._feed.acknowledge()

    def action_row(self, step: int) -> None:
        """Look at an older or newer row of a list."""
        self._row = max(0, self._row + step)
        self._paint()

    def action_choice(self) -> None:
        """Look at the next of what the view can show alone (a signal, a kind of sentence), or at all."""
        snapshot = self.snapshot()
        kinds = ["", *self._view.choices(snapshot)] if snapshot is not None else [""]
        at = kinds.index(self._choice) if self._choice in kinds else 0
        self._choice, self._row = kinds[(at + 1) % len(kinds)], 0
        self._paint()

    def action_next_source(self) -> None:
        """Show the next of several sources."""
        self._feed = self._feeds[(self._feeds.index(self._feed) + 1) % len(self._feeds)]
        self._frozen = None
        self._paint()

    def action_help(self) -> None:
        """Say what this view shows and which keys there are."""
        self.push_screen(HelpPage(self._view))

    def get_system_commands(self, screen: Screen[object]) -> Iterable[SystemCommand]:
        """Views and windows in the command palette."""
        yield from super().get_system_commands(screen)
        for view in VIEWS:
            yield SystemCommand(f"View: {view.title}", f"key {view.key}", lambda v=view: self.action_view(v.name))
        for window in WINDOWS:
            if not window.marked:
                yield SystemCommand(
                    f"Window: {window.words}",
                    "window of time",
                    lambda w=window: self._feed.choose(w),
                )
