"""Which signals a receiver tracks and which satellites it uses, second by second.

A signal is lost when it falls below the tracking threshold, and found again once it has been stronger by a margin for
a while. After a cold start satellites are found one after another; a satellite serves the fix when its main signal
has been tracked long enough to read its orbit, stands above the mask and is strong enough. Geostationary
augmentation satellites are tracked but not used for ranging.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from gnssmon.simulation.scenario import ReceiverTruth

Floats = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]

MARGIN_DB = 2.0
"""Above the tracking threshold, for a signal to be found again."""
EPHEMERIS_S = 30.0
"""From the first tracking of a satellite to its use: GPS sends its orbit within 30 s (IS-GPS-200)."""
SEARCH_SHARE = (0.1, 0.9)
"""After a cold start a satellite is found within this part of the time to first fix."""
NEVER = np.inf


class Tracking:
    """The state of a receiver's channels, from second to second."""

    def __init__(
        self, receiver: ReceiverTruth, main: npt.NDArray[np.int64], ranging: Flags, rng: np.random.Generator
    ) -> None:
        """``main``: by satellite, the index of its main signal; ``ranging``: whether it may serve a fix."""
        self._receiver = receiver
        self._main, self._ranging = main, ranging
        self._rng = rng
        self._tracked: Flags = np.zeros((len(main), 0), dtype=bool)
        self._strong_since: Floats = np.zeros((len(main), 0))
        self._found_s = np.full(len(main), NEVER)
        """When the main signal was first tracked; NEVER while it is not known."""
        self._ready_s = np.zeros(len(main))
        # A receiver that is quicker than the satellites' messages has got its orbits elsewhere.
        cold_s = receiver.time_to_first_fix_s
        self._ephemeris_s = min(EPHEMERIS_S, cold_s / 2.0) if cold_s else EPHEMERIS_S
        self._powered = False

    def take(self, time_s: Floats, level: Floats, elevation_deg: Floats, powered: Flags) -> tuple[Flags, Flags]:
        """Signals tracked, shape as ``level`` (t, satellites, channels), and satellites used, shape (t, satellites)."""
        receiver = self._receiver
        heard = np.nan_to_num(level, nan=-np.inf)
        holds = heard >= receiver.tracking_dbhz
        strong = heard >= receiver.tracking_dbhz + MARGIN_DB
        usable = np.take_along_axis(heard, self._main[None, :, None], axis=2)[:, :, 0] >= receiver.use_dbhz
        usable &= (elevation_deg >= receiver.mask_deg) & self._ranging
        tracked, used = np.zeros(level.shape, dtype=bool), np.zeros(usable.shape, dtype=bool)
        rows = np.arange(len(self._main))
        for i, now_s in enumerate(time_s.tolist()):
            if not powered[i]:
                self._powered = False
                continue
            if not self._powered:
                self._start(now_s, holds[i])
            self._strong_since = np.where(strong[i], np.minimum(self._strong_since, now_s), NEVER)
            found = now_s - self._strong_since >= receiver.reacquisition_s
            found &= (now_s >= self._ready_s)[:, None]
            self._tracked = (self._tracked & holds[i]) | found
            here = self._tracked[rows, self._main]
            self._found_s = np.where(here, np.minimum(self._found_s, now_s), self._found_s)
            self._found_s = np.where(elevation_deg[i] < 0.0, NEVER, self._found_s)
            tracked[i] = self._tracked
            used[i] = usable[i] & here & (now_s - self._found_s >= self._ephemeris_s)
        return tracked, used

    def _start(self, now_s: float, holds: Flags) -> None:
        """Power comes on: cold, or with all that is known of the sky still in memory."""
        self._powered = True
        cold_s = self._receiver.time_to_first_fix_s
        drawn = self._rng.uniform(*SEARCH_SHARE, len(self._main))
        self._strong_since = np.full(holds.shape, NEVER)
        if cold_s:
            self._tracked = np.zeros(holds.shape, dtype=bool)
            self._ready_s = now_s + drawn * cold_s
            self._found_s = np.full(len(self._main), NEVER)
            return
        self._tracked = holds
        self._ready_s = np.full(len(self._main), now_s)
        self._found_s = np.where(holds[np.arange(len(self._main)), self._main], now_s - EPHEMERIS_S, self._found_s)
