"""gnssmon check: headless acceptance run; criteria in, verdict, report and exit code out."""

from __future__ import annotations

import sys
import threading
from dataclasses import replace
from pathlib import Path
from typing import Any

import click

from gnssmon import errors, session, utc
from gnssmon.acceptance.sequential import DAY_S, Looks
from gnssmon.clocks import SystemClock
from gnssmon.commands.site import settings_from, site_options
from gnssmon.errors import GnssmonError, OutputError
from gnssmon.monitor import Monitor, Settings
from gnssmon.printable import printable
from gnssmon.report import result as results
from gnssmon.report import text
from gnssmon.snapshot import Snapshot, SourceFacts
from gnssmon.sources import hold_source
from gnssmon.sources.source import Source

SHOWN_S = 1.0
"""Between two lines of progress."""

GIVE_UP_S = 30.0
"""A lost source that has not come back after so long ends a run without ``--for``: a receiver restarts in less."""

STANDARD_OUTPUT = "-"


@click.command(
    epilog="Example: gnssmon check night.nmea.gz --criteria reference-station "
    '--reference "-33.41 148.25 312.40" --antenna-height 1.5 --report night.html'
)
@click.argument("source")
@site_options
@click.option("--for", "for_", metavar="DURATION", help="Stop after so long: 90s, 30m, 24h.")
@click.option("--from", "from_", metavar="T", help="Judge from this UTC on: 2025-05-20T05:30:00Z or 05:30.")
@click.option("--to", metavar="T", help="Judge up to this UTC.")
@click.option("--json", "json_", metavar="FILE|-", help="Write the result as JSON; - for standard output.")
@click.option("--report", type=click.Path(dir_okay=False, path_type=Path), metavar="FILE.html", help="Write a report.")
@click.option("--record", type=click.Path(file_okay=False, path_type=Path), metavar="DIR", help="Keep the bytes.")
@click.option("--until-decided", is_flag=True, help="Stop when the criteria are decided; the error rate is kept.")
def command(
    source: str,
    for_: str | None,
    from_: str | None,
    to: str | None,
    json_: str | None,
    report: Path | None,
    record: Path | None,
    until_decided: bool,
    **site: Any,
) -> int:
    """Judge SOURCE (a port, an address, a log, - or sim:SCENARIO) by criteria, without a screen.

    Exit code: 0 accepted, 1 rejected, 2 wrong usage, 3 not enough data to decide, 4 source failed, 130 interrupted.
    """
    settings = settings_from(**site)
    span = {
        "from_": None if from_ is None else utc.parse_instant(from_),
        "to": None if to is None else utc.parse_instant(to),
        "for_s": None if for_ is None else utc.parse_duration_s(for_),
    }
    if json_ not in (None, STANDARD_OUTPUT):
        _check_writable(Path(json_))
    if report is not None:
        _check_writable(report)
    run = _Run(source, settings, span, record, until_decided)
    outcome = run.go()
    snapshot = run.snapshot()
    facts = results.result(snapshot)
    _tell(facts, json_)
    if report is not None:
        from gnssmon.report import page

        page.write(facts, snapshot, report)
    if outcome.ended == "stopped" and not run.decided:
        return errors.INTERRUPTED
    if outcome.ended == "early":
        click.echo(f"gnssmon: {printable(outcome.problem)}", err=True)
        return errors.SOURCE_FAILED
    return {"accept": errors.ACCEPTED, "reject": errors.REJECTED, "undecided": errors.UNDECIDED}[
        snapshot.verdict.verdict
    ]


