"""The one vocabulary: what can be measured (Quantity), and what was (Estimate)."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

Severity = Literal["info", "warning", "serious"]

DEFAULT_CONFIDENCE = 0.95


@dataclass(frozen=True, slots=True, kw_only=True)
class Quantity:
    """A named number that criteria, alarms, JSON, exports, help and reports all speak of."""

    name: str
    """Dotted, lower case, the unit as a suffix: ``scatter.r95_m``. A family ends in ``.*``: ``cn0.mean_dbhz.*``."""
    unit: str
    """``m``, ``s``, ``deg``, ``dB-Hz``, ``share`` (0 to 1), ``count``, ``1`` (a pure number)."""
    meaning: str
    """One sentence for a technician."""
    source: str
    """Where the definition comes from: a standard, a paper, or ``common practice, no source``."""


@dataclass(frozen=True, slots=True)
class Estimate:
    """What a window of data says of one quantity."""

    value: float | tuple[float | None, ...] | None
    """None: could not be computed. A tuple only for list-valued quantities (``sky.mask_deg``)."""
    interval: tuple[float, float] | None = None
    """Two-sided confidence interval that respects autocorrelation; None: unknown, or too short to say.
    A value known exactly (a count) has an interval of zero width: (value, value)."""
    confidence: float = DEFAULT_CONFIDENCE
    samples: int = 0
    """How many values went in."""
    effective_samples: float = math.nan
    """How many independent values they are worth; NaN where not estimated."""


NOTHING = Estimate(None)
"""The estimate of a quantity that could not be computed."""


def exact(value: float, samples: int = 0) -> Estimate:
    """An estimate without uncertainty: a count, a share of what was received."""
    return Estimate(value, (value, value), 1.0, samples)
