"""Numbers, limits and instants as people read them; the same words in terminal text and on paper."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

VERDICTS = {"accept": "ACCEPTED", "reject": "REJECTED", "undecided": "NOT ENOUGH DATA YET"}

SIGNS = {"at_most": "≤", "at_least": "≥", "equals": "="}

UNITS = {"1": "", "count": "", "share": "%", "deg": "°"}
"""Units that are printed in another way than the catalogue spells them."""

DECIMALS = {"m": 3, "s": 2, "dB-Hz": 1, "deg": 1, "1": 2, "share": 2, "count": 1}

PLACES = {"scatter.mean_latitude_deg": 8, "scatter.mean_longitude_deg": 8}
"""A hundred-millionth of a degree is a millimetre."""


def number(value: float | None, unit: str, name: str = "") -> str:
    """A number without its unit: shares in per cent, as many decimals as the unit deserves, ``–`` for none."""
    if value is None:
        return "–"
    if unit == "share":
        value *= 100.0
    if unit in ("count", "1") and float(value).is_integer():
        return f"{value:.0f}"
    decimals = PLACES.get(name, DECIMALS.get(unit, 3))
    if unit == "s" and abs(value) >= 100.0:
        decimals = 0
    text = f"{value:.{decimals}f}"
    if unit == "share" and 0.0 < abs(value) < 0.005:
        return "< 0.01"
    if unit == "share" and 99.995 <= value < 100.0:
        return "> 99.99"
    return text.removeprefix("-") if float(text) == 0.0 else text


def with_unit(value: float | None, unit: str, name: str = "") -> str:
    """The number with its unit: ``2.310 m``, ``99.20 %``, ``12.5°``."""
    text = number(value, unit, name)
    mark = UNITS.get(unit, unit)
    return text if not mark or value is None else f"{text}{'' if mark == '°' else ' '}{mark}"


def interval(ends: list[float] | tuple[float, float] | None, unit: str, name: str = "") -> str:
    """``2.100 to 2.500``; ``exact`` for an interval of no width."""
    if ends is None:
        return "unknown"
    if ends[0] == ends[1]:
        return "exact"
    return f"{number(ends[0], unit, name)} to {number(ends[1], unit, name)}"


def limit(criterion: Mapping[str, Any]) -> str:
    """``≤ 3 m``, ``0 ± 0.1 m``; the limit as it was written, not rounded."""
    unit = criterion["unit"]
    factor = 100.0 if unit == "share" else 1.0
    mark = UNITS.get(unit, unit)
    end = f"{'' if mark == '°' else ' '}{mark}" if mark else ""
    value = f"{criterion['limit'] * factor:.10g}"
    if criterion["comparison"] == "equals" and criterion.get("within"):
        return f"{value} ± {criterion['within'] * factor:.10g}{end}"
    return f"{SIGNS[criterion['comparison']]} {value}{end}"


def instant(iso: str | None) -> str:
    """``2025-05-20 05:30:00`` from ISO 8601; a time of day stays one; a note where none is known."""
    if iso is None:
        return "unknown"
    return iso.removeprefix("T").replace("T", " ").removesuffix("Z").split(".")[0]


def span(first: str | None, last: str | None) -> str:
    """``2025-05-20 05:30:00 to 06:10:00 UTC``: the date once where it is the same."""
    if first is None or last is None:
        return "time unknown"
    begin, end = instant(first), instant(last)
    if " " in begin and begin.split(" ")[0] == end.split(" ")[0]:
        end = end.split(" ")[1]
    return f"{begin} to {end} UTC"


def size(count: int) -> str:
    """``512 bytes``, ``12.3 kB``, ``198 MB``."""
    for factor, name in ((1_000_000_000, "GB"), (1_000_000, "MB"), (1_000, "kB")):
        if count >= factor:
            return f"{count / factor:.3g} {name}"
    return f"{count} bytes"
