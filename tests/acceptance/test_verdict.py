"""Met, not met, undecided; accept, reject, undecided; forecasts."""

from __future__ import annotations

import math

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from gnssmon.acceptance.criteria import CriteriaSet, Criterion
from gnssmon.acceptance.verdict import Judged, Verdict, in_words, judge
from gnssmon.quantities import Estimate, exact

NAME = "scatter.r95_m"


def _verdict(criterion: Criterion, estimate: Estimate, duration_s: float = 3600.0) -> Verdict:
    known = {NAME: estimate}
    return judge(CriteriaSet(name="test", criteria=(criterion,)), lambda confidence: known, duration_s=duration_s)


def _judged(criterion: Criterion, estimate: Estimate, duration_s: float = 3600.0) -> Judged:
    return _verdict(criterion, estimate, duration_s).criteria[0]


AT_MOST, AT_LEAST = Criterion(quantity=NAME, at_most=3.0), Criterion(quantity=NAME, at_least=3.0)
EQUALS = Criterion(quantity=NAME, equals=3.0, within=1.0)


@pytest.mark.parametrize(
    ("criterion", "interval", "expected"),
    [
        (AT_MOST, (1.0, 2.0), "met"),
        (AT_MOST, (1.0, 3.0), "met"),
        (AT_MOST, (2.9, 3.1), "undecided"),
        (AT_MOST, (3.0, 3.1), "undecided"),
        (AT_MOST, (3.1, 4.0), "not met"),
        (AT_LEAST, (3.0, 4.0), "met"),
        (AT_LEAST, (2.0, 3.1), "undecided"),
        (AT_LEAST, (1.0, 2.9), "not met"),
        (EQUALS, (2.0, 4.0), "met"),
        (EQUALS, (1.9, 3.0), "undecided"),
        (EQUALS, (1.0, 5.0), "undecided"),
        (EQUALS, (0.0, 1.9), "not met"),
        (EQUALS, (4.1, 5.0), "not met"),
    ],
)
def test_whole_interval_decides(criterion, interval, expected):
    """Met: all of the interval inside the limit (its edge included); not met: all of it outside."""
    judged = _judged(criterion, Estimate(sum(interval) / 2, interval))

    assert judged.result == expected
    assert bool(judged.reason) == (expected == "undecided")


def test_exact_quantity_decides_at_once():
    """A count has an interval of no width: it is met or not, never undecided."""
    assert _judged(AT_MOST, exact(3.0)).result == "met"
    assert _judged(AT_MOST, exact(3.0001)).result == "not met"


@pytest.mark.parametrize(
    ("estimate", "reason"),
    [
        (Estimate(None), "could not be computed"),
        (Estimate(math.nan, (1.0, 2.0)), "could not be computed"),
        (Estimate((1.0, None)), "could not be computed"),
        (Estimate(1.0), "too short to say"),
        (Estimate(1.0, (math.nan, 2.0)), "too short to say"),
    ],
)
def test_what_is_not_known_is_undecided_with_a_reason(estimate, reason):
    """Neither a missing value nor a missing interval is ever taken for a good one."""
    judged = _judged(AT_MOST, estimate)

    assert judged.result == "undecided"
    assert reason in judged.reason


def test_quantity_that_nobody_computed_is_undecided():
    """A member of a family that never came (a signal not received) has no estimate at all."""
    criteria = CriteriaSet(name="test", criteria=(Criterion(quantity="cn0.mean_dbhz.E5a", at_least=40.0),))

    assert judge(criteria, lambda confidence: {}, duration_s=10.0).verdict == "undecided"


def test_least_duration_is_waited_for_with_a_forecast():
    """Before the least duration nothing is decided, however clear; the forecast is what is missing."""
    criterion = Criterion(quantity=NAME, at_most=3.0, minimum_duration_s=1800.0)

    judged = _judged(criterion, Estimate(1.0, (0.9, 1.1)), duration_s=600.0)

    assert (judged.result, judged.needed_s) == ("undecided", 1200.0)
    assert "30 min" in judged.reason


