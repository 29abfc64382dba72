"""The dashboard as it runs: keys, sizes, hostile bytes, a source that is lost."""

from __future__ import annotations

import asyncio
import math
from collections.abc import AsyncIterator, Callable
from contextlib import asynccontextmanager
from dataclasses import replace
from pathlib import Path

import pytest
from textual.pilot import Pilot

from gnssmon.clocks import SystemClock
from gnssmon.dashboard.app import Dashboard
from gnssmon.dashboard.canvas import Canvas, Slice
from gnssmon.dashboard.feed import Feed
from gnssmon.dashboard.views import VIEWS
from gnssmon.monitor import Settings
from gnssmon.replay.player import Player
from gnssmon.sources.log_file import LogFile
from tests.dashboard import snapshots

PATIENCE_S = 10.0


@asynccontextmanager
async def running(
    path: Path, data: bytes, size: tuple[int, int] = (80, 24), rate: float = math.inf, plain: bool = False
) -> AsyncIterator[tuple[Dashboard, Pilot[None]]]:
    """The dashboard over a log of these bytes."""
    log = path / "log.nmea"
    log.write_bytes(data)
    feed = Feed(Player(lambda: LogFile(log), SystemClock(), rate=rate), Settings(), SystemClock())
    app = Dashboard((feed,), plain=plain)
    async with app.run_test(size=size) as pilot:
        yield app, pilot
    assert not feed.running


def text(app: Dashboard) -> str:
    """What stands on the canvas."""
    return app.query_one(Canvas).text()


async def until(app: Dashboard, condition: Callable[[str], bool]) -> str:
    """The text on the canvas, once it fulfils a condition; fails after a while."""
    for _ in range(int(PATIENCE_S / 0.02)):
        if condition(text(app)):
            return text(app)
        await asyncio.sleep(0.02)
    raise AssertionError(f"waited in vain; on screen is\n{text(app)}")


@pytest.mark.parametrize("size", [(60, 20), (80, 24), (120, 40), (200, 60)])
async def test_every_view_by_its_key(tmp_path: Path, size: tuple[int, int]) -> None:
    """Each key shows its view, with the answer above it, at every size."""
    async with running(tmp_path, snapshots.stream(60), size) as (app, pilot):
        await until(app, lambda t: "ended" in t)
        seen = set()
        for view in VIEWS:
            await pilot.press(view.key)
            await pilot.pause()
            lines = text(app).splitlines()
            assert lines[0].startswith("differential, R95 ")
            assert max(map(len, lines)) <= size[0]
            seen.add("\n".join(lines[2:]))
        assert len(seen) == len(VIEWS)


async def test_resized_at_will(tmp_path: Path) -> None:
    """The picture follows the terminal's size, down to nothing that could hold it, and back."""
    async with running(tmp_path, snapshots.stream(30)) as (app, pilot):
        await until(app, lambda t: "ended" in t)
        for width, height in ((200, 60), (60, 20), (20, 5), (3, 2), (120, 40)):
            await pilot.resize_terminal(width, height)
            await pilot.pause()
            lines = text(app).splitlines()
            assert max(map(len, lines), default=0) <= width
            assert len(lines) <= height
        assert "differential" in text(app)


async def test_window_and_mark_keys(tmp_path: Path) -> None:
    """w goes through the windows; m sets the mark and shows what follows."""
    async with running(tmp_path, snapshots.stream(90)) as (app, pilot):
        await until(app, lambda t: "ended" in t)
        for words in ("last hour", "last 10 min", "last minute", "since start"):
            await pilot.press("w")
            await until(app, lambda t, w=words: w in t)  # type: ignore[misc]
        await pilot.press("m")
        await until(app, lambda t: "since mark" in t)
        await pilot.press("w")
        await until(app, lambda t: "since start" in t)


async def test_replay_keys(tmp_path: Path) -> None:
    """Space pauses, plus and minus change the speed, arrows jump, the comma steps back."""
    async with running(tmp_path, snapshots.stream(600), rate=10.0) as (app, pilot):
        await until(app, lambda t: "×10" in t)
        await pilot.press("plus")
        await until(app, lambda t: "×30" in t)
        await pilot.press("minus")
        await until(app, lambda t: "×10" in t)
        await pilot.press("space")
        await until(app, lambda t: "PAUSED" in t)
        player = app._feed.player
        assert player is not None
        at_ms = player.axis_ms
        assert at_ms is not None
        await pilot.press("shift+right")
        await until(app, lambda _: player.axis_ms == at_ms + 60_000)
        await pilot.press("comma")
        await until(app, lambda _: player.axis_ms == at_ms + 59_000)
        await pilot.press("full_stop")
        await until(app, lambda _: player.axis_ms == at_ms + 60_000)
        await pilot.press("g")
        await pilot.press(*"10:00:05", "enter")
        await until(app, lambda t: "10:00:05" in t)


