"""Looking often: the parts of the error add up, and a run at the limit is seldom decided wrongly."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gnssmon.acceptance.sequential import FIRST_S, Looks
from tests.benchmarks.sequential_error_rates import Case, level, rates


@given(st.floats(1.0, 1e6), st.floats(0.5, 0.999))
def test_looks_spend_no_more_than_the_error(longest_s, asked):
    """The error of all looks together is what the criterion allows, neither more nor less."""
    looks = Looks(longest_s)

    spent = sum(1.0 - looks.confidence(number)(asked) for number in range(len(looks.times_s)))

    assert spent == pytest.approx(1.0 - asked)


@given(st.floats(1.0, 1e6), st.integers(0, 8))
def test_an_early_end_may_spend_what_is_left(longest_s, taken):
    """A log that is over after some looks: what these have not spent is spent at the end."""
    looks = Looks(longest_s)
    taken = min(taken, len(looks.times_s) - 1)

    spent = sum(1.0 - looks.confidence(number)(0.95) for number in range(taken))

    assert spent + 1.0 - looks.confidence_at_end(taken)(0.95) == pytest.approx(0.05)


def test_spending_follows_the_published_function():
    """Lan & DeMets (1983), the form like Pocock's: α ln(1 + (e - 1) t); at half the time 0.05 ln(1.859) = 0.0310."""
    looks = Looks(14_400.0)
    half = looks.times_s.index(7200.0)

    spent = sum(1.0 - looks.confidence(number)(0.95) for number in range(half + 1))

    assert spent == pytest.approx(0.05 * math.log(1.0 + (math.e - 1.0) * 0.5))
    assert spent == pytest.approx(0.0310, abs=0.0001)


def test_looks_are_few_and_end_with_the_run():
    """Each look comes at twice the time of the one before; none before five minutes; the last is the end."""
    times = Looks(86_400.0).times_s

    assert times[-1] == 86_400.0
    assert times[0] >= FIRST_S
    assert all(later == 2 * earlier for earlier, later in itertools.pairwise(times))
    assert Looks(60.0).times_s == (60.0,)


def test_run_at_the_limit_is_seldom_decided_wrongly():
    """Levels with fades of five minutes, the truth on the limit, nine looks in a day: 5 % nominal. Of 150 runs more
    than 15 have a chance of 0.5 % at 5 %. Looking as often with 95 % intervals decides wrongly three times as often.
    The full table is a benchmark: tests/benchmarks/sequential_error_rates.py."""
    case = Case("level", "cn0.mean_dbhz", 0.0, 1.0, level(300.0))

    found = rates(case, Looks(86_400.0), 150, np.random.default_rng(3))

    assert (found["accept"] + found["reject"]) * 150 <= 15
    assert found["naive"] > 0.15
    assert found["right"] > 0.95
