"""A simulated receiver as a source: ``sim:SCENARIO``, with its seed and length behind it where wanted.

``sim:open_roof?seed=7&duration=24h``. The bytes have the simulated times of arrival; nothing is paced here
(``replay.player`` does that), and silence is told once a simulated second as a live source would.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from urllib.parse import parse_qsl

from gnssmon import utc
from gnssmon.chunks import Chunk, joined
from gnssmon.errors import ConfigurationError, SourceError
from gnssmon.simulation.generator import generate
from gnssmon.simulation.scenario import load_scenario
from gnssmon.sources.source import SILENCE_S, Kind, Source

FIRST_BYTES, MOST_BYTES = 2048, 262_144
"""Pieces are joined to chunks that double from the first to the most: a viewer sees the first epoch at once, a check
of a day is not slowed down by small chunks."""

LONGEST_BURST_S = 0.5
"""What the bytes of one epoch may take on the line without being mistaken for silence in front of them."""

DEFAULT_SEED = 1


class Simulated(Source):
    """The bytes of one run of a scenario; the same text gives the same bytes."""

    kind: Kind = "simulated"

    def __init__(self, label: str, target: str) -> None:
        """Prepare the run. Raises SourceError for an unknown scenario or setting, and for mistakes in its file."""
        super().__init__(label)
        name, _, settings = target.partition("?")
        try:
            self.scenario = load_scenario(name)
            self.seed, self.duration_s = DEFAULT_SEED, self.scenario.duration_s
            for key, value in parse_qsl(settings, keep_blank_values=True):
                if key == "seed" and value.isascii() and value.isdigit():
                    self.seed = int(value[:18])
                elif key == "duration":
                    self.duration_s = utc.parse_duration_s(value)
                else:
                    raise SourceError(f"'{key}={value}' in '{label}' is not known: 'seed=7' and 'duration=24h' are")
        except ConfigurationError as error:
            raise SourceError(str(error)) from error
        self.baud = self.scenario.stream.baud

    def chunks(self) -> Iterator[Chunk]:
        waiting: list[Chunk] = []
        size, most = 0, FIRST_BYTES
        last_s = math.inf
        try:
            for arrival_s, data in generate(self.scenario, duration_s=self.duration_s, seed=self.seed):
                if self._closing:
                    return
                # Times are those of last bytes: a longer burst than the one before is no silence.
                while arrival_s - last_s > SILENCE_S + LONGEST_BURST_S:
                    if waiting:
                        yield joined(waiting)
                        waiting, size = [], 0
                    last_s += SILENCE_S
                    yield Chunk(b"", last_s)
                waiting.append(Chunk(data, arrival_s))
                size += len(data)
                self.consumed += len(data)
                last_s = arrival_s
                if size >= most:
                    yield joined(waiting)
                    waiting, size, most = [], 0, min(2 * most, MOST_BYTES)
            if waiting:
                yield joined(waiting)
        finally:
            self.state = "ended"
