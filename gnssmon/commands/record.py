"""gnssmon record: headless recording of the received bytes."""

from __future__ import annotations

import signal
import sys
from collections.abc import Callable
from pathlib import Path

import click

from gnssmon import session, utc
from gnssmon.chunks import Chunk
from gnssmon.clocks import SystemClock
from gnssmon.errors import RecordingError, SourceError
from gnssmon.printable import printable
from gnssmon.recording.recorder import HOUR_S, ROTATE_BYTES, Recorder
from gnssmon.sources import hold_source

SHOWN_S = 1.0
"""Between two lines of progress."""


@click.command(epilog="Example: gnssmon record /dev/ttyUSB0 --to 2025-05-20_roof --for 24h --compress")
@click.argument("source")
@click.option(
    "--to",
    "folder",
    required=True,
    type=click.Path(file_okay=False, path_type=Path),
    metavar="DIR",
    help="Folder of the recording; a later recording goes on behind an earlier one.",
)
@click.option("--for", "for_", metavar="DURATION", help="Stop after so long: 90s, 30m, 24h. Without: until stopped.")
@click.option(
    "--rotate-mb",
    type=click.FloatRange(min=0.001),
    default=ROTATE_BYTES / 1048576,
    show_default=True,
    metavar="MB",
    help="Begin a new file after so many megabytes.",
)
@click.option(
    "--rotate-every",
    default="1h",
    show_default=True,
    metavar="DURATION",
    help="Begin a new file when so much UTC is over: 1h is each full hour.",
)
@click.option("--compress", is_flag=True, help="Compress files that are closed.")
def command(source: str, folder: Path, for_: str | None, rotate_mb: float, rotate_every: str, compress: bool) -> int:
    """Keep the bytes of SOURCE unaltered, with their times of arrival, until Ctrl-C (or SIGTERM, SIGHUP).

    The folder holds .nmea files, a table of arrival times beside each, and a manifest with SHA-256. A device that is
    unplugged is waited for. Killing the program, or the power, loses nothing older than a second.
    """
    for_s = None if for_ is None else utc.parse_duration_s(for_)
    rotate_s = utc.parse_duration_s(rotate_every) or HOUR_S
    clock = SystemClock()
    more = (signal.SIGHUP,) if hasattr(signal, "SIGHUP") else ()
    opened = hold_source(source, clock=clock)
    try:
        recorder = Recorder(
            folder, clock, source=source, rotate_bytes=round(rotate_mb * 1048576), rotate_s=rotate_s, compress=compress
        )
    except RecordingError:
        opened.close()
        raise
    progress = _Progress(clock, recorder, lambda: opened.state)
    try:
        with session.stop_on_signals(*more) as stop:

            def look() -> None:
                progress.show()
                if recorder.problem:
                    stop.set()

            outcome = session.run(opened, _Nobody(), [recorder], clock, stop=stop, for_s=for_s, look=look)
    finally:
        recorder.close()
        progress.end()
    click.echo(f"{recorder.bytes} bytes kept in '{printable(str(folder))}'", err=True)
    if recorder.problem:
        raise RecordingError(recorder.problem)
    if outcome.ended == "early":
        raise SourceError(outcome.problem)
    return 0


class _Nobody:
    """Judges nothing: a recording needs no monitor."""

    def feed(self, chunk: Chunk) -> None:
        """Let it go."""

    def finish(self) -> None:
        """Nothing to finish."""


class _Progress:
    """One line on a terminal's stderr, rewritten; nothing elsewhere."""

    def __init__(self, clock: SystemClock, recorder: Recorder, state: Callable[[], str]) -> None:
        self._clock, self._recorder, self._state = clock, recorder, state
        self._shown_s = -SHOWN_S
        self._width = 0
        self._on = sys.stderr.isatty()

    def show(self) -> None:
        now_s = self._clock.steady()
        if not self._on or now_s - self._shown_s < SHOWN_S:
            return
        self._shown_s = now_s
        line = f"{self._recorder.bytes / 1000.0:.1f} kB kept, {printable(self._state(), 60)}"
        click.echo("\r" + line.ljust(self._width), nl=False, err=True)
        self._width = len(line)

    def end(self) -> None:
        if self._width:
            click.echo(err=True)
