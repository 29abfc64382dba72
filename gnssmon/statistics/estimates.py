"""From evenly spaced samples to an estimate with an interval that respects their correlation."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from gnssmon.estimators import long_run, uncertainty
from gnssmon.quantities import NOTHING, Estimate

Samples = npt.NDArray[np.generic]


def mean_estimate(
    samples: Samples,
    confidence: float,
    *,
    value: float | None = None,
    count: int | None = None,
    least: float = -math.inf,
) -> Estimate:
    """The mean of ``samples`` (n,), no NaN among them; NOTHING without any, no interval where they are too few.

    ``value`` and ``count``: where the mean itself is known better, from more numbers than the samples.
    ``least``: what no mean of such numbers can fall below.
    """
    if not len(samples):
        return NOTHING if value is None else Estimate(value, None, confidence, count or 0)
    numbers = samples.astype(np.float64)
    value = float(numbers.mean()) if value is None else value
    count = len(numbers) if count is None else count
    error = long_run.mean_error(numbers)
    if error is None:
        return Estimate(value, (value, value) if _still(numbers) else None, confidence, count)
    half = error.half_width(confidence)
    effective = uncertainty.effective_samples(float(numbers.var()), error, len(numbers))
    return Estimate(value, (max(value - half, least), value + half), confidence, count, effective)


def quantile_estimate(samples: Samples, share: float, confidence: float, *, value: float | None = None) -> Estimate:
    """The quantile of ``samples`` (n,) in order of time, no NaN among them, between neighbours in proportion.

    ``value``: where the quantile itself is known better.
    """
    if not len(samples):
        return NOTHING if value is None else Estimate(value, None, confidence)
    numbers = samples.astype(np.float64)
    ordered = np.sort(numbers)
    found = uncertainty.ordered_quantile(ordered, share)
    value = found if value is None else value
    if _still(numbers):
        return Estimate(value, (value, value), confidence, len(numbers))
    below = (numbers <= found).astype(np.float64)
    held = float(below.mean())
    if held == 1.0:  # Many samples of the largest value: the quantile is one of them.
        below = (numbers < found).astype(np.float64)
        held = float(below.mean())
    trials = uncertainty.effective_trials(held, long_run.mean_error(below), confidence, len(numbers))
    if math.isnan(trials):
        return Estimate(value, None, confidence, len(numbers))
    interval = uncertainty.quantile_interval(ordered, share, trials, confidence)
    if interval is not None:
        interval = min(interval[0], value), max(interval[1], value)
    return Estimate(value, interval, confidence, len(numbers), trials)


def _still(numbers: npt.NDArray[np.float64]) -> bool:
    """Whether enough samples never moved: then no more of them would tell anything else."""
    return len(numbers) >= long_run.FEWEST_SAMPLES and float(np.ptp(numbers)) == 0.0