class _Run:
    """One source through one monitor, looked at now and then."""

    def __init__(
        self, label: str, settings: Settings, span: dict[str, Any], record: Path | None, until_decided: bool
    ) -> None:
        self._clock = SystemClock()
        self._for_s: float | None = span["for_s"]
        # With a duration the run ends by it; without, a source that stays away ends it.
        opened = hold_source(label, clock=self._clock, give_up_s=None if self._for_s else GIVE_UP_S)
        self._source: Source = opened
        if any(value is not None for value in span.values()):
            from gnssmon.replay.between import Between

            self._source = Between(opened, **span)
        self._watchers: list[session.Watcher] = []
        try:
            if record is not None:
                from gnssmon.recording.recorder import Recorder

                self._watchers.append(Recorder(record, self._clock, source=label))
        except GnssmonError:
            opened.close()
            raise
        settings = replace(settings, site=replace(settings.site, baud=opened.baud))
        self._facts = SourceFacts(
            label=opened.label, kind=opened.kind, size=opened.size, simulated=opened.kind == "simulated"
        )
        self._monitor = Monitor(settings, self._facts)
        self._looks = Looks(self._for_s or DAY_S) if until_decided else None
        self._taken = 0
        self._shown_s = -SHOWN_S
        self.decided = False

    def go(self) -> session.Outcome:
        """Run to the end, a decision, a signal."""
        for_s = self._for_s if self._source.kind == "live" else None
        try:
            with session.stop_on_signals() as stop:
                return session.run(
                    self._source,
                    self._monitor,
                    self._watchers,
                    self._clock,
                    stop=stop,
                    for_s=for_s,
                    look=lambda: self._look(stop),
                )
        finally:
            for watcher in self._watchers:
                close = getattr(watcher, "close", None)
                if close is not None:
                    close()
            if self._shown_s > 0.0 and sys.stderr.isatty():
                click.echo(err=True)
            for told in (*(getattr(watcher, "problem", "") for watcher in self._watchers), *self._source.doubts):
                if told:
                    click.echo(f"gnssmon: {printable(told)}", err=True)

    def snapshot(self) -> Snapshot:
        """The result, by the confidences that the looks taken have left."""
        self._monitor.source = replace(
            self._facts, size=self._source.size, sha256=self._source.sha256, state=self._source.state
        )
        if self._looks is None:
            return self._monitor.snapshot()
        last = self._looks.confidence(self._taken - 1) if self.decided else self._looks.confidence_at_end(self._taken)
        return self._monitor.snapshot(confidence=last)

    def _look(self, stop: threading.Event) -> None:
        now_s = self._clock.steady()
        if sys.stderr.isatty() and now_s - self._shown_s >= SHOWN_S:
            self._shown_s = now_s
            share = f"{self._source.consumed / self._source.size:.0%} of " if self._source.size else ""
            click.echo(
                f"\r{share}{printable(self._source.label, 40)}: {self._source.state}".ljust(70), nl=False, err=True
            )
        looks = self._looks
        if looks is None or self._taken >= len(looks.times_s):
            return
        duration = self._monitor.duration_s
        if duration < looks.times_s[self._taken]:
            return
        while self._taken + 1 < len(looks.times_s) and duration >= looks.times_s[self._taken + 1]:
            self._taken += 1
        confidence = looks.confidence(self._taken)
        self._taken += 1
        if self._monitor.snapshot(confidence=confidence).verdict.verdict != "undecided":
            self.decided = True
            stop.set()


def _tell(facts: dict[str, Any], json_: str | None) -> None:
    """The result on standard output, or as JSON where it was asked for."""
    if json_ == STANDARD_OUTPUT:
        click.echo(results.dumps(facts), nl=False)
        return
    if json_ is not None:
        try:
            Path(json_).write_text(results.dumps(facts), encoding="utf-8")
        except OSError as error:
            raise OutputError(f"'{printable(json_, 200)}' cannot be written: {error.strerror}") from error
    for line in text.lines(facts):
        click.echo(line)


def _check_writable(path: Path) -> None:
    """Say before a long run that its result could not be written. Raises OutputError."""
    folder = path.parent
    if not folder.is_dir():
        raise OutputError(f"'{printable(str(path), 200)}' cannot be written: there is no folder '{folder}'")
    try:
        with path.open("ab"):
            pass
    except OSError as error:
        raise OutputError(f"'{printable(str(path), 200)}' cannot be written: {error.strerror}") from error
