"""Position-like noise with known truth, for coverage tests. The models are those of the accuracy requirement.

Ornstein-Uhlenbeck processes are drawn exactly at the sampling instants: x(t+dt) = r x(t) + √(1-r²) e, r = exp(-dt/T).
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt
from scipy.signal import lfilter

Floats = npt.NDArray[np.float64]


def slow(rng: np.random.Generator, time_constant_s: float, runs: int, count: int, step_s: float) -> Floats:
    """Unit Ornstein-Uhlenbeck process (AR(1)), shape (runs, count)."""
    r = math.exp(-step_s / time_constant_s)
    innovation = rng.standard_normal((runs, count)) * math.sqrt(1.0 - r * r)
    innovation[:, 0] /= math.sqrt(1.0 - r * r)
    return np.asarray(lfilter([1.0], [1.0, -r], innovation, axis=1))


def rtk_like(rng: np.random.Generator, runs: int, count: int, step_s: float) -> Floats:
    """White 2 mm + 4 mm over 60 s + 5 mm over 20 min, in metres."""
    return (
        0.002 * rng.standard_normal((runs, count))
        + 0.004 * slow(rng, 60.0, runs, count, step_s)
        + 0.005 * slow(rng, 1200.0, runs, count, step_s)
    )


def autonomous_like(rng: np.random.Generator, runs: int, count: int, step_s: float) -> Floats:
    """White 5 cm + 0.5 m over 10 min + 0.7 m over 3 h, in metres."""
    return (
        0.05 * rng.standard_normal((runs, count))
        + 0.5 * slow(rng, 600.0, runs, count, step_s)
        + 0.7 * slow(rng, 10_800.0, runs, count, step_s)
    )
