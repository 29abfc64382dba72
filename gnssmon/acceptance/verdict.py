"""Met, not met, undecided; accept, reject, undecided.

A criterion is *met* when the whole confidence interval of its quantity lies inside the limit, *not met* when the whole
interval lies outside, else *undecided*. Exact quantities (counts, what was received) have intervals of no width.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Literal

from gnssmon.acceptance.criteria import Comparison, CriteriaSet, Criterion
from gnssmon.quantities import NOTHING, Estimate

Result = Literal["met", "not met", "undecided"]

FARTHEST_S = 30 * 86_400.0
"""A forecast beyond a month is no forecast."""

FARTHEST_TIMES = 1e4
"""A value so close to the limit, in half widths, lies on it."""

LOPSIDED = 1.2
"""An interval whose upper part is so many times its lower one is taken to be even on a logarithmic scale."""

Estimates = Callable[[float], Mapping[str, Estimate]]
"""All estimates by name, with intervals of the confidence that is asked for."""


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
    source: str = ""
    """Where the limit comes from."""

    @property
    def margin(self) -> float | None:
        """How far the value is inside the limit, negative outside; None without a value."""
        return None if self.value is None else _inside(self, self.value)


@dataclass(frozen=True, slots=True, kw_only=True)
class Verdict:
    verdict: Literal["accept", "reject", "undecided"]
    criteria: tuple[Judged, ...]
    criteria_name: str
    """File or preset, or ``default``."""
    needed_s: float | None = None
    criteria_sha256: str = ""
    """Of the file or preset."""


def judge(
    criteria_set: CriteriaSet,
    estimates: Estimates,
    *,
    duration_s: float,
    confidence: Callable[[float], float] = lambda asked: asked,
) -> Verdict:
    """Hold every criterion against the estimates of a run of ``duration_s``, first epoch to last.

    ``confidence`` turns the one that a criterion asks for into the one that is used: a run that is looked at often
    passes ``sequential.Looks.confidence``.
    """
    judged = []
    answers: dict[float, Mapping[str, Estimate]] = {}
    for criterion in criteria_set.criteria:
        used = confidence(criterion.confidence)
        if used not in answers:
            answers[used] = estimates(used)
        known = answers[used]
        # A day at 1 Hz is 86 400 epochs, and one second less from the first to the last.
        interval_s = _number(known.get("stream.interval_s", NOTHING).value) or 0.0
        judged.append(_judged(criterion, known, duration_s + interval_s, used))
    results = {one.result for one in judged}
    undecided = [one.needed_s for one in judged if one.result == "undecided"]
    forecasts = [seconds for seconds in undecided if seconds is not None]
    return Verdict(
        verdict="reject" if "not met" in results else "accept" if results == {"met"} else "undecided",
        criteria=tuple(judged),
        criteria_name=criteria_set.name,
        needed_s=max(forecasts) if forecasts and len(forecasts) == len(undecided) else None,
        criteria_sha256=criteria_set.sha256,
    )


def _judged(criterion: Criterion, estimates: Mapping[str, Estimate], duration_s: float, confidence: float) -> Judged:
    estimate = estimates.get(criterion.quantity, NOTHING)
    value = _number(estimate.value)
    interval = estimate.interval if value is not None else None
    if interval is not None and any(math.isnan(end) for end in interval):
        interval = None
    result: Result = "undecided"
    reason, needed_s = "", None
    if value is None:
        reason = "could not be computed from what the stream holds"
    elif duration_s < criterion.minimum_duration_s:
        needed_s = criterion.minimum_duration_s - duration_s
        reason = f"the least duration of {in_words(criterion.minimum_duration_s)} is not reached"
    elif interval is None:
        reason = "too short to say how uncertain the value is"
    else:
        result = _result(criterion, interval)
        if result == "undecided":
            needed_s = _forecast(criterion, value, interval, duration_s)
            reason = "the limit lies inside the interval"
    return Judged(
        quantity=criterion.quantity,
        unit=criterion.unit,
        value=value,
        interval=interval,
        confidence=confidence,
        limit=criterion.limit,
        within=criterion.within,
        comparison=criterion.comparison,
        result=result,
        note=criterion.note,
        reason=reason,
        needed_s=needed_s,
        source=criterion.source,
    )


def _number(value: float | tuple[float | None, ...] | None) -> float | None:
    return float(value) if isinstance(value, int | float) and math.isfinite(value) else None


def _band(criterion: Criterion | Judged) -> tuple[float, float]:
    """The values that fulfil a criterion, from and to, both included."""
    if criterion.comparison == "at_most":
        return -math.inf, criterion.limit
    if criterion.comparison == "at_least":
        return criterion.limit, math.inf
    within = criterion.within or 0.0
    return criterion.limit - within, criterion.limit + within


def _inside(criterion: Criterion | Judged, value: float) -> float:
    low, high = _band(criterion)
    return min(value - low, high - value)


def _result(criterion: Criterion, interval: tuple[float, float]) -> Result:
    low, high = _band(criterion)
    if low <= interval[0] and interval[1] <= high:
        return "met"
    if interval[1] < low or interval[0] > high:
        return "not met"
    return "undecided"


def _forecast(criterion: Criterion, value: float, interval: tuple[float, float], duration_s: float) -> float | None:
    """How much longer until the interval, shrinking about the present value, leaves the limit.

    A half width falls with the square root of the time; that of a share of which nothing (or only) was seen falls with
    the time itself. Intervals of spreads are lopsided because they are even on a logarithmic scale: there they shrink.
    None: the value lies on the limit, or the time is beyond ``FARTHEST_S``.
    """
    needed = 1.0
    low, high = interval
    lopsided = low > 0.0 and high - value > LOPSIDED * (value - low) > 0.0
    for edge in _band(criterion):
        if not low <= edge <= high:
            continue
        if lopsided:
            end, start, limit = math.log(high if edge >= value else low), math.log(value), math.log(edge)
        else:
            end, start, limit = high if edge >= value else low, value, edge
        half, distance = abs(end - start), abs(limit - start)
        if distance <= 0.0 or half > distance * FARTHEST_TIMES:
            return None
        one_sided = (value - low if edge >= value else high - value) <= 0.0
        needed = max(needed, (half / distance) ** (1 if one_sided else 2))
    longer_s = duration_s * (needed - 1.0)
    return longer_s if 0.0 < longer_s <= FARTHEST_S else None


def in_words(seconds: float) -> str:
    """A length of time as people say it: ``45 s``, ``12 min``, ``1 h 20 min``, ``2 d 4 h``."""
    if seconds < 90:
        return f"{seconds:.0f} s"
    minutes = round(seconds / 60)
    if minutes < 60:
        return f"{minutes} min"
    hours, minutes = divmod(minutes, 60)
    if hours < 48:
        return f"{hours} h {minutes} min" if minutes else f"{hours} h"
    days, hours = divmod(round(seconds / 3600), 24)
    return f"{days} d {hours} h" if hours else f"{days} d"
