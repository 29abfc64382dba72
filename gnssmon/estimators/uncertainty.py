"""How far a number from correlated samples can be trusted."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
Interval = tuple[float, float]

TERMS = 8
"""Cosine terms that measure the slowest movement seen in a record."""
MOST_BLOCKS = 2048
"""Records are averaged down to this many blocks first: the slow cosines cannot tell the difference."""
FEWEST_SAMPLES = 3 * TERMS
"""Below this many samples nothing is said."""
FLOOR_FREEDOM = 8.0


@dataclass(frozen=True, slots=True)
class SlowError:
    """What is known beforehand of errors slower than any record shows: their size and how long they last."""

    sigma: float
    time_constant_s: float

    def mean_variance(self, duration_s: float) -> float:
        """Variance of the mean over a record of this length."""
        u = duration_s / self.time_constant_s
        return self.sigma**2 * (1.0 if u < 1e-6 else 2.0 / u - 2.0 * (1.0 - math.exp(-u)) / u**2)


def student(confidence: float, freedom: float) -> float:
    """Two-sided factor of Student's t distribution."""
    from scipy.special import stdtrit

    return float(stdtrit(freedom, 0.5 + confidence / 2.0))


def normal(confidence: float) -> float:
    """Two-sided factor of the normal distribution: 1.96 for 95 %."""
    from scipy.special import ndtri

    return float(ndtri(0.5 + confidence / 2.0))


def blocks(values: Floats) -> Floats:
    """Means of at most ``MOST_BLOCKS`` nearly equal stretches; ``values`` has shape (n,) or (n, d)."""
    if len(values) <= MOST_BLOCKS:
        return values
    edge = np.linspace(0, len(values), MOST_BLOCKS + 1).astype(np.intp)
    size = np.diff(edge).astype(np.float64)
    sums = np.add.reduceat(values, edge[:-1], axis=0)
    return np.asarray(sums / (size if values.ndim == 1 else size[:, None]))


def cosines(count: int, terms: int) -> Floats:
    """Type-II cosines over ``count`` samples, shape (terms, count), each of mean square 1."""
    phase = np.pi * (np.arange(count) + 0.5) / count
    return np.asarray(math.sqrt(2.0) * np.cos(np.outer(np.arange(1, terms + 1), phase)))


def mean_covariance(values: Floats) -> Floats:
    """Covariance of the mean of correlated samples of shape (n, d)."""
    coarse = blocks(values)
    weights = cosines(len(coarse), TERMS) @ (coarse - coarse.mean(axis=0)) / len(coarse)
    return np.asarray(weights.T @ weights / TERMS)


def effective_samples(values: Floats) -> float:
    """How many independent samples the mean of these, shape (n,), is worth; NaN where too few to say."""
    if len(values) < FEWEST_SAMPLES:
        return math.nan
    of_mean = float(mean_covariance(values[:, None])[0, 0])
    variance = float(values.var(ddof=1))
    if of_mean <= 0.0 or variance <= 0.0:
        return math.nan
    return min(max(variance / of_mean, 1.0), float(len(values)))


def mean_error(mean_variance: float, slow_variance: float, confidence: float) -> float:
    """Half width of the interval of a mean, from the variance that the record shows and the one known beforehand.

    Degrees of freedom by Welch & Satterthwaite (JCGM 100:2008, G.4.1).
    """
    total = mean_variance + slow_variance
    if total <= 0.0:
        return 0.0
    freedom = total**2 / (mean_variance**2 / TERMS + slow_variance**2 / FLOOR_FREEDOM)
    return student(confidence, freedom) * math.sqrt(total)


def spread_interval(spread: float, effective: float, confidence: float, *, dimensions: int = 1) -> Interval | None:
    """Interval of a standard deviation, or of a root of a sum of ``dimensions`` like variances."""
    from scipy.special import chdtri

    freedom = dimensions * (effective - 1.0)
    if not freedom > 1.0:
        return None
    tail = (1.0 - confidence) / 2.0
    return (
        spread * math.sqrt(freedom / float(chdtri(freedom, tail))),
        spread * math.sqrt(freedom / float(chdtri(freedom, 1.0 - tail))),
    )


def ordered_quantile(ordered: Floats, share: float) -> float:
    """Quantile of rising values, between neighbours in proportion (Hyndman & Fan type 7, NumPy's ``linear``)."""
    position = min(max(share, 0.0), 1.0) * (len(ordered) - 1)
    low = int(position)
    high = min(low + 1, len(ordered) - 1)
    return float(ordered[low] + (ordered[high] - ordered[low]) * (position - low))


def quantile_interval(ordered: Floats, share: float, effective: float, confidence: float) -> Interval | None:
    """Interval of the quantile at ``share`` from the order statistics ``ordered``; None: too few to have one."""
    if not effective > 1.0:
        return None
    tail = (1.0 - confidence) / 2.0
    # The largest of too few samples may well lie below the quantile, the smallest above it.
    if share**effective > tail or (1.0 - share) ** effective > tail:
        return None
    half = normal(confidence) * math.sqrt(share * (1.0 - share) / effective)
    return ordered_quantile(ordered, share - half), ordered_quantile(ordered, share + half)


def length_interval(length: float, half_width: float, confidence: float) -> Interval:
    """Interval of the length of a plane vector whose two components are each known to ``half_width``.

    The measured length follows a Rice distribution; its parameter is bracketed by the tails (non-central chi-square
    with two degrees of freedom).
    """
    from scipy.special import chndtr, chndtrinc

    if half_width <= 0.0:
        return length, length
    sigma = half_width / normal(confidence)
    tail = (1.0 - confidence) / 2.0
    square = (length / sigma) ** 2
    if square > 1e4:
        return length - half_width, length + half_width
    low = math.sqrt(float(chndtrinc(square, 2.0, 1.0 - tail))) if chndtr(square, 2.0, 0.0) > 1.0 - tail else 0.0
    high = math.sqrt(float(chndtrinc(square, 2.0, tail))) if chndtr(square, 2.0, 0.0) > tail else 0.0
    return sigma * low, sigma * high


def share_interval(successes: float, effective: float, confidence: float) -> Interval:
    """Interval of a share by Clopper & Pearson with an effective number of trials (which need not be whole)."""
    from scipy.special import betaincinv

    tail = (1.0 - confidence) / 2.0
    k, n = successes, effective
    low = 0.0 if k <= 0.0 else float(betaincinv(k, n - k + 1.0, tail))
    high = 1.0 if k >= n else float(betaincinv(k + 1.0, n - k, 1.0 - tail))
    return low, high


def count_interval(count: int, confidence: float) -> Interval:
    """Interval of the expected number of events when ``count`` were seen (Garwood 1936).

    Nothing seen has no lower limit by that method; Jeffreys' one is used then, so that a rate keeps an upper limit.
    """
    from scipy.special import chdtri

    tail = (1.0 - confidence) / 2.0
    low = float(chdtri(2.0 * count if count else 1.0, 1.0 - tail)) / 2.0
    return low, float(chdtri(2.0 * count + 2.0, tail)) / 2.0
