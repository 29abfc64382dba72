"""gnssmon quantities: every quantity that criteria, alarms, JSON and exports can name."""

from __future__ import annotations

import json
import textwrap
from dataclasses import asdict

import click

from gnssmon.statistics import instants
from gnssmon.statistics.catalogue import QUANTITIES

WIDTH = 80


@click.command(epilog="Example: gnssmon quantities scatter")
@click.argument("word", required=False)
@click.option("--json", "as_json", is_flag=True, help="As a JSON list.")
def command(word: str | None, as_json: bool) -> int:
    """List every quantity with its unit, meaning and source; with WORD only those whose name or meaning holds it.

    Those marked * can also be watched by an alarm. A name that ends in .* stands for a family: cn0.mean_dbhz.E5a.
    """
    chosen = [q for q in QUANTITIES if word is None or word.lower() in q.name or word.lower() in q.meaning.lower()]
    if as_json:
        click.echo(json.dumps([asdict(quantity) for quantity in chosen], indent=2))
        return 0
    for quantity in chosen:
        mark = " *" if instants.find(quantity.name) is not None else ""
        click.echo(f"{quantity.name} [{quantity.unit}]{mark}")
        for line in textwrap.wrap(f"{quantity.meaning} Source: {quantity.source}.", WIDTH - 4):
            click.echo(f"    {line}")
    if not chosen:
        raise click.UsageError(f"no quantity speaks of '{word}'; all of them: gnssmon quantities")
    return 0
