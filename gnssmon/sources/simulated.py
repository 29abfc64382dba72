"""A simulated receiver as a source: as fast as the machine can, or at a pace."""

from __future__ import annotations

import math
from collections.abc import Iterator

from gnssmon.chunks import Chunk, joined
from gnssmon.clocks import Clock
from gnssmon.errors import ConfigurationError, SourceError
from gnssmon.simulation.generator import Generator
from gnssmon.simulation.scenario import load_scenario
from gnssmon.sources.source import WAIT_S, Kind, Source

LONGEST_S = 31 * 86_400.0
"""A paced simulation that nobody stops ends after a month."""

JOINED_BYTES = 262_144
"""Unpaced, epochs are handed on together: a monitor takes a block at once more cheaply than its epochs."""

SEED = 1


class Simulated(Source):
    """The bytes of a scenario, with their simulated times of arrival."""

    kind: Kind = "simulated"

    def __init__(self, name: str, clock: Clock, *, label: str | None = None, seed: int = SEED) -> None:
        """Open a scenario by name or file. Raises SourceError."""
        super().__init__(label or f"sim:{name}")
        try:
            self.scenario = load_scenario(name)
        except ConfigurationError as error:
            raise SourceError(str(error)) from error
        self.baud = self.scenario.stream.baud
        self._clock = clock
        self._seed = seed
        self.rate = math.inf
        """Simulated seconds per second; infinite: as fast as the machine can. May be changed before ``chunks``."""
        self.duration_s: float | None = None
        """Length of the run; None: the scenario's own, or without end when paced."""

    def chunks(self) -> Iterator[Chunk]:
        paced = math.isfinite(self.rate)
        duration_s = self.duration_s or (LONGEST_S if paced else self.scenario.duration_s)
        run = Generator(self.scenario, duration_s=duration_s, seed=self._seed)
        try:
            yield from self._paced(run) if paced else self._unpaced(run)
        finally:
            self.state = "ended"

    def _unpaced(self, run: Generator) -> Iterator[Chunk]:
        waiting: list[Chunk] = []
        size = 0
        for arrival_s, data in run.chunks():
            if self._closing:
                return
            waiting.append(Chunk(data, arrival_s))
            size += len(data)
            if size >= JOINED_BYTES:
                self.consumed += size
                yield joined(waiting)
                waiting, size = [], 0
        if waiting:
            self.consumed += size
            yield joined(waiting)

    def _paced(self, run: Generator) -> Iterator[Chunk]:
        begun = self._clock.steady()
        first_s = self.scenario.stream.start_ms / 1000.0
        for arrival_s, data in run.chunks():
            due = begun + (arrival_s - first_s) / self.rate
            while (left := due - self._clock.steady()) > 0.0 and not self._closing:
                self._clock.sleep(min(left, WAIT_S))
            if self._closing:
                return
            self.consumed += len(data)
            yield Chunk(data, arrival_s)
