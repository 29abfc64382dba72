"""Alarm events and states: quiet → pending → raised → clearing, at a given time."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from gnssmon.quantities import Severity

Phase = Literal["quiet", "pending", "raised", "clearing"]


@dataclass(frozen=True, slots=True, kw_only=True)
class AlarmEvent:
    """One raising of one alarm; ``cleared_ms`` None: still raised. Times on the time axis and as UTC text."""

    quantity: str
    severity: Severity
    limit: float
    worst: float
    raised_ms: int
    cleared_ms: int | None
    raised_utc: str
    cleared_utc: str | None
    acknowledged: bool = False
    note: str = ""
