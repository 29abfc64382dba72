"""The whole core in one object: chunks in, snapshots out. A list of parts; the work is theirs."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import cast

from gnssmon import utc
from gnssmon.acceptance.criteria import CriteriaSet, load_criteria
from gnssmon.acceptance.verdict import judge
from gnssmon.alarms.states import AlarmEvent
from gnssmon.alarms.watching import Watch
from gnssmon.chunks import Chunk
from gnssmon.diagnosis import diagnose
from gnssmon.diagnosis.finding import Facts
from gnssmon.epochs.batch import EpochBatch
from gnssmon.pipeline import Pipeline
from gnssmon.quantities import DEFAULT_CONFIDENCE, Estimate
from gnssmon.receiver import Receiver
from gnssmon.snapshot import Snapshot, SourceFacts, StreamFacts
from gnssmon.statistics import SUBJECTS
from gnssmon.statistics.fix import Fix
from gnssmon.statistics.pictures import Pictures
from gnssmon.statistics.scatter import Scatter
from gnssmon.statistics.signal_level import SignalLevel
from gnssmon.statistics.sky import Sky
from gnssmon.statistics.stream import Stream
from gnssmon.statistics.subject import EVERYTHING, Site, Span, Subject
from gnssmon.statistics.timing import Timing

MOST_EPOCHS = 2000
"""Statistics take closed epochs in portions of this many: a block of a log can hold more, and the matrices of
satellites by epochs would grow with it."""

SILENT_MS = 3000
"""Time after the last epoch before silence counts: alarms must not mistake an epoch under way for a missing one."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Settings:
    """What a run is judged by."""

    site: Site = field(default_factory=Site)
    criteria: CriteriaSet = field(default_factory=lambda: load_criteria(None))


class Monitor:
    """Feed it chunks in stream order; ask it for a snapshot of any span at any time."""

    def __init__(self, settings: Settings, source: SourceFacts) -> None:
        self.settings = settings
        self.source = source
        """Kept up to date by whoever runs the session; copied into each snapshot."""
        self._pipeline = Pipeline()
        self._receiver = Receiver()
        self._subjects: dict[str, Subject] = {name: subject(settings.site) for name, subject in SUBJECTS.items()}
        self._watch = Watch(settings.criteria.alarms, settings.site)
        self._last: tuple[int, float] | None = None
        """Axis time (ms) and arrival (s) of the latest closed epoch."""
        self.news: list[AlarmEvent] = []
        """Alarms raised or cleared by the last ``feed``."""

    def feed(self, chunk: Chunk) -> None:
        """Take in the next bytes, or an empty chunk: silence up to its time."""
        self.news = []
        self._take(self._pipeline.feed(chunk))
        if not chunk.data:
            self._silence(chunk.received_s)

    def finish(self) -> None:
        """The stream has ended: what was still open counts."""
        self.news = []
        self._take(self._pipeline.finish())

    def acknowledge(self) -> int:
        """Mark the open alarms as seen by the user; returns how many were new."""
        return self._watch.states.acknowledge()

    @property
    def now_ms(self) -> int | None:
        """Latest time on the axis; None before the first epoch."""
        return None if self._last is None else self._last[0]

    @property
    def first_ms(self) -> int | None:
        """First time on the axis; None before it is known."""
        first = self._pipeline.extent.first
        return None if first is None else first[0]

    @property
    def duration_s(self) -> float:
        """How much of the time axis has been seen, s."""
        first = self._pipeline.extent.first
        return 0.0 if self._last is None or first is None else max(0.0, (self._last[0] - first[0]) / 1000.0)

    def estimates(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity over the span."""
        found: dict[str, Estimate] = {}
        for subject in self._subjects.values():
            found |= subject.summary(span, confidence=confidence)
        return found

    def snapshot(
        self,
        span: Span = EVERYTHING,
        *,
        window: str = "since start",
        confidence: Callable[[float], float] = lambda asked: asked,
    ) -> Snapshot:
        """Everything a watcher may know, of the span. ``confidence``: see ``acceptance.verdict.judge``."""
        estimates = self.estimates(span)
        duration = estimates["stream.duration_s"].value
        verdict = judge(
            self.settings.criteria,
            lambda level: estimates if level == DEFAULT_CONFIDENCE else self.estimates(span, confidence=level),
            duration_s=duration if isinstance(duration, float) else 0.0,
            confidence=confidence,
        )
        pictures, receiver, stream = self._pictures(span), self._receiver.state(), self._stream()
        facts = Facts(
            estimates=estimates,
            by_type=stream.by_type,
            talkers=stream.talkers,
            pictures=pictures,
            receiver=receiver,
            site=self.settings.site,
        )
        return Snapshot(
            span=span,
            window=window,
            utc_offset_ms=self._pipeline.utc_offset_ms,
            source=self.source,
            site=self.settings.site,
            receiver=receiver,
            stream=stream,
            estimates=estimates,
            pictures=pictures,
            verdict=verdict,
            findings=diagnose(facts),
            alarms=self._watch.events,
        )

    def _take(self, batch: EpochBatch) -> None:
        block = self._pipeline.block
        if block is not None:
            self._receiver.update(block)
        for begin in range(0, len(batch), MOST_EPOCHS):
            part = batch.part(begin, begin + MOST_EPOCHS) if len(batch) > MOST_EPOCHS else batch
            for subject in self._subjects.values():
                subject.update(part)
            self.news += self._watch.update(part, utc_offset_ms=self._pipeline.utc_offset_ms)
        if len(batch):
            self._last = int(batch.axis_ms[-1]), float(batch.completed_s[-1])
        cast(Stream, self._subjects["stream"]).observe(self._pipeline.tally, self.now_ms)

    def _silence(self, received_s: float) -> None:
        if self._last is None or math.isnan(received_s) or math.isnan(self._last[1]):
            return
        quiet_ms = round((received_s - self._last[1]) * 1000.0)
        if quiet_ms > SILENT_MS:
            at_ms = self._last[0] + quiet_ms - SILENT_MS
            self.news += self._watch.silence(at_ms, utc_offset_ms=self._pipeline.utc_offset_ms)

    def _pictures(self, span: Span) -> Pictures:
        subjects = self._subjects
        return Pictures(
            scatter=cast(Scatter, subjects["scatter"]).picture(span),
            sky=cast(Sky, subjects["sky"]).picture(span),
            level=cast(SignalLevel, subjects["signal_level"]).picture(span),
            fix=cast(Fix, subjects["fix"]).picture(span),
            stream=cast(Stream, subjects["stream"]).picture(span),
            timing=cast(Timing, subjects["timing"]).picture(span),
        )

    def _stream(self) -> StreamFacts:
        tally, extent = self._pipeline.tally, self._pipeline.extent

        def instant(utc_ms: int | None, axis: tuple[int, int] | None) -> str | None:
            if utc_ms is not None:
                return utc.iso(utc_ms)
            return None if axis is None else utc.time_of_day(axis[0])

        return StreamFacts(
            bytes=tally.bytes,
            sentences=tally.sentences,
            unverified=tally.unverified,
            checksum_failures=tally.checksum_failures,
            malformed=tally.malformed,
            non_nmea_bytes=tally.non_nmea_bytes,
            by_type=dict(tally.by_type),
            talkers=dict(tally.talkers),
            first_utc=instant(extent.first_utc_ms, extent.first),
            last_utc=instant(extent.last_utc_ms, extent.last),
        )
