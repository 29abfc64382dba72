"""All events of a scenario together, at each of some times of a run."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from gnssmon.simulation.happenings import Kind
from gnssmon.simulation.scenario import Scenario

Floats = npt.NDArray[np.float64]


class Timeline:
    """What happens at times of a run; ``i`` counts them."""

    def __init__(self, scenario: Scenario, seed: int, time_s: Floats) -> None:
        self.time_s = time_s
        self._scenario = scenario
        self._strength = [event.strength(time_s, (seed, place)) for place, event in enumerate(scenario.event)]
        self._flags: dict[str, npt.NDArray[np.bool_]] = {}
        receiver = scenario.receiver
        bias_m = np.array([receiver.bias_east_m, receiver.bias_north_m, receiver.bias_up_m])
        self.offset_m = np.tile(bias_m, (len(time_s), 1))
        """East, north, up: errors that the scenario names."""
        self.clock_s = np.zeros(len(time_s))
        self.bit_errors = np.zeros(len(time_s))
        for event, strength in zip(scenario.event, self._strength, strict=True):
            if event.kind in ("jump", "base_change"):
                self.offset_m += strength[:, None] * np.array([event.east_m, event.north_m, event.up_m])
            elif event.kind == "clock_jump":
                self.clock_s += strength * event.seconds
            elif event.kind == "bit_errors":
                self.bit_errors += strength * event.rate

    def flags(self, kind: Kind) -> npt.NDArray[np.bool_]:
        """Whether an event of this kind holds, by time."""
        if kind not in self._flags:
            flags = np.zeros(len(self.time_s), dtype=bool)
            for event, strength in zip(self._scenario.event, self._strength, strict=True):
                if event.kind == kind:
                    flags |= strength > 0.0
            self._flags[kind] = flags
        return self._flags[kind]

    def on(self, kind: Kind, i: int) -> bool:
        return bool(self.flags(kind)[i])

    def text(self, i: int) -> str:
        for event, strength in zip(self._scenario.event, self._strength, strict=True):
            if event.kind == "text" and strength[i] > 0.0:
                return event.text
        return ""

    def station(self, i: int) -> int:
        for event, strength in zip(self._scenario.event, self._strength, strict=True):
            if event.kind == "base_change" and strength[i] > 0.0:
                return event.station_id
        return self._scenario.receiver.station_id
