"""How well a mean or a slope is known from a correlated record: errors slower than the record included.

Strategy. A record's own slow movements tell how much its mean may be off; faster noise does not matter, for it averages
out. So the record is reduced to its mean and the weights of its first ``TERMS`` cosines (half a wave in the record, one
wave, one and a half, …). For an Ornstein-Uhlenbeck (first-order Gauss-Markov) process the variance of the mean and of
each weight is known in closed form, so the cosines measure the process and the process says how far the mean may be
off. Its time constant is not known either: all from the whole record to a small part of it are weighed by how well they
explain the cosines (Bayes, equal prior weight per octave). No record can show errors slower than itself; those enter as
a prior (``SlowError``), a second process of known time constant and roughly known size, which the cosines of a long
record may shrink or raise. The answer is a mixture of normal or Student distributions.

Sources: cosine weights as a measure of long-run variance, U. K. Müller, "A theory of robust long-run variance
estimation", J. Econometrics 141 (2007), and E. Lazarus, D. J. Lewis, J. H. Stock & M. W. Watson, "HAR inference:
recommendations for practice", J. Bus. Econ. Stat. 36 (2018); the weighing of time constants is our own. The prior as a
type B evaluation: JCGM 100:2008 (GUM), 4.3. Measured coverage: tests/benchmarks/interval_coverage.py.
"""

from __future__ import annotations

import functools
import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]

TERMS = 36
"""Cosines used: with fewer the time constant is too uncertain, with more the noise need not be of one time constant."""
SAMPLES_PER_TERM = 3
FEWEST_SAMPLES = 24
"""Below this many samples nothing is said."""
MOST_BLOCKS = 2048
"""Records are averaged down to this many blocks first: the slow cosines cannot tell the difference."""

LONGEST, SHORTEST, TIME_CONSTANTS = 1.0, 10_000.0, 18
"""Record lengths in units of the time constant that are considered, and how many."""
AMPLITUDES = np.geomspace(0.01, 6.0, 20)
"""Variances considered beside a prior, in units of what the cosines alone would say."""
SLOW_FREEDOM = 8.0
"""How sure the prior's size is: as if it came from this many independent values (relative uncertainty 25 %)."""
SLOW_FACTORS = np.geomspace(0.04, 8.0, 12)
"""Factors on the prior's variance that are considered."""
LIKELY = 1e-6
"""Parts of the mixture below this weight are dropped."""
FOREVER = 1e5
"""A record this many times as long is not worth waiting for."""


@dataclass(frozen=True, slots=True)
class SlowError:
    """What is known beforehand of errors too slow for a record to show: standard deviation and time constant."""

    sigma: float
    time_constant_s: float

    def mean_variance(self, duration_s: float) -> float:
        """Variance of the mean over a record of this length."""
        return self.sigma**2 * float(mean_variance(np.array(max(duration_s, 0.0) / self.time_constant_s)))


@dataclass(frozen=True, slots=True)
class Error:
    """What a record tells of the error of its mean (or slope): a mixture, arrays of shape (k,)."""

    shown_variance: float
    """The error's variance as the record alone shows it, typical value; uncertain by some tens of per cent."""
    weight: Floats
    fast: Floats
    """Variance from the record's own process."""
    fast_length: Floats
    """Record length in time constants of that process."""
    slow: Floats
    """Variance from errors too slow to be seen."""
    slow_length: float
    freedom: float
    """Degrees of freedom of each part; infinite: normal."""

    def half_width(self, confidence: float, times: float = 1.0) -> float:
        """Half width of the interval that holds the error with this probability.

        ``times``: for the mean of a record so many times as long, all else as it is.
        """
        from scipy.special import ndtr, ndtri, stdtr

        variance = self.fast + self.slow
        if times != 1.0:
            lengths = self.fast_length
            variance = self.fast * (mean_variance(lengths * times) / mean_variance(lengths))
            length = np.array(self.slow_length)
            variance = variance + self.slow * float(mean_variance(length * times) / mean_variance(length))
        scale = np.sqrt(variance)
        low, high = 0.0, 1e3 * float(scale.max())
        guess = float(ndtri(0.5 + confidence / 2.0)) * float(self.weight @ scale)
        for _ in range(60):
            ratio = guess / scale
            inside = ndtr(ratio) if math.isinf(self.freedom) else stdtr(self.freedom, ratio)
            if 2.0 * float(self.weight @ inside) - 1.0 < confidence:
                low = guess
            else:
                high = guess
            if high - low <= 1e-5 * high:
                break
            # Close to the answer a halving is best; the upper end is far off at first.
            guess = (low + high) / 2.0 if high < 4.0 * low else max(low * 1.5, high / 64.0)
        return (low + high) / 2.0

    def times_until(self, half_width: float, confidence: float) -> float:
        """How many times as long the record must be for the mean to be known so well; infinite: out of reach."""
        if self.half_width(confidence) <= half_width:
            return 1.0
        low, high = 1.0, FOREVER
        if self.half_width(confidence, high) > half_width:
            return math.inf
        while high > 1.005 * low:
            middle = math.sqrt(low * high)
            if self.half_width(confidence, middle) > half_width:
                low = middle
            else:
                high = middle
        return high


