"""Result → a few lines for a terminal, 80 columns wide, plain characters, safe to print."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping
from typing import Any

from gnssmon.acceptance.verdict import in_words
from gnssmon.printable import printable
from gnssmon.report import words

WIDTH = 80
RESULT_WIDTH, NAME_WIDTH = 10, 31
MOST_FINDINGS = 8
PLAIN = str.maketrans({"≤": "<=", "≥": ">=", "±": "+-", "–": "-", "°": " deg"})
"""Some terminals and pipes cannot carry more than ASCII."""
MARKS = {"met": "met", "not met": "NOT MET", "undecided": "undecided"}


def lines(result: Mapping[str, Any]) -> list[str]:
    """The verdict, why, what was found, and what to keep in mind; no line longer than 80 columns."""
    return [
        *_verdict(result),
        "",
        *_criteria(result),
        *_findings(result),
        *_alarms(result),
        "",
        *_wrapped(result["cautions"][0]),
    ]


def _verdict(result: Mapping[str, Any]) -> list[str]:
    source, stream, quantities = result["source"], result["stream"], result["quantities"]
    default = " (the default set: none was named)" if result["criteria_set"] == "default" else ""
    head = f"{words.VERDICTS[result['verdict']]} by criteria '{result['criteria_set']}'{default}"
    if result["verdict"] == "undecided" and result["needed_s"] is not None:
        head += f"; about {in_words(result['needed_s'])} more"
    facts = [words.span(stream["first_utc"], stream["last_utc"])]
    if quantities.get("stream.duration_s") is not None:
        facts.append(in_words(quantities["stream.duration_s"]))
    facts += [f"{stream['sentences']} sentences", words.size(stream["bytes"])]
    label = f"{source['label']}{', SIMULATED' if source['simulated'] else ''}"
    return [*_wrapped(head), *_wrapped(label), *_wrapped(", ".join(facts))]


def _criteria(result: Mapping[str, Any]) -> list[str]:
    out = [f"{'':{RESULT_WIDTH}}{'criterion':{NAME_WIDTH}}{'value':>9}  {'interval':16} limit"]
    for criterion in result["criteria"]:
        name, unit = criterion["quantity"], criterion["unit"]
        out.append(
            f"{MARKS[criterion['result']]:{RESULT_WIDTH}}"
            f"{printable(name, NAME_WIDTH - 1):{NAME_WIDTH}}"
            f"{words.number(criterion['value'], unit, name).translate(PLAIN):>9}  "
            f"{words.interval(criterion['interval'], unit, name):16} "
            f"{words.limit(criterion).translate(PLAIN)}"[:WIDTH].rstrip()
        )
        if criterion["result"] == "undecided":
            needed = criterion["needed_s"]
            more = f"; about {in_words(needed)} more" if needed is not None else ""
            out += _wrapped(f"{criterion['reason']}{more}", " " * RESULT_WIDTH)
    if not result["criteria"]:
        out.append("(no criterion was given: nothing can be accepted)")
    return out


def _findings(result: Mapping[str, Any]) -> list[str]:
    findings = result["findings"]
    if not findings:
        return []
    out = ["", "Findings"]
    for finding in findings[:MOST_FINDINGS]:
        out += _wrapped(f"{finding['severity']}: {finding['summary']}", "    ", "  ")
    if len(findings) > MOST_FINDINGS:
        out.append(f"  and {len(findings) - MOST_FINDINGS} more: see the report or the JSON")
    return out


def _alarms(result: Mapping[str, Any]) -> list[str]:
    alarms = result["alarms"]
    if not alarms:
        return []
    still = sum(alarm["cleared_utc"] is None for alarm in alarms)
    return ["", f"Alarms: {len(alarms)} raised, {still} not cleared."]


def _wrapped(text: str, indent: str = "", first: str | None = None) -> list[str]:
    return textwrap.wrap(
        printable(text), WIDTH, initial_indent=indent if first is None else first, subsequent_indent=indent
    )