async def test_freeze_holds_the_picture(tmp_path: Path) -> None:
    """f holds the picture while the log goes on, and says so."""
    async with running(tmp_path, snapshots.stream(300), rate=60.0) as (app, pilot):
        await until(app, lambda t: "differential" in t)
        await pilot.press("f")
        held = await until(app, lambda t: "FROZEN" in t)
        player = app._feed.player
        assert player is not None
        at_ms = player.axis_ms or 0
        await until(app, lambda _: (player.axis_ms or 0) > at_ms + 60_000)
        assert text(app) == held
        await pilot.press("f")
        await until(app, lambda t: "FROZEN" not in t and t != held)


async def test_sentences_are_picked_and_filtered(tmp_path: Path) -> None:
    """Up picks an older sentence; t shows one kind only."""
    async with running(tmp_path, snapshots.stream(20)) as (app, pilot):
        await until(app, lambda t: "ended" in t)
        await pilot.press("8")
        await until(app, lambda t: "> GPGSV,3,3" in t)
        await pilot.press("up")
        await until(app, lambda t: "> GPGSV,3,2" in t)
        await pilot.press("t")
        shown = await until(app, lambda t: "> GNGGA" in t)
        assert "GPGSV" not in shown


async def test_help_says_keys_and_meaning(tmp_path: Path) -> None:
    """? lays a page over the view, escape takes it away."""
    async with running(tmp_path, snapshots.stream(5)) as (app, pilot):
        await pilot.press("4", "question_mark")
        await pilot.pause()
        assert type(app.screen).__name__ == "HelpPage"
        await pilot.press("escape")
        await pilot.pause()
        assert type(app.screen).__name__ != "HelpPage"


async def test_nothing_of_a_hostile_stream_is_obeyed(tmp_path: Path) -> None:
    """Escape sequences and markup reach no cell of the screen; all views are drawn, in ASCII where asked for."""
    data = b"".join(
        snapshots.stream(1, start_s=40_000 + t) + snapshots.ESCAPES + snapshots.sentence("GPTXT,01,01,02,[red]\x1b[2J")
        for t in range(30)
    )
    async with running(tmp_path, data, plain=True) as (app, pilot):
        await until(app, lambda t: "ended" in t)
        for view in VIEWS:
            await pilot.press(view.key)
            await pilot.pause()
            for part in app.query(Slice):
                for y in range(app.size.height - 1):
                    strip = part.render_line(y)
                    assert strip.text.isprintable()
                    assert strip.text.isascii()


async def test_other_themes_and_the_palette(tmp_path: Path) -> None:
    """A theme of the screen library may be chosen while running; the palette opens and closes."""
    async with running(tmp_path, snapshots.stream(20)) as (app, pilot):
        shown = await until(app, lambda t: "ended" in t)
        for theme in ("textual-light", "textual-dark", "ansi-light", "ansi-dark"):
            app.theme = theme
            await pilot.pause()
            assert text(app) == shown
        await pilot.press("ctrl+p")
        await pilot.pause()
        assert type(app.screen).__name__ == "CommandPalette"
        await pilot.press("escape")


async def test_events_are_jumped_to(tmp_path: Path) -> None:
    """Brackets go to the gap before and the one after."""
    data = snapshots.stream(60) + snapshots.stream(60, start_s=36_100) + snapshots.stream(60, start_s=36_200)
    async with running(tmp_path, data) as (app, pilot):
        await until(app, lambda t: "ended" in t)
        player = app._feed.player
        assert player is not None
        at_ms = [player.axis_ms or 0]
        while at_ms[-1] > 36_059_000:  # the last epoch before the first gap
            await pilot.press("left_square_bracket")
            await until(app, lambda _: (player.axis_ms or at_ms[-1]) < at_ms[-1] and not player.rewound)
            await until(app, lambda t: "PAUSED" in t)
            at_ms.append(player.axis_ms or 0)
        assert at_ms[-1] == 36_059_000
        assert 36_159_000 in at_ms  # the one before the second
        while at_ms[-1] < 36_159_000:
            await pilot.press("right_square_bracket")
            await pilot.pause(0.1)
            at_ms.append(player.axis_ms or 0)
            assert at_ms[-1] >= at_ms[-2]


async def test_no_data_is_said_in_words(tmp_path: Path) -> None:
    """An empty log gives words, not an empty screen."""
    async with running(tmp_path, b"") as (app, _):
        await until(app, lambda t: "no data yet" in t and "no sentences yet" in t)


async def test_acknowledged_alarms_are_seen(tmp_path: Path) -> None:
    """a marks open alarms as seen; the answer line says so."""
    quiet = snapshots.stream(60).replace(b",2,12,0.7,", b",2,12,9.7,")  # HDOP 9.7, checksums wrong on purpose
    lines = [line.split(b"*")[0].lstrip(b"$").decode() for line in quiet.split(b"\r\n") if line]
    async with running(tmp_path, b"".join(snapshots.sentence(line) for line in lines)) as (app, pilot):
        await until(app, lambda t: "ended" in t and "! 1 alarm" in t)
        await pilot.press("a")
        await until(app, lambda t: "alarm, seen" in t)


def test_replaced_fields_are_still_frozen() -> None:
    """A snapshot is a value: replacing a field gives another one and leaves the first."""
    first = snapshots.full()
    assert replace(first, window="x").window == "x"
    assert first.window == "since start"
