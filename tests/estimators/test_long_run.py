"""The error of a mean from a correlated record: closed forms, published values, coverage by simulation."""

from __future__ import annotations

import numpy as np
import pytest

from gnssmon.estimators import long_run
from gnssmon.estimators.long_run import SlowError
from tests.estimators.noise import autonomous_like, rtk_like, slow

RTK_PRIOR, AUTONOMOUS_PRIOR = SlowError(0.005, 1200.0), SlowError(0.7, 10_800.0)


def test_variance_of_the_mean():
    """2/u - 2(1 - exp(-u))/u²: values computed apart from this program; 1 and 2/u at the ends."""
    assert long_run.mean_variance(np.array([0.1, 1.0, 10.0, 100.0])) == pytest.approx(
        [0.967484, 0.735759, 0.180001, 0.0198], abs=1e-6
    )
    assert long_run.mean_variance(np.array([0.0, 1e-6, 1e6])) == pytest.approx([1.0, 1.0, 2e-6], rel=1e-5)


@pytest.mark.parametrize("length", [0.5, 3.0, 40.0])
def test_variances_of_cosines_and_slope_by_brute_force(length):
    """The closed forms equal the double sums over the covariance exp(-u|t - s|) on a fine grid."""
    count = 1500
    time = (np.arange(count) + 0.5) / count
    covariance = np.exp(-length * np.abs(time[:, None] - time))
    cosine = np.sqrt(2.0) * np.cos(np.pi * np.outer(np.arange(1, 9), time)) / count
    slope = 12.0 * (time - 0.5) / count

    expected = np.einsum("kt,ts,ks->k", cosine, covariance, cosine)
    assert long_run.cosine_variances(np.array([length]), 8)[0] == pytest.approx(expected, rel=2e-3)
    # Odd cosines of one process are correlated with each other, which the sum leaves out: a few per cent.
    assert long_run.slope_variance(np.array([length]))[0] == pytest.approx(slope @ covariance @ slope, rel=0.12)


def test_effective_samples_of_ar1():
    """AR(1) with ρ = 0.9 and n = 3600 is worth 190 samples (τ = 19; Goodman, notes on the mean of a time series).

    The estimate is a tenth low in the median, because longer time constants explain a record almost as well.
    """
    rng = np.random.default_rng(1)
    records = slow(rng, -1.0 / np.log(0.9), 200, 3600, 1.0)
    shown = [error.shown_variance for error in long_run.mean_errors(list(records)) if error is not None]

    assert len(shown) == 200
    assert float(np.median(records.var(axis=1) / shown)) == pytest.approx(190.0, rel=0.2)


def test_too_short_and_motionless():
    """Fewer samples than needed, or none that move: nothing is said; with a prior the prior is the answer."""
    assert long_run.mean_errors([np.arange(long_run.FEWEST_SAMPLES - 1.0)]) == [None]
    assert long_run.mean_errors([np.zeros(1000)]) == [None]
    assert long_run.mean_error(np.zeros(10), RTK_PRIOR, 10.0) is None

    still = long_run.mean_error(np.full(600, 5.0), RTK_PRIOR, 600.0)

    assert still is not None
    # Student's t with 8 degrees of freedom, 2.306, on 5 mm √g(0.5).
    assert still.half_width(0.95) == pytest.approx(2.306 * 0.005 * np.sqrt(0.8522), rel=0.03)


def test_longer_records_know_better():
    """The forecast's half width falls with time and meets the asked one at the time that it gives."""
    record = rtk_like(np.random.default_rng(2), 1, 3600, 1.0)[0]
    error = long_run.mean_error(record, RTK_PRIOR, 3600.0)
    assert error is not None

    widths = [error.half_width(0.95, times) for times in (1.0, 2.0, 5.0, 20.0)]
    assert widths == sorted(widths, reverse=True)
    times = error.times_until(widths[0] / 2.0, 0.95)
    assert error.half_width(0.95, times) == pytest.approx(widths[0] / 2.0, rel=0.01)
    assert error.times_until(widths[0], 0.95) == 1.0
    assert error.times_until(1e-9, 0.95) == np.inf


def test_units_do_not_matter():
    """Ten times the record, ten times the interval."""
    record = slow(np.random.default_rng(3), 60.0, 1, 3000, 1.0)[0]
    one, ten = long_run.mean_errors([record, 10.0 * record])
    assert one is not None
    assert ten is not None

    assert ten.half_width(0.9) == pytest.approx(10.0 * one.half_width(0.9), rel=1e-4)


def _covered(records: np.ndarray, prior: SlowError | None, duration_s: float) -> int:
    hits = 0
    for record in records:
        error = long_run.mean_error(record, prior, duration_s)
        assert error is not None
        hits += abs(float(record.mean())) <= error.half_width(0.95)
    return hits


@pytest.mark.parametrize("time_constant_s", [10.0, 60.0, 600.0])
def test_coverage_for_one_time_constant(time_constant_s):
    """A 95 % interval from six hours of AR(1) holds the truth in 92 to 98 % of 400 runs.

    1 Hz averaged to 4 s: the slow part that decides is the same. Seeds are fixed; the full table is a benchmark.
    """
    records = slow(np.random.default_rng(4), time_constant_s, 400, 5400, 4.0)

    assert 0.92 <= _covered(records, None, 21_600.0) / 400 <= 0.98


@pytest.mark.parametrize("duration_s", [720.0, 3600.0, 21_600.0, 86_400.0])
@pytest.mark.parametrize(
    ("noise", "prior"), [(rtk_like, RTK_PRIOR), (autonomous_like, AUTONOMOUS_PRIOR)], ids=["rtk", "autonomous"]
)
def test_coverage_with_errors_slower_than_the_record(noise, prior, duration_s):
    """With the prior for slow errors a 95 % interval never holds the truth in less than 92 % of the runs."""
    step_s = max(duration_s / 3600.0, 1.0)
    records = noise(np.random.default_rng(5), 300, round(duration_s / step_s), step_s)

    assert _covered(records, prior, duration_s) / 300 >= 0.92


def test_slope_interval_holds_a_drift():
    """The interval of the slope holds a drift put into the noise, and does not call noise a drift."""
    records = rtk_like(np.random.default_rng(6), 200, 4320, 10.0)
    drift = 0.02  # metres over the record of 12 h
    held = alarms = 0
    for record in records:
        still, error = long_run.slope_error(record, RTK_PRIOR, 43_200.0)
        moving, wider = long_run.slope_error(record + drift * np.linspace(-0.5, 0.5, 4320), RTK_PRIOR, 43_200.0)
        assert error is not None
        assert wider is not None
        alarms += abs(still) > error.half_width(0.95)
        held += abs(moving - drift) <= wider.half_width(0.95)

    assert alarms / 200 <= 0.08
    assert held / 200 >= 0.92
