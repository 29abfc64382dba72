"""Correlated noise that goes on from block to block: first-order Gauss-Markov (Ornstein-Uhlenbeck) processes."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]


class GaussMarkov:
    """``width`` independent processes of unit variance and one time constant, sampled every ``step_s``."""

    def __init__(self, width: int, *, time_constant_s: float, step_s: float, rng: np.random.Generator) -> None:
        self._rho = math.exp(-step_s / time_constant_s)
        self._rng = rng
        self._last = rng.standard_normal(width)

    def take(self, count: int) -> Floats:
        """The next samples, shape (count, width): x_k = ρ x_(k-1) + √(1 - ρ²) w_k."""
        values = self._rng.standard_normal((count, len(self._last))) * math.sqrt(1.0 - self._rho**2)
        # A loop in Python over whole rows: scipy's filter would be no faster here, and takes a second to import.
        last = self._last
        for row in values:
            row += self._rho * last
            last = row
        if count:
            self._last = values[-1].copy()
        return values
