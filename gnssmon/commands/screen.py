"""What the commands with a screen share: its options, the terminal that it needs, and running it."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Sequence
from contextlib import suppress
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import click

from gnssmon import errors
from gnssmon.clocks import Clock
from gnssmon.errors import ConfigurationError, SourceError
from gnssmon.monitor import Settings
from gnssmon.printable import printable
from gnssmon.sources.source import Source

if TYPE_CHECKING:
    from gnssmon.recording.recorder import Recorder
    from gnssmon.replay.index import Index

THIN_PACE_S = 3.0
"""Between two pictures on a slow line."""


def screen_options(command: Callable[..., Any]) -> Callable[..., Any]:
    """Add ``--plain`` and ``--thin`` to a command."""
    options = (
        click.option("--plain", is_flag=True, help="Draw with ASCII characters only."),
        click.option("--thin", is_flag=True, help="For a slow line: no colours, a picture every three seconds."),
    )
    for option in reversed(options):
        command = option(command)
    return command


def need_terminal() -> None:
    """Raise ConfigurationError where no dashboard can be drawn."""
    dumb = os.environ.get("TERM", "") in ("", "dumb") and os.name != "nt"
    # The screen library writes to standard error.
    if dumb or not all(stream.isatty() for stream in (sys.stdin, sys.stdout, sys.stderr)):
        why = "TERM is 'dumb'" if dumb else "this is not one, or its input or output goes elsewhere"
        raise ConfigurationError(f"the dashboard needs a terminal, and {why}; 'gnssmon check SOURCE' needs none")


def show(
    sources: Sequence[Source],
    settings: Settings,
    clock: Clock,
    *,
    recorders: Sequence[Recorder] = (),
    index: Callable[[], Index] | None = None,
    plain: bool = False,
    thin: bool = False,
) -> int:
    """Run the dashboard over the sources until the user leaves; returns the exit code. Raises what a session raised."""
    if thin:
        os.environ["NO_COLOR"] = "1"  # Read once by the screen library when it is imported.
    from gnssmon.dashboard.app import Dashboard
    from gnssmon.dashboard.feed import PACE_S, Feed

    feeds = tuple(
        Feed(
            source,
            replace(settings, site=replace(settings.site, baud=source.baud)),
            clock,
            recorder=recorders[i] if recorders else None,
            index=index,
            pace_s=THIN_PACE_S if thin else PACE_S,
        )
        for i, source in enumerate(sources)
    )
    app = Dashboard(feeds, plain=plain or not _knows_braille())
    app.run(mouse=False)
    with suppress(OSError):  # a terminal that has hung up is told nothing
        for recorder in recorders:
            click.echo(f"{recorder.bytes} bytes kept in '{printable(str(recorder.folder))}'", err=True)
    for feed in feeds:
        if feed.failure is not None:
            raise feed.failure
        if feed.problem:
            raise SourceError(feed.problem)
    return app.return_code or errors.ACCEPTED


def _knows_braille() -> bool:
    encoding = (sys.stdout.encoding or "").lower().replace("-", "")
    return encoding == "utf8" and os.environ.get("TERM") not in ("linux", "vt100", "vt220")
