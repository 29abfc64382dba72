"""What happens to a site while a run lasts: one table of the timeline, and how strong it is at any time."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

import numpy as np
import numpy.typing as npt

from gnssmon.configuration import Duration
from gnssmon.constellations.systems import SIGNALS
from gnssmon.errors import ConfigurationError
from gnssmon.printable import printable
from gnssmon.simulation.constellations import LETTERS

Floats = npt.NDArray[np.float64]

LABELS = tuple(dict.fromkeys(signal.label for signal in SIGNALS if signal.letter in LETTERS))
"""Signals that can be simulated."""

Kind = Literal[
    "interference", "cable_loss", "blockage", "repeater", "no_corrections", "base_change", "no_fix", "frozen",
    "silence", "jump", "clock_jump", "power_cycle", "bit_errors", "text"
]  # fmt: skip
WITH_LOSS = ("interference", "cable_loss", "blockage")

FOR_EVER_S = 1e12
FLICKER_S = 4.0
"""A flickering contact opens or closes this often."""
FLICKER_SHARE = 0.5
"""Of the time that it is open."""
PASSING_WIDTH = 0.18
"""Of a passing transmitter's strength: standard deviation of a bell over the event's duration."""


def known_label(label: str) -> None:
    """Raise ConfigurationError for a label that no simulated signal has."""
    if label not in LABELS:
        raise ConfigurationError(f"signal '{printable(label, 20)}' is not simulated; known: {', '.join(LABELS)}")


@dataclass(frozen=True, slots=True, kw_only=True)
class Event:
    """Something that happens, from ``at`` on for a time."""

    kind: Kind
    at_s: Duration = field(metadata={"key": "at"})
    """Since the start of the run."""
    for_s: Duration = field(default=FOR_EVER_S, metadata={"key": "for"})
    """Without: to the end."""
    every_s: Duration = field(default=0.0, metadata={"key": "every"})
    """Comes again after so long; 0: once."""
    shape: Literal["step", "ramp", "passing", "flicker"] = "step"
    """Step: full depth at once. Ramp: grows to its full depth. Passing: comes and goes as a vehicle does. Flicker: on
    and off at random, as a loose contact."""
    depth_db: float = 10.0
    """Loss of C/N0, for interference, cable_loss, blockage."""
    bands: tuple[str, ...] = ()
    """Labels that interference or a loss falls on; none: all."""
    azimuth_from_deg: float = 0.0
    azimuth_to_deg: float = 360.0
    elevation_deg: float = 90.0
    """Upper edge of a blockage."""
    east_m: float = 0.0
    north_m: float = 0.0
    up_m: float = 0.0
    """Of a jump of the position, or of the change of base."""
    station_id: int = 102
    """Of the new base."""
    seconds: float = 0.0
    """Of a clock jump."""
    rate: float = 1e-4
    """Of bit errors."""
    text: str = ""
    """Of a TXT sentence, sent once in ten seconds."""

    def __post_init__(self) -> None:
        for label in self.bands:
            known_label(label)
        if self.for_s <= 0.0 or (self.every_s and self.every_s < self.for_s):
            raise ConfigurationError("'for' is more than 0, and 'every', where given, is not shorter than 'for'")
        if self.shape in ("ramp", "passing") and self.for_s >= FOR_EVER_S:
            raise ConfigurationError(f"the shape '{self.shape}' needs 'for': how long it takes")
        if self.kind in WITH_LOSS and not 0.0 <= self.depth_db <= 100.0:
            raise ConfigurationError(f"depth_db = {self.depth_db:g} lies between 0 and 100")
        if not 0.0 <= self.elevation_deg <= 90.0:
            raise ConfigurationError("elevation_deg lies between 0 and 90")
        if not 0.0 <= self.rate <= 1.0:
            raise ConfigurationError("rate lies between 0 and 1")
        if self.kind == "text" and not self.text:
            raise ConfigurationError("an event of the kind 'text' needs a text")
        if any(not " " <= letter <= "~" or letter in "$!*,\\^~" for letter in self.text):
            raise ConfigurationError("a text holds plain characters but $ ! * , \\ ^ ~")

    def occurrences(self, end_s: float, *, most: int = 1000) -> list[tuple[float, float]]:
        """Begin and end of each time it happens before ``end_s``, s of the run; at most so many."""
        found: list[tuple[float, float]] = []
        begin_s = self.at_s
        while begin_s < end_s and len(found) < most:
            found.append((begin_s, min(begin_s + self.for_s, end_s)))
            if not self.every_s:
                break
            begin_s += self.every_s
        return found

    def strength(self, time_s: Floats, key: tuple[int, int]) -> Floats:
        """Strength from 0 to 1 at times of the run, shape as ``time_s``; ``key`` (seed, place) rules what is random."""
        since = time_s - self.at_s
        begun = since >= 0.0
        if self.every_s:
            since = since % self.every_s
        strength = (begun & (since < self.for_s)).astype(np.float64)
        if self.shape == "ramp":
            strength *= since / self.for_s
        elif self.shape == "passing":
            strength *= np.exp(-0.5 * ((since / self.for_s - 0.5) / PASSING_WIDTH) ** 2)
        elif self.shape == "flicker" and strength.any():
            slot = np.floor(time_s / FLICKER_S).astype(np.int64)
            for number in np.unique(slot[strength > 0.0]).tolist():
                # Each slot has a generator of its own, so that the answer is a function of time alone.
                drawn = np.random.default_rng([*key, number]).random(2)
                strength[slot == number] *= (drawn[0] < FLICKER_SHARE) * (0.5 + 0.5 * drawn[1])
        return strength
