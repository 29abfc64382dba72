"""Alarms: raise after the hold time, clear well inside the limit, never flap, keep a bounded list."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gnssmon.alarms.rules import AlarmRule, default_alarms
from gnssmon.alarms.states import CLEAR_S, MOST_EVENTS, AlarmEvent, AlarmStates
from gnssmon.quantities import NOTHING, Estimate

NAME = "dop.hdop_median"


def _run(states: AlarmStates, values: Sequence[float | None], from_s: int = 0) -> list[AlarmEvent]:
    """One value a second; everything that was raised or cleared."""
    changed: list[AlarmEvent] = []
    for second, value in enumerate(values, from_s):
        known = {NAME: NOTHING if value is None else Estimate(value)}
        changed += states.evaluate(lambda window_s, known=known: known, second * 1000)
    return changed


RULE = AlarmRule(quantity=NAME, above=4.0, clear=3.0, hold_s=5.0, severity="serious", note="why")


def test_raises_after_the_hold_time_and_clears_after_it():
    """Beyond the limit for 5 s raises; inside the clearing limit for 10 s clears; the worst value is kept."""
    states = AlarmStates((RULE,))

    changed = _run(states, [1.0] * 3 + [5.0] * 5 + [7.0] * 3 + [2.0] * 12)

    raised, cleared = changed
    assert (raised.raised_ms, raised.cleared_ms, raised.limit, raised.severity) == (8000, None, 4.0, "serious")
    assert (cleared.raised_ms, cleared.cleared_ms, cleared.worst) == (8000, 21_000, 7.0)
    assert states.events == (cleared,)
    assert states.phase(RULE) == "quiet"


def test_shorter_than_the_hold_time_is_no_alarm():
    """A spike that is over before the hold time raises nothing."""
    states = AlarmStates((RULE,))

    assert _run(states, [1.0, 5.0, 5.0, 5.0, 5.0, 1.0] * 20) == []


def test_between_the_limits_an_alarm_stays():
    """Inside the raising limit but not yet inside the clearing one, it is still raised."""
    states = AlarmStates((RULE,))

    changed = _run(states, [5.0] * 10 + [3.5] * 100)

    assert len(changed) == 1
    assert states.phase(RULE) == "raised"


def test_unknown_neither_raises_nor_clears():
    """A quantity that cannot be computed proves nothing in either direction."""
    states = AlarmStates((RULE,))

    assert _run(states, [5.0, None] * 20) == []
    assert len(_run(states, [5.0] * 10, 100)) == 1
    assert _run(states, [None] * 100, 200) == []
    assert _run(states, [1.0] * 5 + [None] + [1.0] * 5, 300) == []
    assert states.phase(RULE) == "clearing"


def test_below_works_the_other_way_round():
    """A level that falls raises; the worst is the lowest."""
    rule = AlarmRule(quantity=NAME, below=38.0, clear=40.0)
    states = AlarmStates((rule,))

    changed = _run(states, [45.0, 37.0, 30.0, 39.0] + [41.0] * 12)

    assert [(event.raised_ms, event.cleared_ms, event.worst) for event in changed] == [
        (1000, None, 37.0),
        (1000, 14_000, 30.0),
    ]


@given(
    st.lists(st.floats(-1.0, 1.0), min_size=50, max_size=300),
    st.floats(0.0, 30.0),
    st.floats(0.0, 0.8),
)
@settings(max_examples=60, deadline=None)
def test_never_flaps_at_the_limit(noise, hold_s, gap):
    """However a value swings about the limit, two raisings are apart by both hold times at least; and a value that
    never gets inside the clearing limit raises one alarm only."""
    rule = AlarmRule(quantity=NAME, above=4.0, clear=4.0 - gap, hold_s=hold_s)
    changed = _run(AlarmStates((rule,)), [4.0 + value for value in noise])

    raised = [event.raised_ms for event in changed if event.cleared_ms is None]
    apart_ms = 1000 * (hold_s + max(hold_s, CLEAR_S))
    assert all(later - earlier >= apart_ms for earlier, later in itertools.pairwise(raised))
    if min(noise) > -gap:
        assert len(raised) <= 1
    if max(noise) <= 0.0:
        assert raised == []


@given(st.lists(st.one_of(st.none(), st.floats(allow_nan=True, allow_infinity=True)), max_size=80))
@settings(max_examples=60, deadline=None)
def test_raising_and_clearing_alternate(values):
    """Whatever comes, each event is raised once and cleared at most once, in that order, and the list says the same."""
    states = AlarmStates((RULE,))

    changed = _run(states, values)

    assert [event.cleared_ms is None for event in changed] == [k % 2 == 0 for k in range(len(changed))]
    assert len(states.events) == -(-len(changed) // 2)
    assert all(math.isfinite(event.worst) for event in states.events)


def test_list_of_events_is_bounded():
    """A stream that raises for ever does not grow the memory; the latest events stay."""
    states = AlarmStates((AlarmRule(quantity=NAME, above=4.0),))

    changed = _run(states, ([5.0] + [1.0] * 11) * (MOST_EVENTS + 5))

    assert len(changed) == 2 * (MOST_EVENTS + 5)
    assert len(states.events) == MOST_EVENTS
    assert states.events[-1] == changed[-1]


def test_acknowledging_marks_the_open_events():
    """An open event is marked once; the mark stays when it clears; a new event is not marked."""
    states = AlarmStates((RULE,))
    _run(states, [5.0] * 10)

    assert (states.acknowledge("stream.gaps"), states.acknowledge(), states.acknowledge()) == (0, 1, 0)
    _run(states, [1.0] * 20 + [5.0] * 10, 10)
    assert [event.acknowledged for event in states.events] == [True, False]


def test_instants_are_utc_where_a_date_is_known():
    """With an offset of the axis the event carries date and time, without one the time of day."""
    dated, undated = AlarmStates((RULE,)), AlarmStates((RULE,))
    for second in (0, 5):
        (dated.evaluate(lambda w: {NAME: Estimate(9.0)}, second * 1000, utc_offset_ms=1_747_719_000_000))
        (undated.evaluate(lambda w: {NAME: Estimate(9.0)}, 86_400_000 + second * 1000))

    assert dated.events[0].raised_utc == "2025-05-20T05:30:05.000Z"
    assert undated.events[0].raised_utc == "T00:00:05.000Z"


def test_each_rule_looks_over_its_own_window():
    """The estimates are asked for by the window of the rule."""
    rules = (RULE, AlarmRule(quantity=NAME, above=4.0, over_s=60.0))
    states = AlarmStates(rules)
    known = {10.0: {NAME: Estimate(1.0)}, 60.0: {NAME: Estimate(9.0)}}

    states.evaluate(known.__getitem__, 0)

    assert states.windows_s == (10.0, 60.0)
    assert [states.phase(rule) for rule in rules] == ["quiet", "raised"]


def test_default_alarms_follow_the_published_times():
    """No position: caution after 3 s, warning after 7 s (IMO MSC.401(95), 3.12 to 3.14); HDOP above 4 (1.1)."""
    rules = {(rule.quantity, rule.over_s): rule for rule in default_alarms()}

    assert rules["fix.share_none", 3.0].severity == "warning"
    assert rules["fix.share_none", 7.0].severity == "serious"
    assert rules["dop.hdop_median", 10.0].above == 4.0
    with pytest.raises(KeyError):
        AlarmStates(()).phase(RULE)