def test_a_day_of_epochs_is_a_day():
    """86 400 epochs at 1 Hz last 86 399 s from first to last, and cover 24 h all the same."""
    criterion = Criterion(quantity=NAME, at_most=3.0, minimum_duration_s=86_400.0)
    known = {NAME: exact(1.0), "stream.interval_s": exact(1.0)}

    verdict = judge(CriteriaSet(name="t", criteria=(criterion,)), lambda confidence: known, duration_s=86_399.0)

    assert verdict.verdict == "accept"


def test_forecast_follows_the_square_root_of_time():
    """Half width 1.0 at distance 0.5 from the limit: four times the time is needed, so three times as much more."""
    judged = _judged(AT_MOST, Estimate(2.5, (1.5, 3.5)), duration_s=1000.0)

    assert judged.needed_s == pytest.approx(3000.0)


def test_forecast_of_a_share_never_seen_follows_time_itself():
    """No event in n trials: the upper end is about 3/n (rule of three, Hanley & Lippman-Hand, JAMA 249, 1983)."""
    criterion = Criterion(quantity="fix.share_none", at_most=0.01)
    known = {"fix.share_none": Estimate(0.0, (0.0, 0.03))}

    verdict = judge(CriteriaSet(name="t", criteria=(criterion,)), lambda confidence: known, duration_s=100.0)

    assert verdict.needed_s == pytest.approx(200.0)


def test_forecast_of_a_spread_is_made_on_a_logarithmic_scale():
    """From a fourth to the fourfold, the limit at the double: half the logarithm, so four times the time."""
    judged = _judged(AT_MOST, Estimate(1.5, (1.5 / 4.0, 1.5 * 4.0)), duration_s=1000.0)

    assert judged.needed_s == pytest.approx(3000.0)


def test_value_on_the_limit_has_no_forecast():
    """Who stands on the limit cannot say when it will be decided."""
    assert _judged(AT_MOST, Estimate(3.0, (2.0, 4.0))).needed_s is None


def test_run_accepts_only_when_all_are_met():
    """One not met rejects whatever the others say; one undecided holds the acceptance back; none accepts nothing."""
    good, bad, open_ = ((Criterion(quantity=NAME, at_most=limit)) for limit in (4.0, 1.0, 2.5))
    known = {NAME: Estimate(2.2, (2.0, 3.0))}

    def verdict(*criteria: Criterion) -> str:
        return judge(CriteriaSet(name="t", criteria=criteria), lambda confidence: known, duration_s=60.0).verdict

    assert verdict(good) == "accept"
    assert verdict(good, open_) == "undecided"
    assert verdict(good, open_, bad) == "reject"
    assert verdict() == "undecided"


def test_each_criterion_is_judged_at_its_own_confidence():
    """A criterion that asks for more confidence is held against the wider interval."""
    criteria = CriteriaSet(
        name="t",
        criteria=(
            Criterion(quantity=NAME, at_most=3.0, confidence=0.9),
            Criterion(quantity=NAME, at_most=3.0, confidence=0.99),
        ),
    )
    known = {0.9: {NAME: Estimate(2.0, (1.5, 2.5))}, 0.99: {NAME: Estimate(2.0, (0.5, 3.5))}}

    judged = judge(criteria, known.__getitem__, duration_s=60.0).criteria

    assert [one.result for one in judged] == ["met", "undecided"]


@given(st.floats(-10, 10), st.floats(0, 5), st.floats(0, 5), st.floats(-10, 10))
@example(1e-200, 1.0, 1.0, 0.0)
@example(3.0, 1.0, 0.0, 3.0)
def test_widening_an_interval_never_decides(value, below, above, limit):
    """What is undecided stays so, and what is met never becomes not met, when the interval grows."""
    for criterion in (Criterion(quantity=NAME, at_most=limit), Criterion(quantity=NAME, at_least=limit)):
        narrow = _judged(criterion, Estimate(value, (value - below / 2, value + above / 2))).result
        wide = _judged(criterion, Estimate(value, (value - below, value + above))).result

        assert wide in (narrow, "undecided")


@pytest.mark.parametrize(
    ("seconds", "words"),
    [
        (0, "0 s"),
        (89, "89 s"),
        (90, "2 min"),
        (3599, "1 h"),
        (12_000, "3 h 20 min"),
        (7200, "2 h"),
        (187_200, "2 d 4 h"),
    ],
)
def test_lengths_of_time_read_as_people_say_them(seconds, words):
    """No more digits than a person would say."""
    assert in_words(seconds) == words
