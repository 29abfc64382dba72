"""A comparison as a JSON object and as a few lines for a terminal."""

from __future__ import annotations

import functools
import json
import textwrap
from collections.abc import Mapping
from dataclasses import asdict
from importlib import resources
from typing import Any

from gnssmon import __version__
from gnssmon.acceptance.comparison import Comparison, Difference
from gnssmon.printable import printable
from gnssmon.report import words
from gnssmon.report.result import Json

SCHEMA = "gnssmon.comparison/1"
WIDTH = 80
SHORT = {"no difference shown": "none shown", "cannot be compared": "unknown"}
NAMES = {"level": "level, all signals"}


def facts(comparison: Comparison, before: Mapping[str, Any], after: Mapping[str, Any]) -> Json:
    """The comparison under the JSON Schema that is shipped beside this file."""
    return {
        "schema": SCHEMA,
        "version": __version__,
        "outcome": comparison.outcome,
        "differences": [
            asdict(row) | {"interval": None if row.interval is None else list(row.interval)}
            for row in comparison.differences
        ],
        "notes": list(comparison.notes),
        "before": _side(before),
        "after": _side(after),
    }


@functools.cache
def schema() -> Json:
    """The JSON Schema (2020-12) of a comparison."""
    text = (resources.files("gnssmon.report") / "comparison.schema.json").read_text(encoding="utf-8")
    loaded: Json = json.loads(text)
    return loaded


def lines(comparison: Comparison, before: Mapping[str, Any], after: Mapping[str, Any]) -> list[str]:
    """Outcome, both sides, a row for each difference; no line longer than 80 columns."""
    out = [comparison.outcome.upper()]
    for name, side in (("before", before), ("after ", after)):
        stream = side["stream"]
        out += _wrapped(f"{name} {side['source']['label']}: {words.span(stream['first_utc'], stream['last_utc'])}")
    out += ["", f"{'':11}{'':24}{'before':>9}{'after':>9}{'differs':>9}  {'interval':16}"]
    for row in comparison.differences:
        out += _row(row)
    out += ["", *(line for note in comparison.notes for line in _wrapped(note))]
    out += _wrapped(
        "'none shown' is no proof that nothing changed: what would have been found in four of five such comparisons "
        "stands beside it."
    )
    return out


def _row(row: Difference) -> list[str]:
    unit, indent = row.unit, "  " if row.detail else ""
    name = printable(indent + NAMES.get(row.name, row.name), 24)
    if row.interval is None:
        if row.detail:
            return [f"{SHORT[row.outcome]:11}{name:24}{printable(row.note, 45)}"]
        return [f"{SHORT[row.outcome]:11}{name:24}", *_wrapped(row.note, "             ")]
    numbers = "".join(
        f"{words.number(value, unit, row.name).replace('–', '-'):>9}" for value in (row.before, row.after)
    )
    signed = f"{_signed(row.difference, unit):>9}"
    ends = f"{_signed(row.interval[0], unit)} to {_signed(row.interval[1], unit)}"
    out = [f"{SHORT.get(row.outcome, row.outcome):11}{name:24}{numbers}{signed}  {ends}"[:WIDTH]]
    if not row.detail:
        found = f"{words.with_unit(row.smallest, unit)} would have been found".replace("°", " deg")
        out += _wrapped("; ".join(part for part in (found, row.note) if part), "             ")
    return out


def _signed(value: float | None, unit: str) -> str:
    text = words.number(value, unit).replace("< ", "").replace("> ", "")
    return f"+{text}" if value is not None and value > 0.0 else text


def _side(result: Mapping[str, Any]) -> Json:
    return {key: result[key] for key in ("verdict", "criteria_set", "source", "window", "site")} | {
        "first_utc": result["stream"]["first_utc"],
        "last_utc": result["stream"]["last_utc"],
    }


def _wrapped(text: str, indent: str = "") -> list[str]:
    return textwrap.wrap(printable(text), WIDTH, initial_indent=indent, subsequent_indent=indent)
