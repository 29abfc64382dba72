"""gnssmon compare: before against after, two logs or two JSON results."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import click

from gnssmon import errors, session
from gnssmon.acceptance.comparison import compare
from gnssmon.clocks import SystemClock
from gnssmon.errors import ConfigurationError, SourceError
from gnssmon.monitor import Monitor, Settings
from gnssmon.printable import printable
from gnssmon.report import comparison as comparisons
from gnssmon.report import files
from gnssmon.report import result as results
from gnssmon.snapshot import SourceFacts
from gnssmon.sources import open_source

LARGEST_RESULT_BYTES = 100_000_000
"""A result is some hundred kilobytes; what is larger and begins with a brace is something else."""


@click.command(epilog="Example: gnssmon compare before_cable_swap.nmea.gz after_cable_swap.nmea.gz")
@click.argument("before")
@click.argument("after")
@click.option("--json", "json_", metavar="FILE|-", help="Write the comparison as JSON; - for standard output.")
def command(before: str, after: str, json_: str | None) -> int:
    """Tell what AFTER is better or worse in than BEFORE: two logs, or two results of gnssmon check --json.

    Levels are compared at matched elevation and signal, horizons at matched azimuth, each with an interval and with
    the difference that this much data would have shown.

    Exit code: 0 better or no difference shown, 1 something got worse, 2 wrong usage, 3 nothing could be compared,
    4 a log could not be read.
    """
    if json_ not in (None, "-"):
        files.check_writable(Path(json_))
    first, second = _result(before), _result(after)
    compared = compare(first, second)
    if json_ is not None:
        text = results.dumps(comparisons.facts(compared, first, second))
        if json_ == "-":
            click.echo(text, nl=False)
        else:
            files.write(Path(json_), text)
    if json_ != "-":
        click.echo("\n".join(comparisons.lines(compared, first, second)))
    if compared.outcome == "cannot be compared":
        return errors.UNDECIDED
    return errors.REJECTED if compared.outcome in ("worse", "mixed") else errors.ACCEPTED


def _result(name: str) -> dict[str, Any]:
    """The result that a file holds, or that its log gives."""
    path = Path(name)
    if path.is_file():
        with path.open("rb") as file:
            begins = file.read(1)
        if begins == b"{":
            return _load(path)
    return _judge(name)


def _load(path: Path) -> dict[str, Any]:
    import jsonschema

    shown = printable(str(path), 200)
    try:
        if path.stat().st_size > LARGEST_RESULT_BYTES:
            raise ConfigurationError(f"'{shown}' is too large for a result of gnssmon check --json")
        facts: dict[str, Any] = json.loads(path.read_text(encoding="utf-8"))
        jsonschema.Draft202012Validator(results.schema()).validate(facts)
    except (OSError, ValueError, RecursionError) as error:
        raise ConfigurationError(f"'{shown}' cannot be read as JSON: {printable(str(error), 200)}") from None
    except jsonschema.ValidationError as error:
        raise ConfigurationError(
            f"'{shown}' is no result of gnssmon check --json: at {error.json_path}: {printable(error.message, 200)}"
        ) from None
    return facts


def _judge(name: str) -> dict[str, Any]:
    clock = SystemClock()
    source = open_source(name, clock=clock)
    if source.kind == "live":
        source.close()
        raise ConfigurationError(f"'{printable(name, 200)}' is a live source: compare takes logs or JSON results")
    facts = SourceFacts(label=source.label, kind=source.kind, size=source.size, simulated=source.kind == "simulated")
    monitor = Monitor(Settings(), facts)
    with session.stop_on_signals() as stop:
        outcome = session.run(source, monitor, (), clock, stop=stop)
    if outcome.ended == "stopped":
        raise click.exceptions.Abort
    if outcome.ended == "early":
        raise SourceError(outcome.problem)
    monitor.source = SourceFacts(
        label=source.label,
        kind=source.kind,
        size=source.size,
        sha256=source.sha256,
        simulated=source.kind == "simulated",
        state=source.state,
    )
    return results.result(monitor.snapshot())
