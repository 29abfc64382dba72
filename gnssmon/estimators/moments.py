"""Count, mean and covariance of vectors, which merge."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]


@dataclass(slots=True)
class Moments:
    """Count, mean and co-moments of vectors of ``dimension`` numbers.

    ``mean`` is (d,); ``comoment`` is (d, d), the sum of outer products of deviations from the mean.
    Source: Chan, Golub & LeVeque, "Algorithms for computing the sample variance", Am. Stat. 37 (1983), eq. 2.1.
    """

    dimension: int
    count: int = 0
    mean: Floats = field(default_factory=lambda: np.zeros(0))
    comoment: Floats = field(default_factory=lambda: np.zeros((0, 0)))

    def __post_init__(self) -> None:
        if not self.count:
            self.mean = np.zeros(self.dimension)
            self.comoment = np.zeros((self.dimension, self.dimension))

    def update(self, values: Floats) -> None:
        """Take in ``values`` of shape (n, d); n may be 0."""
        if len(values):
            mean = values.mean(axis=0)
            deviation = values - mean
            self.merge(Moments(self.dimension, len(values), mean, deviation.T @ deviation))

    def merge(self, other: Moments) -> None:
        """Take in what ``other`` saw; ``other`` stays as it is."""
        if not other.count:
            return
        total = self.count + other.count
        step = other.mean - self.mean
        self.comoment = self.comoment + other.comoment + np.outer(step, step) * (self.count * other.count / total)
        self.mean = self.mean + step * (other.count / total)
        self.count = total

    @property
    def covariance(self) -> Floats:
        """Sample covariance (n - 1), shape (d, d); NaN with fewer than two vectors."""
        if self.count < 2:
            return np.full_like(self.comoment, np.nan)
        return self.comoment / (self.count - 1)
