"""Fix and errors: which quality each epoch has, how old its corrections are, how far it is off.

The receiver goes from no fix over autonomous and differential or float to fixed, and back as corrections age or
satellites go. Errors per axis are sums of white noise and two Gauss-Markov processes, by fix quality, times the
dilution of precision against a usual one. Sizes: makers' figures and common practice, no source.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.simulation.noise import GaussMarkov
from gnssmon.simulation.scenario import Scenario

Floats = npt.NDArray[np.float64]

NONE, AUTONOMOUS, DIFFERENTIAL, FIXED, FLOAT = 0, 1, 2, 4, 5
FAST_S, SLOW_S = {AUTONOMOUS: 600.0, FIXED: 60.0}, {AUTONOMOUS: 10_800.0, FIXED: 1200.0}


@dataclass(frozen=True, slots=True)
class Sizes:
    """Standard deviations of the parts of a horizontal error at a usual geometry, m."""

    white_m: float
    fast_m: float
    slow_m: float


SIZES = {
    AUTONOMOUS: Sizes(0.05, 0.5, 0.7),
    DIFFERENTIAL: Sizes(0.05, 0.25, 0.3),
    FLOAT: Sizes(0.01, 0.08, 0.12),
    FIXED: Sizes(0.002, 0.004, 0.005),
}
UP_FACTOR = 1.6
USUAL_HDOP = 0.7
FEWEST = 4
"""Satellites for a fix."""
REACQUISITION_S = 2.0
LOST_FIXED_S, LOST_FLOAT_S = 10.0, 60.0
"""Age of corrections at which fixed ambiguities, and all use of them, end."""


class Errors:
    """East, north, up errors epoch by epoch."""

    def __init__(self, scenario: Scenario, step_s: float, rng: np.random.Generator) -> None:
        self._scale = scenario.receiver.error_scale
        self._rng = rng
        self._parts = {
            kind: (
                GaussMarkov(3, time_constant_s=FAST_S[kind], step_s=step_s, rng=rng),
                GaussMarkov(3, time_constant_s=SLOW_S[kind], step_s=step_s, rng=rng),
            )
            for kind in (AUTONOMOUS, FIXED)
        }

    def take(self, quality: npt.NDArray[np.int64], hdop: Floats, vdop: Floats) -> Floats:
        """Errors of the next epochs, m, shape (n, 3); zeros without a fix."""
        count = len(quality)
        white = self._rng.standard_normal((count, 3))
        parts = {kind: [process.take(count) for process in pair] for kind, pair in self._parts.items()}
        error = np.zeros((count, 3))
        for code, size in SIZES.items():
            fast, slow = parts[FIXED if code == FIXED else AUTONOMOUS]
            value = size.white_m * white + size.fast_m * fast + size.slow_m * slow
            error = np.where((quality == code)[:, None], value, error)
        stretch = np.column_stack([hdop, hdop, vdop * UP_FACTOR / 1.5]) / USUAL_HDOP
        return np.asarray(self._scale * error * np.where(np.isfinite(stretch), stretch, 1.0))


class Fixing:
    """The receiver's own state: when it has a fix, of which quality, with corrections how old."""

    def __init__(self, scenario: Scenario) -> None:
        self._receiver = scenario.receiver
        self._ready_s = scenario.receiver.time_to_first_fix_s
        self._powered = True
        self._lost_s = -1.0
        self._fresh_s = -1.0
        """When corrections began to be used without a break; -1: not in use."""
        self._last_s = -1e9
        """Time to which the latest corrections refer."""

    def step(
        self, time_s: float, satellites: int, *, powered: bool, blocked: bool, corrections: bool
    ) -> tuple[int, float]:
        """Quality and age of corrections (s, NaN none) at the next epoch."""
        receiver = self._receiver
        if powered and not self._powered:
            self._ready_s = time_s + receiver.time_to_first_fix_s
        self._powered = powered
        if corrections and powered:
            every = max(receiver.correction_interval_s, 1e-3)
            sent = (time_s - receiver.correction_latency_s) // every * every
            self._last_s = max(self._last_s, sent)
        if not powered or blocked or satellites < FEWEST:
            self._lost_s, self._fresh_s = time_s, -1.0
            return NONE, np.nan
        if time_s < self._ready_s or (self._lost_s >= 0.0 and time_s - self._lost_s < REACQUISITION_S):
            return NONE, np.nan
        if receiver.mode == "autonomous":
            return AUTONOMOUS, np.nan
        age_s = time_s - self._last_s
        if age_s > LOST_FLOAT_S:
            self._fresh_s = -1.0
            return AUTONOMOUS, np.nan
        if self._fresh_s < 0.0:
            self._fresh_s = time_s
        if receiver.mode == "differential":
            return DIFFERENTIAL, age_s
        if age_s > LOST_FIXED_S:
            # Ambiguities are lost with old corrections and have to be found again.
            self._fresh_s = time_s
            return FLOAT, age_s
        begun_so = self._fresh_s <= 0.0 and not receiver.time_to_first_fix_s
        settled = begun_so or time_s - self._fresh_s >= receiver.float_s
        return (FIXED if settled else FLOAT), age_s
