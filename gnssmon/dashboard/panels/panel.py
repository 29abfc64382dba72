"""Panel: one picture of a snapshot, drawn on as many cells as there are; and the words that panels share."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

from gnssmon.dashboard.drawing import Grid, Size
from gnssmon.snapshot import Snapshot


@dataclass(frozen=True, slots=True, kw_only=True)
class Panel:
    """One file of this folder. ``render`` is pure, takes any snapshot and any size, and never raises."""

    key: str
    """Short name in lower case, as in ``views``."""
    title: str
    help: str
    """What the figures mean, what is usual (with source), what to do if it is not; paragraphs by empty lines."""
    render: Callable[[Snapshot, Size], Grid]
    choices: Callable[[Snapshot], Sequence[str]] = lambda _: ()
    """What of it may be looked at alone (``Size.choice``)."""


QUALITIES = (
    "no fix",
    "autonomous",
    "differential",
    "precise",
    "RTK fixed",
    "RTK float",
    "estimated",
    "manual input",
    "simulator",
)
"""GGA quality indicator 0 to 8 (IEC 61162-1) in words."""

QUALITY_TONES = ("bad", "", "good", "good", "good", "doubt", "doubt", "bad", "doubt")

SYSTEM_TONES = {"G": "one", "R": "two", "E": "three", "C": "four", "J": "two", "I": "three", "S": "quiet"}
"""By RINEX system letter; the letter itself is always written too."""


def value(snapshot: Snapshot, name: str) -> float | None:
    """A scalar quantity; None where it could not be computed."""
    estimate = snapshot.estimates.get(name)
    found = None if estimate is None else estimate.value
    return float(found) if isinstance(found, int | float) and math.isfinite(found) else None


def quality_words(quality: int | None) -> str:
    """The state of the fix in words."""
    if quality is None:
        return "not stated"
    return QUALITIES[quality] if 0 <= quality < len(QUALITIES) else f"quality {quality}, not in the standard"


def quality_tone(quality: int | None) -> str:
    """How the state of the fix looks."""
    return QUALITY_TONES[quality] if quality is not None and 0 <= quality < len(QUALITIES) else "bad"


def metres(length_m: float | None) -> str:
    """``4.1 mm``, ``2.3 cm``, ``1.42 m``, ``215 m``, ``12.3 km``; ``–`` where not known."""
    if length_m is None or not math.isfinite(length_m):
        return "–"
    size = abs(length_m)
    if size < 0.00995:
        return f"{length_m * 1000:.1f} mm"
    if size < 0.0995:
        return f"{length_m * 100:.1f} cm"
    if size < 99.95:
        return f"{length_m:.2f} m"
    if size < 9999.5:
        return f"{length_m:.0f} m"
    return f"{length_m / 1000:.1f} km" if size < 1e8 else f"{length_m / 1000:.1e} km"


def percent(share: float | None) -> str:
    """``99.95 %``, ``100 %``; never rounded to 0 or 100 when it is not."""
    if share is None or not math.isfinite(share):
        return "–"
    if share in (0.0, 1.0):
        return f"{share * 100:.0f} %"
    text = f"{share * 100:.2f}" if share > 0.1 else f"{share * 100:.3f}"
    return f"{min(99.99, max(0.001, float(text)))} %"


def number(found: float | None, decimals: int = 1) -> str:
    """A number with so many decimals, ``–`` where not known."""
    return "–" if found is None or not math.isfinite(found) else f"{found:.{decimals}f}"


def angle(degrees: float, letters: str, decimals: int = 7) -> str:
    """``44.7165948° S``: the hemisphere's letter from ``letters``, positive first."""
    return f"{abs(degrees):.{decimals}f}° {letters[degrees < 0]}"


def clock_time(snapshot: Snapshot, axis_ms: int | float | None) -> str:
    """``05:30:00`` of UTC for an instant on the time axis; ``–`` where not known."""
    if axis_ms is None:
        return "–"
    second = (int(axis_ms) + (snapshot.utc_offset_ms or 0)) // 1000 % 86_400
    return f"{second // 3600:02d}:{second // 60 % 60:02d}:{second % 60:02d}"


def nothing(size: Size, text: str) -> Grid:
    """An empty panel that says in words what is missing and what brings it."""
    grid = Grid(size)
    rows = -(-len(text) // max(1, size.width - 2))
    grid.wrap(1, max(0, (size.height - rows) // 2 - 1), text, "quiet", max(1, size.width - 2))
    return grid
