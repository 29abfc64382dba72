"""Alarm events and states: quiet → pending → raised → clearing, at a given time.

    quiet     ── beyond the limit ──→  pending   ── for hold_s ──→  raised
    pending   ── inside again ──→  quiet
    raised    ── inside the clearing limit ──→  clearing  ── for hold_s, at least CLEAR_S ──→  quiet
    clearing  ── not inside any more ──→  raised

No clock: every evaluation is *at a time that is passed in*. A value that is not known moves nothing towards raising
and nothing towards clearing: not knowing proves neither.
"""

from __future__ import annotations

import math
from collections import deque
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Literal

from gnssmon import utc
from gnssmon.alarms.rules import AlarmRule
from gnssmon.quantities import NOTHING, Estimate, Severity

Phase = Literal["quiet", "pending", "raised", "clearing"]

CLEAR_S = 10.0
"""An alarm without hold time still needs this long inside the clearing limit: a value that swings about the limit
raises one alarm, not one a second."""

MOST_EVENTS = 1000
"""Closed events kept; a stream that raises more is looked at in its event log."""


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


@dataclass(slots=True)
class _State:
    rule: AlarmRule
    phase: Phase = "quiet"
    since_ms: int = 0
    """When the phase began."""
    worst: float = math.nan
    event: AlarmEvent | None = None
    """The open one."""


class AlarmStates:
    """Every rule with its phase; the events so far."""

    def __init__(self, rules: tuple[AlarmRule, ...]) -> None:
        self._states = [_State(rule) for rule in rules]
        self._closed: deque[AlarmEvent] = deque(maxlen=MOST_EVENTS)

    @property
    def windows_s(self) -> tuple[float, ...]:
        """Every window length that some rule looks over, rising."""
        return tuple(sorted({state.rule.over_s for state in self._states}))

    @property
    def events(self) -> tuple[AlarmEvent, ...]:
        """Closed and open events by the time they were raised, bounded."""
        still_open = [state.event for state in self._states if state.event is not None]
        return tuple(sorted([*self._closed, *still_open], key=lambda event: event.raised_ms))

    def phase(self, rule: AlarmRule) -> Phase:
        """The phase of a rule; raises KeyError for one that is not watched."""
        for state in self._states:
            if state.rule == rule:
                return state.phase
        raise KeyError(rule.quantity)

    def evaluate(
        self,
        estimates: Callable[[float], Mapping[str, Estimate]],
        at_ms: int,
        *,
        utc_offset_ms: int | None = None,
    ) -> list[AlarmEvent]:
        """Take in the quantities over each window (``estimates(window_s)``) that ends at ``at_ms``.

        ``utc_offset_ms``: add to the time axis to get UTC; None: only the time of day is known. Returns the events
        that were raised or cleared now. Times must not fall from one call to the next.
        """
        changed = []
        for state in self._states:
            value = estimates(state.rule.over_s).get(state.rule.quantity, NOTHING).value
            number = float(value) if isinstance(value, float | int) and math.isfinite(value) else None
            event = _step(state, number, at_ms, _utc(at_ms, utc_offset_ms))
            if event is not None:
                changed.append(event)
                if event.cleared_ms is not None:
                    self._closed.append(event)
        return changed

    def acknowledge(self, quantity: str | None = None) -> int:
        """Mark open events as seen by the user (those of one quantity, or all); returns how many were new."""
        count = 0
        for state in self._states:
            event = state.event
            if event is not None and not event.acknowledged and quantity in (None, event.quantity):
                state.event = replace(event, acknowledged=True)
                count += 1
        return count


def _step(state: _State, value: float | None, at_ms: int, at_utc: str) -> AlarmEvent | None:
    """Move one rule on; returns the event that was raised or cleared, if any."""
    rule = state.rule
    if value is None:
        if state.phase in ("pending", "clearing"):
            state.phase = "quiet" if state.phase == "pending" else "raised"
        return None
    if state.phase in ("quiet", "pending"):
        if not rule.beyond(value):
            state.phase = "quiet"
            return None
        if state.phase == "quiet":
            state.phase, state.since_ms, state.worst = "pending", at_ms, value
        state.worst = rule.worse(state.worst, value)
        return _raised(state, at_ms, at_utc) if at_ms - state.since_ms >= rule.hold_s * 1000 else None
    assert state.event is not None
    if rule.worse(state.event.worst, value) != state.event.worst:
        state.event = replace(state.event, worst=value)
    if not rule.recovered(value):
        state.phase = "raised"
        return None
    if state.phase == "raised":
        state.phase, state.since_ms = "clearing", at_ms
    if at_ms - state.since_ms < max(rule.hold_s, CLEAR_S) * 1000:
        return None
    event = replace(state.event, cleared_ms=at_ms, cleared_utc=at_utc)
    state.phase, state.event = "quiet", None
    return event


def _raised(state: _State, at_ms: int, at_utc: str) -> AlarmEvent:
    rule = state.rule
    state.phase = "raised"
    state.event = AlarmEvent(
        quantity=rule.quantity,
        severity=rule.severity,
        limit=rule.limit,
        worst=state.worst,
        raised_ms=at_ms,
        cleared_ms=None,
        raised_utc=at_utc,
        cleared_utc=None,
        note=rule.note,
    )
    return state.event


def _utc(at_ms: int, utc_offset_ms: int | None) -> str:
    return utc.time_of_day(at_ms) if utc_offset_ms is None else utc.iso(at_ms + utc_offset_ms)
