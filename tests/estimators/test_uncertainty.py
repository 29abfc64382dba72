"""Intervals against published tables, SciPy's distributions and simulation."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import stats

from gnssmon.estimators import long_run, uncertainty
from gnssmon.estimators.uncertainty import Scale
from tests.estimators.noise import slow


@pytest.mark.parametrize(
    ("share", "trials", "low", "high"),
    # Clopper & Pearson (1934) limits as tabulated in textbooks; SciPy's binomtest gives the same.
    [(0.0, 10, 0.0, 0.3085), (0.5, 10, 0.1871, 0.8129), (0.9, 20, 0.6830, 0.9877), (1.0, 30, 0.8843, 1.0)],
)
def test_share(share, trials, low, high):
    """The interval of a share is Clopper & Pearson's."""
    assert uncertainty.share_interval(share, trials, 0.95) == pytest.approx((low, high), abs=2e-4)
    exact = stats.binomtest(round(share * trials), trials).proportion_ci(0.95, "exact")
    assert uncertainty.share_interval(share, trials, 0.95) == pytest.approx((exact.low, exact.high), abs=1e-9)


def test_count():
    """Garwood's interval: three events in ten hours give 1.14 to 16.16 hours between events."""
    fewest, most = uncertainty.count_interval(3, 0.95)

    assert (10.0 / most, 10.0 / fewest) == pytest.approx((1.14061, 16.16365), abs=1e-4)


def test_no_event_keeps_an_upper_limit():
    """Without an event the upper limit of the count is -ln(0.025) = 3.69, the lower one small but not zero."""
    fewest, most = uncertainty.count_interval(0, 0.95)

    assert most == pytest.approx(-math.log(0.025))
    assert 0.0 < fewest < 0.01


def test_quantile_definition():
    """Quantiles of ordered values are NumPy's."""
    values = np.sort(np.random.default_rng(1).normal(size=77))
    for share in (0.0, 0.31, 0.5, 0.95, 1.0):
        assert uncertainty.ordered_quantile(values, share) == pytest.approx(np.quantile(values, share), abs=1e-12)


def test_order_statistics():
    """Hahn & Meeker's ranks for n = 100 and the 95 % quantile are 90 and 100, for n = 1000 they are 936 and 964."""
    for count, low, high in ((100, 90, 100), (1000, 936, 964)):
        interval = uncertainty.quantile_interval(np.arange(1.0, count + 1), 0.95, float(count), 0.95)
        assert interval == pytest.approx((low, high), abs=1.6)


def test_no_upper_limit_from_too_few():
    """A two-sided 95 % interval of the 95 % quantile needs 72 independent values: 0.95^72 is below 0.025."""
    values = np.arange(1.0, 1001)

    assert uncertainty.quantile_interval(values, 0.95, 71.0, 0.95) is None
    assert uncertainty.quantile_interval(values, 0.95, 72.0, 0.95) is not None
    assert uncertainty.quantile_interval(values, 0.95, 71.0, 0.95, spread=Scale(0.8, 1.3, 1.0)) is not None
    assert uncertainty.quantile_interval(values, 0.95, math.nan, 0.95) is None


def test_length_of_a_vector():
    """The interval of a length has the stated coverage for zero, short and long vectors, by simulation."""
    rng = np.random.default_rng(2)
    for truth in (0.0, 1.0, 5.0):
        points = rng.normal(size=(2000, 2)) + np.array([truth, 0.0])
        hits = 0
        for length in np.hypot(*points.T):
            low, high = uncertainty.length_interval(float(length), uncertainty.normal(0.95), 0.95)
            hits += low <= truth <= high or (truth == 0.0 and low == 0.0)
        assert hits / 2000 == pytest.approx(0.95, abs=0.03)
    assert uncertainty.length_interval(1000.0, 1.96, 0.95) == pytest.approx((998.04, 1001.96), abs=0.01)
    assert uncertainty.length_interval(3.0, 0.0, 0.95) == (3.0, 3.0)


def test_chance_of_a_vector():
    """Two components at their 95 % half widths: exp(-3.8415) by the chi-square with two degrees of freedom."""
    assert uncertainty.vector_chance((1.0, -2.0), (1.0, 2.0), 0.95) == pytest.approx(math.exp(-3.841459), rel=1e-5)
    assert uncertainty.vector_chance((1.0,), (1.0,), 0.95) == pytest.approx(0.05, rel=1e-6)
    assert uncertainty.vector_chance((0.0, 0.0), (0.0, 0.0), 0.95) == 1.0


@pytest.mark.parametrize("time_constant_s", [10.0, 300.0])
def test_rings_and_spread_of_correlated_positions(time_constant_s):
    """From six hours of AR(1) positions the 95 % intervals of CEP50, R95 and sigma hold the truth in 92 to 99 %."""
    rng = np.random.default_rng(3)
    runs = 250
    east, north = (slow(rng, time_constant_s, runs, 3600, 6.0) for _ in range(2))
    truths = {0.50: 1.177410, 0.95: 2.447747, 1.0: math.sqrt(2.0)}  # Rayleigh quantiles, DRMS
    hits = dict.fromkeys(truths, 0)
    for e, n in zip(east, north, strict=True):
        square = (e - e.mean()) ** 2 + (n - n.mean()) ** 2
        distance = np.sqrt(square)
        ordered = np.sort(distance)
        errors = long_run.mean_errors(
            [square, distance > np.quantile(distance, 0.5), distance > np.quantile(distance, 0.95), e]
        )
        effective = uncertainty.effective_samples(float(e.var(ddof=1)), errors[3], len(e))
        spread = uncertainty.scale(float(square.mean()), errors[0], 0.95, effective=effective)
        assert spread is not None
        drms = math.sqrt(float(square.mean()))
        hits[1.0] += drms * spread.low <= truths[1.0] <= drms * spread.high
        for share, error in ((0.50, errors[1]), (0.95, errors[2])):
            trials = uncertainty.effective_trials(share, error, 0.95, len(e), effective=effective)
            interval = uncertainty.quantile_interval(ordered, share, trials, 0.95, spread=spread)
            assert interval is not None
            hits[share] += interval[0] <= truths[share] <= interval[1]

    assert all(0.92 <= count / runs <= 0.99 for count in hits.values()), hits
