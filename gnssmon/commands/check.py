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
from gnssmon.acceptance.verdict import in_words
from gnssmon.clocks import SystemClock
from gnssmon.commands.site import settings_from, site_options
from gnssmon.errors import GnssmonError
from gnssmon.monitor import Monitor, Settings
from gnssmon.notices import Notices
from gnssmon.printable import printable
from gnssmon.report import files, text
from gnssmon.report import result as results
from gnssmon.snapshot import Snapshot, SourceFacts
from gnssmon.sources import hold_source
from gnssmon.sources.source import Source
from gnssmon.statistics.subject import Span

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
@click.option("--alarm-log", type=click.Path(dir_okay=False, path_type=Path), metavar="FILE", help="Add alarms to it.")
@click.option("--on-alarm", metavar="COMMAND", help="Run when an alarm is raised or cleared; no shell is involved.")
@click.option("--until-decided", is_flag=True, help="Stop when the criteria are decided; the error rate is kept.")
def command(
    source: str,
    for_: str | None,
    from_: str | None,
    to: str | None,
    json_: str | None,
    report: Path | None,
    record: Path | None,
    alarm_log: Path | None,
    on_alarm: str | None,
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
        files.check_writable(Path(json_))
    if report is not None:
        files.check_writable(report)
    notices = Notices(SystemClock(), log=alarm_log, command=on_alarm)
    try:
        run = _Run(source, settings, span, record=record, until_decided=until_decided, notices=notices)
        outcome = run.go()
    finally:
        notices.close()
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
        self,
        label: str,
        settings: Settings,
        span: dict[str, Any],
        *,
        record: Path | None,
        until_decided: bool,
        notices: Notices,
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
        self._decided: Snapshot | None = None
        self._notices = notices

    @property
    def decided(self) -> bool:
        """A look has decided, and the run was stopped for it."""
        return self._decided is not None

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
            self._notices.tell(self._monitor.news)
            troubles = [getattr(watcher, "problem", "") for watcher in self._watchers]
            for told in (*troubles, self._notices.problem, *self._source.doubts):
                if told:
                    click.echo(f"gnssmon: {printable(told)}", err=True)

    def snapshot(self) -> Snapshot:
        """The result, by the confidences that the looks taken have left."""
        source = replace(self._facts, size=self._source.size, sha256=self._source.sha256, state=self._source.state)
        self._monitor.source = source
        if self._decided is not None:
            return replace(self._decided, source=source)
        if self._looks is None:
            return self._monitor.snapshot()
        return self._monitor.snapshot(confidence=self._looks.confidence_at_end(self._taken))

    def _look(self, stop: threading.Event) -> None:
        self._notices.tell(self._monitor.news)
        now_s = self._clock.steady()
        if sys.stderr.isatty() and now_s - self._shown_s >= SHOWN_S:
            self._shown_s = now_s
            share = f"{self._source.consumed / self._source.size:.0%} of " if self._source.size else ""
            click.echo(
                f"\r{share}{printable(self._source.label, 40)}: {self._source.state}".ljust(70), nl=False, err=True
            )
        self._judge(stop)

    def _judge(self, stop: threading.Event) -> None:
        """Look where the plan says so: at stretches of the stream, never at how it happened to be cut."""
        looks, first_ms = self._looks, self._monitor.first_ms
        while looks is not None and first_ms is not None and self._taken < len(looks.times_s):
            length_s = looks.times_s[self._taken]
            if self._monitor.duration_s < length_s:
                return
            span = Span(to_ms=first_ms + round(length_s * 1000.0))
            confidence = looks.confidence(self._taken)
            self._taken += 1
            snapshot = self._monitor.snapshot(span, window=f"the first {in_words(length_s)}", confidence=confidence)
            if snapshot.verdict.verdict != "undecided":
                self._decided = snapshot
                stop.set()
                return


def _tell(facts: dict[str, Any], json_: str | None) -> None:
    """The result on standard output, or as JSON where it was asked for."""
    if json_ == STANDARD_OUTPUT:
        click.echo(results.dumps(facts), nl=False)
        return
    if json_ is not None:
        files.write(Path(json_), results.dumps(facts))
    for line in text.lines(facts):
        click.echo(line)
