"""Met, not met, undecided; accept, reject, undecided."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Comparison = Literal["at_most", "at_least", "equals"]
Result = Literal["met", "not met", "undecided"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Judged:
    """One criterion with what the data say of it."""

    quantity: str
    unit: str
    value: float | None
    interval: tuple[float, float] | None
    confidence: float
    limit: float
    within: float | None
    comparison: Comparison
    result: Result
    note: str
    reason: str
    """Why it is undecided, in words; empty when decided."""
    needed_s: float | None
    """Forecast: how much longer to observe; None: not known, or not needed."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Verdict:
    verdict: Literal["accept", "reject", "undecided"]
    criteria: tuple[Judged, ...]
    criteria_name: str
    """File or preset, or ``default``."""
    needed_s: float | None = None