def mean_variance(lengths: Floats) -> Floats:
    """Variance of the mean of a unit process over a record of ``lengths`` time constants, shape as given.

    2/u - 2(1 - exp(-u))/u², by its series where u is small.
    """
    u = np.maximum(lengths, 1e-9)
    return np.where(u < 1e-3, 1.0 - u / 3.0 + u**2 / 12.0, 2.0 / u + 2.0 * np.expm1(-u) / u**2)


def cosine_variances(lengths: Floats, terms: int) -> Floats:
    """Variances of the cosine weights of a unit process, shape (len(lengths), terms).

    The weight is the integral of √2 cos(jπt) x(t) over the record's unit of time. With D = u² + j²π²:
    (2u/D)(1 - 2u(1 - (-1)^j exp(-u))/D), from the boundary value problem that the exponential kernel solves.
    """
    u = np.maximum(lengths, 1e-6)[:, None]
    j = np.arange(1, terms + 1)
    d = u**2 + (j * math.pi) ** 2
    return np.asarray(2.0 * u / d * (1.0 - 2.0 * u * (1.0 - (-1.0) ** j * np.exp(-u)) / d))


SLOPE_TERMS = 64


def slope_variance(lengths: Floats) -> Floats:
    """Variance of the least-squares slope per record of a unit process, shape as ``lengths``.

    The slope is 12 ∫ (t - 1/2) x(t) dt, in cosines -12 Σ 2√2/(jπ)² c_j over odd j.
    """
    j = np.arange(1, SLOPE_TERMS + 1)
    gain = np.where(j % 2 == 1, 12.0 * 2.0 * math.sqrt(2.0) / (j * math.pi) ** 2, 0.0)
    return np.asarray(cosine_variances(lengths, SLOPE_TERMS) @ gain**2)


def blocks(values: npt.NDArray[np.generic]) -> Floats:
    """Means of at most ``MOST_BLOCKS`` nearly equal stretches of ``values``, shape (n,)."""
    plain = values.astype(np.float64)
    if len(plain) <= MOST_BLOCKS:
        return plain
    edge = np.linspace(0, len(plain), MOST_BLOCKS + 1).astype(np.intp)
    return np.asarray(np.add.reduceat(plain, edge[:-1]) / np.diff(edge))


@functools.lru_cache(maxsize=8)
def _cosines(count: int, terms: int) -> Floats:
    phase = np.pi * (np.arange(count) + 0.5) / count
    return np.asarray(math.sqrt(2.0) / count * np.cos(np.outer(np.arange(1, terms + 1), phase)))


@dataclass(frozen=True, slots=True)
class _Target:
    """What is asked of a record, and which cosines answer."""

    slope: bool

    def variance(self, lengths: Floats) -> Floats:
        return slope_variance(lengths) if self.slope else mean_variance(lengths)

    @property
    def first(self) -> int:
        # The first cosine is nearly the slope itself: it cannot witness about it.
        return 1 if self.slope else 0


MEAN, SLOPE = _Target(slope=False), _Target(slope=True)


@functools.lru_cache(maxsize=16)
def _candidates(target: _Target, terms: int) -> tuple[Floats, Floats, Floats]:
    """Lengths, variances of the cosines in units of the target's (a row a length), half the log of their product."""
    lengths = np.geomspace(LONGEST, SHORTEST, TIME_CONSTANTS)
    shape = cosine_variances(lengths, terms)[:, target.first :] / target.variance(lengths)[:, None]
    return lengths, shape, 0.5 * np.log(shape).sum(axis=1)


