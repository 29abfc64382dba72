"""Intervals of shares, quantiles, spreads, counts and lengths, given how much correlated samples are worth.

The error of a mean comes from ``long_run``; everything else is reduced to it. A share is the mean of an indicator; a
quantile is where a share is reached; a variance is the mean of squares. So each has an effective number of samples of
its own: slow errors hurt a mean more than a spread, and a spread more than the far end of a quantile.
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from gnssmon.estimators.long_run import Error

Floats = npt.NDArray[np.float64]
Interval = tuple[float, float]

FEWEST = 2.0
"""Below so many effective trials order statistics say nothing at all."""
SLOWEST = 0.75
"""Largest share of a variance that the movement of the mean is believed to have taken away."""


class Scale(NamedTuple):
    """Factors on a spread for the ends of its interval."""

    low: float
    high: float
    """``given_back`` included."""
    given_back: float
    """What the mean about which the spread was taken has taken away, 1/√(1 - 1/effective)."""


def normal(confidence: float) -> float:
    """Two-sided factor of the normal distribution: 1.96 for 95 %."""
    from scipy.special import ndtri

    return float(ndtri(0.5 + confidence / 2.0))


def effective_samples(variance: float, error: Error | None, count: int) -> float:
    """How many independent samples the mean of ``count`` is worth; NaN: too few to say, or no movement at all."""
    if error is None or not variance > 0.0:
        return math.nan
    return min(max(variance / error.shown_variance, 1.0), float(count))


def effective_trials(
    share: float, error: Error | None, confidence: float, count: int, *, effective: float = math.inf
) -> float:
    """How many independent trials a share is worth, its uncertainty included, so that binomial intervals with this
    number hold ``confidence``; NaN: too few to say.

    ``effective``: effective samples of a mean that the share depends on (see ``scale``).
    """
    half = 0.0 if error is None or math.isnan(effective) else error.half_width(confidence) * _few(effective)
    return min(share * (1.0 - share) * (normal(confidence) / half) ** 2, float(count)) if half > 0.0 else math.nan


def _few(effective: float) -> float:
    """Widening for few effective samples.

    Squares of a few slow swings are skewed: where they happen to be small, so is their apparent uncertainty. One part
    in the effective number restores the coverage (simulation: tests/benchmarks/interval_coverage.py).
    """
    return 1.0 + 1.0 / effective


def scale(mean_square: float, error: Error | None, confidence: float, *, effective: float) -> Scale | None:
    """Factors on a root mean square, and on any spread that grows with it, on a logarithmic scale.

    ``error``: of the mean of the squares. ``effective``: effective samples of the mean about which the squares were
    taken. None: too few to say.
    """
    if error is None or not mean_square > 0.0 or math.isnan(effective):
        return None
    half = min(0.5 * error.half_width(confidence) / mean_square * _few(effective), 50.0)
    given_back = 1.0 / math.sqrt(1.0 - min(1.0 / effective, SLOWEST))
    return Scale(math.exp(-half), math.exp(half) * given_back, given_back)


def ordered_quantile(ordered: Floats, share: float) -> float:
    """Quantile of rising values, between neighbours in proportion (Hyndman & Fan type 7, NumPy's ``linear``)."""
    position = min(max(share, 0.0), 1.0) * (len(ordered) - 1)
    low = int(position)
    high = min(low + 1, len(ordered) - 1)
    return float(ordered[low] + (ordered[high] - ordered[low]) * (position - low))


def quantile_interval(
    ordered: Floats, share: float, trials: float, confidence: float, *, spread: Scale | None = None
) -> Interval | None:
    """Interval of the quantile at ``share`` of rising values from their order statistics.

    ``trials``: effective trials of the share below the quantile. The largest of too few samples may well lie below the
    quantile: 72 independent ones are needed for a two-sided 95 % interval of the 95 % quantile (Hahn & Meeker,
    Statistical Intervals); with fewer the interval is None, unless ``spread`` is given: for distances from a mean it
    takes in what is known of the spread as a whole.
    """
    if math.isnan(trials):
        return None
    tail = (1.0 - confidence) / 2.0
    half = normal(confidence) * math.sqrt(share * (1.0 - share) / trials)
    low, high = ordered_quantile(ordered, share - half), ordered_quantile(ordered, share + half)
    if spread is None:
        return None if share**trials > tail or (1.0 - share) ** trials > tail else (low, high)
    value = ordered_quantile(ordered, share)
    if trials < FEWEST:
        return value * spread.low, value * spread.high
    return min(low, value * spread.low), max(high * spread.given_back, value * spread.high)


def share_interval(share: float, trials: float, confidence: float) -> Interval:
    """Interval of a share by Clopper & Pearson with an effective number of trials, which need not be whole."""
    from scipy.special import betaincinv

    tail = (1.0 - confidence) / 2.0
    hits = share * trials
    low = 0.0 if share <= 0.0 else float(betaincinv(hits, trials - hits + 1.0, tail))
    high = 1.0 if share >= 1.0 else float(betaincinv(hits + 1.0, trials - hits, 1.0 - tail))
    return low, high


def count_interval(count: int, confidence: float) -> Interval:
    """Interval of the expected number of events when ``count`` were seen (F. Garwood, Biometrika 28, 1936).

    Nothing seen has no lower limit by that method; Jeffreys' one is used then, so that a rate keeps an upper limit.
    """
    from scipy.special import chdtri

    tail = (1.0 - confidence) / 2.0
    low = float(chdtri(2.0 * count if count else 1.0, 1.0 - tail)) / 2.0
    return low, float(chdtri(2.0 * count + 2.0, tail)) / 2.0


def length_interval(length: float, half_width: float, confidence: float) -> Interval:
    """Interval of the length of a plane vector whose two components are each known to ``half_width``.

    The measured length follows a Rice distribution; its parameter is bracketed by the tails (non-central chi-square
    with two degrees of freedom).
    """
    from scipy.special import chdtr, chndtrinc

    if half_width <= 0.0:
        return length, length
    sigma = half_width / normal(confidence)
    tail = (1.0 - confidence) / 2.0
    square = (length / sigma) ** 2
    if square > 1e4:
        return length - half_width, length + half_width
    below = float(chdtr(2.0, square))  # if the true length were zero
    low = math.sqrt(float(chndtrinc(square, 2.0, 1.0 - tail))) if below > 1.0 - tail else 0.0
    high = math.sqrt(float(chndtrinc(square, 2.0, tail))) if below > tail else 0.0
    return sigma * low, sigma * high


def vector_chance(components: tuple[float, ...], half_widths: tuple[float, ...], confidence: float) -> float:
    """Probability that chance alone gives a vector this far from zero, components independent (chi-square)."""
    from scipy.special import chdtrc

    factor = normal(confidence)
    square = sum(
        (component / half * factor) ** 2 if half > 0.0 else math.inf if component else 0.0
        for component, half in zip(components, half_widths, strict=True)
    )
    return float(chdtrc(float(len(components)), square))
