"""A simulated receiver as a source, as fast as the machine can; ``replay.player`` gives it a pace."""

from __future__ import annotations

from collections.abc import Iterator
from urllib.parse import parse_qsl

from gnssmon import utc
from gnssmon.chunks import Chunk, joined
from gnssmon.errors import ConfigurationError, SourceError
from gnssmon.printable import printable
from gnssmon.simulation.generator import Generator
from gnssmon.simulation.scenario import load_scenario
from gnssmon.sources.source import Kind, Source

JOINED_BYTES = 65_536
"""Epochs are handed on together: a monitor takes a block at once more cheaply than its epochs one by one."""


class Simulated(Source):
    """The bytes of a scenario, with their simulated times of arrival."""

    kind: Kind = "simulated"

    def __init__(self, label: str, target: str) -> None:
        """Open ``SCENARIO`` or ``SCENARIO?seed=7&duration=24h``, a name or a file.

        Raises SourceError, and ConfigurationError for what cannot be read as a duration or as a scenario file.
        """
        super().__init__(label)
        name, _, settings = target.partition("?")
        self._seed = 1
        self._duration_s: float | None = None
        for key, value in parse_qsl(settings, keep_blank_values=True):
            if key == "seed" and value.isdecimal():
                self._seed = int(value)
            elif key == "duration":
                self._duration_s = utc.parse_duration_s(value)
            else:
                raise SourceError(
                    f"'{printable(f'{key}={value}', 60)}' is not known to a simulation; such as 'seed=7', 'duration=24h'"
                )
        try:
            self.scenario = load_scenario(name)
        except ConfigurationError as error:
            raise SourceError(str(error)) from error
        self.baud = self.scenario.stream.baud

    def chunks(self) -> Iterator[Chunk]:
        waiting: list[Chunk] = []
        size = 0
        try:
            for arrival_s, data in Generator(self.scenario, duration_s=self._duration_s, seed=self._seed).chunks():
                if self._closing:
                    return
                waiting.append(Chunk(data, arrival_s))
                size += len(data)
                self.consumed += len(data)
                if size >= JOINED_BYTES:
                    yield joined(waiting)
                    waiting, size = [], 0
            if waiting:
                yield joined(waiting)
        finally:
            self.state = "ended"
