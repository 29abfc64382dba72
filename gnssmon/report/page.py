"""Result and figures → one HTML file that stands alone: no network, no second file, prints on A4 and Letter.

Every text is made printable and then escaped by the template, whatever the stream or a file name held. Only the
figures, which are drawn by us, go in as markup.
"""

from __future__ import annotations

from collections.abc import Mapping
from importlib import resources
from pathlib import Path
from typing import Any

from gnssmon.acceptance.verdict import in_words
from gnssmon.printable import printable
from gnssmon.report import files, words
from gnssmon.report.figures import FIGURES
from gnssmon.report.figures.drawing import FULL_MM, svg
from gnssmon.report.files import check_writable
from gnssmon.snapshot import Snapshot
from gnssmon.statistics import catalogue

__all__ = ["check_writable", "html", "write"]


def write(result: Mapping[str, Any], snapshot: Snapshot, path: Path) -> None:
    """Write the report of a run; raises OutputError. ``result`` is ``result.result(snapshot)``."""
    files.write(path, html(result, snapshot))


def html(result: Mapping[str, Any], snapshot: Snapshot) -> str:
    """The report as text."""
    from jinja2 import Environment, StrictUndefined
    from markupsafe import Markup

    environment = Environment(autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True)
    environment.globals.update(words=words, in_words=in_words)
    template = environment.from_string(
        (resources.files("gnssmon.report") / "page.html.jinja").read_text(encoding="utf-8")
    )
    figures = []
    for drawing in FIGURES:
        drawn = svg(drawing, snapshot)
        figures.append(
            {
                "title": drawing.title,
                "caption": drawing.caption,
                "wide": drawing.width_mm == FULL_MM,
                "svg": None if drawn is None else Markup(drawn),
            }
        )
    safe = _made_printable(result)
    return template.render(result=safe, figures=figures, quantities=_quantities(safe))


def _quantities(result: Mapping[str, Any]) -> list[dict[str, str]]:
    """A row for each quantity that could be computed: name, value, interval, meaning."""
    rows = []
    for name, value in result["quantities"].items():
        quantity = catalogue.find(name)
        if value is None or quantity is None:
            continue
        unit = quantity.unit
        if isinstance(value, list):
            shown, ends = " ".join(words.number(part, "count") for part in value), ""
        else:
            ends = words.interval(result["intervals"][name], unit, name) if name in result["intervals"] else "–"
            shown = words.with_unit(value, unit, name)
        rows.append({"name": name, "value": shown, "interval": ends, "meaning": quantity.meaning})
    return rows


def _made_printable(facts: Any) -> Any:
    """The same facts with every text made safe to show."""
    if isinstance(facts, str):
        return printable(facts)
    if isinstance(facts, Mapping):
        return {printable(str(key)): _made_printable(value) for key, value in facts.items()}
    if isinstance(facts, list):
        return [_made_printable(value) for value in facts]
    return facts
