"""gnssmon export: per-epoch or per-signal tables of a log."""

from __future__ import annotations

from pathlib import Path

import click

from gnssmon import errors, utc
from gnssmon.clocks import SystemClock
from gnssmon.errors import SourceError
from gnssmon.export import Export, batches
from gnssmon.pipeline import Pipeline
from gnssmon.printable import printable
from gnssmon.sources import open_source

PORTION = 2000
"""Epochs turned into Python values at once."""


@click.command(epilog="Example: gnssmon export night.nmea.gz --to night.csv --signals")
@click.argument("log")
@click.option("--to", required=True, type=click.Path(dir_okay=False, path_type=Path), metavar="FILE", help="Target.")
@click.option("--signals", is_flag=True, help="A row per satellite and signal instead of one per epoch.")
@click.option("--from", "from_", metavar="T", help="From this UTC on: 2025-05-20T05:30:00Z or 05:30.")
@click.option("--until", metavar="T", help="Up to this UTC.")
def command(log: str, to: Path, signals: bool, from_: str | None, until: str | None) -> int:
    """Write the epochs of LOG as a table; the suffix of FILE tells the format: .csv, .parquet, .geojson."""
    source = open_source(log, clock=SystemClock())
    if from_ is not None or until is not None:
        from gnssmon.replay.between import Between

        source = Between(
            source,
            from_=None if from_ is None else utc.parse_instant(from_),
            to=None if until is None else utc.parse_instant(until),
        )
    pipeline = Pipeline()
    lost: SourceError | None = None
    with Export(to, signals=signals) as table:
        try:
            for chunk in source.chunks():
                for part in batches(pipeline.feed(chunk), PORTION):
                    table.write(part)
        except SourceError as error:
            lost = error
        for part in batches(pipeline.finish(), PORTION):
            table.write(part)
    click.echo(f"{table.rows} rows in '{printable(str(to))}'", err=True)
    if lost is not None:
        raise lost
    return errors.ACCEPTED
