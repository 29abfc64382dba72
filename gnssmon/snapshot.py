"""Snapshot: all that a watcher may know, frozen. The contract between the core and screen, report and JSON."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

from gnssmon.acceptance.verdict import Verdict
from gnssmon.alarms.states import AlarmEvent
from gnssmon.diagnosis.finding import Finding
from gnssmon.quantities import Estimate
from gnssmon.receiver import ReceiverState
from gnssmon.statistics.pictures import Pictures
from gnssmon.statistics.subject import Site, Span


@dataclass(frozen=True, slots=True, kw_only=True)
class SourceFacts:
    """What is being read."""

    label: str
    """As the user named it; untrusted: show through ``printable``."""
    kind: Literal["log", "live", "simulated"]
    size: int | None = None
    """Bytes of a file."""
    sha256: str | None = None
    """Of a file's bytes as stored, once read to the end."""
    simulated: bool = False
    state: str = "reading"
    """``reading``, ``ended``, or for a live source in words: ``lost 3 s ago: device unplugged, trying again``."""


@dataclass(frozen=True, slots=True, kw_only=True)
class StreamFacts:
    """The tally since the start of the stream, as the JSON shows it."""

    bytes: int
    sentences: int
    unverified: int
    checksum_failures: int
    malformed: int
    non_nmea_bytes: int
    by_type: Mapping[str, int]
    talkers: Mapping[str, int]
    first_utc: str | None
    """ISO 8601 with Z; time of day only (``THH:MM:SS.sssZ``) while no date is known."""
    last_utc: str | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Snapshot:
    span: Span
    window: str
    """``since start``, ``last minute``, ``since mark``, …"""
    utc_offset_ms: int | None
    """Add to an ``axis_ms`` to get UTC since 1970, ms; None while no date is known."""
    source: SourceFacts
    site: Site
    receiver: ReceiverState
    stream: StreamFacts
    estimates: Mapping[str, Estimate]
    pictures: Pictures
    verdict: Verdict
    findings: tuple[Finding, ...] = ()
    alarms: tuple[AlarmEvent, ...] = ()
    """Every event so far, bounded, the latest last; the open ones have no ``cleared_ms``."""
    progress: Mapping[str, float] = field(default_factory=dict)
    """For a log: ``share`` read (0 to 1), ``speed`` (times real time)."""