def mean_errors(columns: list[npt.NDArray[np.generic]]) -> list[Error | None]:
    """What records of one length, evenly spaced in time, tell of the errors of their means.

    None for a record that does not move at all, or that has fewer than ``FEWEST_SAMPLES`` samples.
    """
    if not columns or len(columns[0]) < FEWEST_SAMPLES:
        return [None] * len(columns)
    coarse = np.column_stack([blocks(column) for column in columns])
    return [_alone(MEAN, squares) for squares in _squares(coarse).T]


def mean_error(values: Floats, slow: SlowError | None = None, duration_s: float = 0.0) -> Error | None:
    """The same for one record, with errors too slow to be seen as a prior."""
    if len(values) < FEWEST_SAMPLES:
        return None
    return _with_prior(MEAN, _squares(blocks(values)[:, None])[:, 0], slow, duration_s)


def slope_error(values: Floats, slow: SlowError | None = None, duration_s: float = 0.0) -> tuple[float, Error | None]:
    """Slope per record length of evenly spaced ``values`` by least squares, and its error."""
    coarse = blocks(values)
    time = (np.arange(len(coarse)) + 0.5) / len(coarse) - 0.5
    slope = float(time @ coarse) / float(time @ time) if len(coarse) > 1 else 0.0
    if len(values) < FEWEST_SAMPLES:
        return slope, None
    squares = _squares((coarse - slope * time)[:, None])[:, 0]
    return slope, _with_prior(SLOPE, squares[SLOPE.first :], slow, duration_s)


def _squares(coarse: Floats) -> Floats:
    terms = min(TERMS, len(coarse) // SAMPLES_PER_TERM)
    return np.asarray(np.square(_cosines(len(coarse), terms) @ (coarse - coarse.mean(axis=0))))


def _alone(target: _Target, squares: Floats) -> Error | None:
    if not squares.max() > 0.0:
        return None
    terms = len(squares)
    lengths, shape, log_shape = _candidates(target, terms + target.first)
    variance = (1.0 / shape) @ squares / terms
    weight = _normalised(-log_shape - 0.5 * terms * np.log(variance))
    typical = math.exp(float(weight @ np.log(variance)))
    return Error(typical, weight, variance, lengths, np.zeros(len(weight)), 1.0, float(terms))


def _with_prior(target: _Target, squares: Floats, slow: SlowError | None, duration_s: float) -> Error | None:
    alone = _alone(target, squares)
    if slow is None or slow.sigma <= 0.0:
        return alone
    terms = len(squares)
    length = max(duration_s / slow.time_constant_s, 1e-6)
    unit = float(target.variance(np.array([length]))[0])
    hidden = slow.sigma**2 * unit * SLOW_FACTORS
    prior = -0.5 * SLOW_FREEDOM * (np.log(SLOW_FACTORS) + 1.0 / SLOW_FACTORS)
    if alone is None:  # A position that never moves shows nothing, and may be off all the same.
        nothing = np.zeros(len(hidden))
        return Error(0.0, _normalised(prior), nothing, nothing + 1.0, hidden, length, math.inf)
    slow_shape = cosine_variances(np.array([length]), terms + target.first)[0, target.first :] / unit
    lengths, shape, _ = _candidates(target, terms + target.first)
    fast = alone.fast[:, None] * AMPLITUDES  # (time constants, amplitudes)
    variances = fast[:, :, None, None] * shape[:, None, None, :] + hidden[:, None] * slow_shape
    weight = _normalised((-0.5 * (np.log(variances) + squares / variances).sum(axis=-1) + prior).ravel())
    likely = weight > LIKELY
    full = weight.reshape(variances.shape[:-1]).shape
    return Error(
        alone.shown_variance,
        weight[likely] / weight[likely].sum(),
        np.broadcast_to(fast[:, :, None], full).ravel()[likely],
        np.broadcast_to(lengths[:, None, None], full).ravel()[likely],
        np.broadcast_to(hidden, full).ravel()[likely],
        length,
        math.inf,
    )


def _normalised(log_weight: Floats) -> Floats:
    weight = np.exp(log_weight - log_weight.max())
    return np.asarray(weight / weight.sum())
