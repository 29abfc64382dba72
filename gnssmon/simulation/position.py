"""Fix and errors: which quality each epoch has, how old its corrections are, how far it is off.

The receiver goes from no fix over autonomous and differential or float to fixed, and back as corrections age or
satellites go. Errors per axis are sums of white noise and two Gauss-Markov processes, by fix quality, times the axis's
own dilution of precision against a usual one. Sizes: makers' figures and common practice, no source.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.simulation.noise import GaussMarkov
from gnssmon.simulation.scenario import ReceiverTruth

Floats = npt.NDArray[np.float64]

NONE, AUTONOMOUS, DIFFERENTIAL, FIXED, FLOAT, ESTIMATED = 0, 1, 2, 4, 5, 6
"""Quality indicators of GGA."""


@dataclass(frozen=True, slots=True)
class Errors:
    """Parts of an error per axis at a dilution of precision of USUAL_DOP: standard deviation, m, and time constant."""

    white_m: float
    fast_m: float
    fast_s: float
    slow_m: float
    slow_s: float

    def std_m(self) -> float:
        """Standard deviation of the sum."""
        return float(np.sqrt(self.white_m**2 + self.fast_m**2 + self.slow_m**2))


CODE_S, CARRIER_S = (600.0, 10_800.0), (60.0, 1200.0)
"""Time constants of errors: of the code (atmosphere, orbits, multipath), of the carrier."""

ERRORS = {
    AUTONOMOUS: Errors(0.05, 0.50, CODE_S[0], 0.70, CODE_S[1]),
    DIFFERENTIAL: Errors(0.05, 0.25, CODE_S[0], 0.30, CODE_S[1]),
    FLOAT: Errors(0.01, 0.08, CODE_S[0], 0.12, CODE_S[1]),
    FIXED: Errors(0.002, 0.004, CARRIER_S[0], 0.005, CARRIER_S[1]),
    ESTIMATED: Errors(0.20, 2.00, CODE_S[0], 2.00, CODE_S[1]),
}
USUAL_DOP = 0.5
"""East or north, four systems under open sky; up is about twice that."""
FEWEST = 4
"""Satellites for a fix."""
RECOVERY_S = 2.0
"""From enough satellites to a fix, when it was lost."""
LOST_FIXED_S, LOST_FLOAT_S = 10.0, 60.0
"""Age of corrections at which fixed ambiguities, and all use of them, end."""


UNUSED = np.inf


class Wandering:
    """East, north, up errors epoch by epoch."""

    def __init__(self, scale: float, step_s: float, rng: np.random.Generator) -> None:
        self._scale = scale
        self._rng = rng
        self._processes = {
            times: tuple(GaussMarkov(3, time_constant_s=t, step_s=step_s, rng=rng) for t in times)
            for times in (CODE_S, CARRIER_S)
        }

    def take(self, quality: npt.NDArray[np.int64], dops: Floats) -> Floats:
        """Errors of the next epochs, m, shape (n, 3); zeros without a fix. ``dops`` (n, 3): EDOP, NDOP, VDOP."""
        count = len(quality)
        white = self._rng.standard_normal((count, 3))
        parts = {times: [process.take(count) for process in pair] for times, pair in self._processes.items()}
        error_m = np.zeros((count, 3))
        for code, size in ERRORS.items():
            fast, slow = parts[(size.fast_s, size.slow_s)]
            value = size.white_m * white + size.fast_m * fast + size.slow_m * slow
            error_m = np.where((quality == code)[:, None], value, error_m)
        stretch = np.where(np.isfinite(dops), dops / USUAL_DOP, 1.0)
        return np.asarray(self._scale * error_m * stretch)


class Fixing:
    """The receiver's own state: when it has a fix, of which quality, with corrections how old."""

    def __init__(self, receiver: ReceiverTruth) -> None:
        self._receiver = receiver
        self._ready_s = receiver.time_to_first_fix_s
        self._powered = True
        self.settled = not receiver.time_to_first_fix_s
        """Since power came on it has had a fix, or it has kept what it knew: it knows time and sky."""
        self._short_s = -np.inf
        """When satellites last were too few."""
        self._fresh_s = UNUSED
        """When corrections began to be used without a break; UNUSED: they are not."""
        self._last_s = -np.inf
        """Time to which the latest corrections refer."""
        self._fixed_s = -np.inf
        """Time of the last fix."""

    def step(
        self, time_s: float, satellites: int, *, powered: bool, blocked: bool, corrections: bool
    ) -> tuple[int, float]:
        """Quality and age of corrections (s, NaN none) at the next epoch."""
        receiver = self._receiver
        if powered and not self._powered:
            self._ready_s = time_s + receiver.time_to_first_fix_s
            self.settled = not receiver.time_to_first_fix_s
            self._fixed_s = -np.inf
        self._powered = powered
        if corrections and powered:
            every_s = receiver.correction_interval_s
            self._last_s = max(self._last_s, (time_s - receiver.correction_latency_s) // every_s * every_s)
        if not powered or blocked or satellites < FEWEST:
            self._short_s, self._fresh_s = time_s, UNUSED
            coasts = powered and time_s - self._fixed_s <= receiver.coasting_s
            return (ESTIMATED if coasts else NONE), np.nan
        if time_s < self._ready_s or time_s - self._short_s < RECOVERY_S:
            return NONE, np.nan
        self.settled, self._fixed_s = True, time_s
        return self._corrected(time_s)

    def _corrected(self, time_s: float) -> tuple[int, float]:
        receiver = self._receiver
        age_s = time_s - self._last_s
        if receiver.mode == "autonomous":
            return AUTONOMOUS, np.nan
        if age_s > LOST_FLOAT_S:
            self._fresh_s = UNUSED
            return AUTONOMOUS, np.nan
        if self._fresh_s == UNUSED:
            # A run that begins with a fix begins with ambiguities long since fixed.
            self._fresh_s = time_s if time_s > 0.0 else -np.inf
        if receiver.mode == "differential":
            return DIFFERENTIAL, age_s
        if age_s > LOST_FIXED_S:
            # Ambiguities are lost with old corrections and have to be found again.
            self._fresh_s = time_s
            return FLOAT, age_s
        return (FIXED if time_s - self._fresh_s >= receiver.float_s else FLOAT), age_s
