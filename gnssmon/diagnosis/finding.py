"""A finding: something that is wrong, with numbers, and what to do about it."""

from __future__ import annotations

from dataclasses import dataclass, field

from gnssmon.quantities import Severity


@dataclass(frozen=True, slots=True, kw_only=True)
class Finding:
    code: str
    """Stable, lower-case words with hyphens."""
    severity: Severity
    summary: str
    """One sentence: the observation with its comparison value."""
    evidence: dict[str, float | int | str | None] = field(default_factory=dict)
    advice: str = ""
    """Possible causes and the next check, in a technician's words."""
    source: str = "common practice, no source"
