"""Snapshot → the JSON object of ``gnssmon check --json``; its JSON Schema stands beside this file.

Strict JSON: a number that is not finite is null. Everything in it comes from the stream and the settings, nothing from
the clock or the machine, so the same bytes give the same object.
"""

from __future__ import annotations

import functools
import json
import math
from collections.abc import Iterable, Mapping
from importlib import resources
from typing import Any

from gnssmon import __version__, utc
from gnssmon.acceptance.verdict import Judged
from gnssmon.alarms.states import AlarmEvent
from gnssmon.diagnosis.finding import Finding
from gnssmon.quantities import Estimate
from gnssmon.snapshot import Snapshot
from gnssmon.statistics import catalogue
from gnssmon.statistics.pictures import LevelPicture, SkyPicture

SCHEMA = "gnssmon.result/1"
"""Name and version of the format. The version rises when a key changes its meaning, not when one is added."""

Json = dict[str, Any]

CAUTIONS = (
    "Not a navigation or safety-of-life device.",
    "A monitor sees only what the receiver reports; code multipath, cycle slips and phase residuals need raw data.",
    "Findings are hints to check, in the order given, with the person responsible for the site.",
    "Work on masts and roofs, at mains supplies, lightning protection and transmitters belongs to people who are "
    "trained and authorised for it. Follow the law, codes and site rules where you are. If unsure, stop: no "
    "measurement in this program is worth a climb.",
)
"""Said beside every verdict that leaves the program on paper."""


def result(snapshot: Snapshot) -> Json:
    """The facts of a run as one JSON object; keys as in the interface contract, and more."""
    offset_ms = snapshot.utc_offset_ms
    verdict, site, source, stream = snapshot.verdict, snapshot.site, snapshot.source, snapshot.stream
    return {
        "schema": SCHEMA,
        "version": __version__,
        "verdict": verdict.verdict,
        "needed_s": _number(verdict.needed_s),
        "criteria_set": verdict.criteria_name,
        "criteria_sha256": verdict.criteria_sha256 or None,
        "criteria": [_criterion(judged) for judged in verdict.criteria],
        "findings": [_finding(finding) for finding in snapshot.findings],
        "quantities": _quantities(snapshot.estimates),
        "intervals": {
            name: _interval(estimate.interval)
            for name, estimate in sorted(snapshot.estimates.items())
            if _interval(estimate.interval) is not None and _value(estimate.value) is not None
        },
        "levels": _levels(snapshot.pictures.level),
        "horizon": _horizon(snapshot.pictures.sky),
        "stream": {
            "bytes": stream.bytes,
            "sentences": stream.sentences,
            "unverified": stream.unverified,
            "checksum_failures": stream.checksum_failures,
            "malformed": stream.malformed,
            "non_nmea_bytes": stream.non_nmea_bytes,
            "by_type": dict(sorted(stream.by_type.items())),
            "talkers": dict(sorted(stream.talkers.items())),
            "first_utc": stream.first_utc,
            "last_utc": stream.last_utc,
        },
        "source": {
            "label": source.label,
            "kind": source.kind,
            "size": source.size,
            "sha256": source.sha256,
            "simulated": source.simulated,
            "state": source.state,
        },
        "window": {
            "name": snapshot.window,
            "from_utc": _instant(snapshot.span.from_ms, offset_ms),
            "to_utc": _instant(snapshot.span.to_ms, offset_ms),
        },
        "site": {
            "reference": site.reference_text or None,
            "reference_note": site.reference_note or None,
            "reference_position": None if site.reference is None else [_number(part) for part in site.reference],
            "mask_deg": _number(site.mask_deg),
            "baud": site.baud,
        },
        "alarms": [_alarm(event) for event in snapshot.alarms],
        "cautions": list(CAUTIONS),
    }


def dumps(facts: Mapping[str, Any]) -> str:
    """The object as ASCII text: whatever a stream or a file name holds, no control character reaches a terminal."""
    return json.dumps(facts, indent=2, allow_nan=False) + "\n"


@functools.cache
def schema() -> Json:
    """The JSON Schema (2020-12) that every result obeys."""
    text = (resources.files("gnssmon.report") / "result.schema.json").read_text(encoding="utf-8")
    loaded: Json = json.loads(text)
    return loaded


def _criterion(judged: Judged) -> Json:
    return {
        "quantity": judged.quantity,
        "unit": judged.unit,
        "value": _number(judged.value),
        "interval": _interval(judged.interval),
        "confidence": judged.confidence,
        "comparison": judged.comparison,
        "limit": judged.limit,
        "within": judged.within,
        "margin": _number(judged.margin),
        "result": judged.result,
        "reason": judged.reason,
        "needed_s": _number(judged.needed_s),
        "note": judged.note,
        "source": judged.source,
    }


def _finding(finding: Finding) -> Json:
    return {
        "code": finding.code,
        "severity": finding.severity,
        "summary": finding.summary,
        "evidence": {
            key: _number(value) if isinstance(value, float) else value for key, value in finding.evidence.items()
        },
        "advice": finding.advice,
        "source": finding.source,
    }


def _alarm(event: AlarmEvent) -> Json:
    return {
        "quantity": event.quantity,
        "severity": event.severity,
        "raised_utc": event.raised_utc,
        "cleared_utc": event.cleared_utc,
        "worst": _number(event.worst),
        "limit": event.limit,
        "acknowledged": event.acknowledged,
        "note": event.note,
    }


def _quantities(estimates: Mapping[str, Estimate]) -> Json:
    """Every quantity of the catalogue (of families the members that were seen) by name."""
    known = {quantity.name for quantity in catalogue.QUANTITIES if not quantity.name.endswith("*")}
    flat = dict.fromkeys(sorted(known | set(estimates)))
    return flat | {name: _value(estimate.value) for name, estimate in sorted(estimates.items())}


def _levels(picture: LevelPicture) -> Json:
    """Level against elevation by signal: what a later comparison needs."""
    return {
        "elevation_deg": _numbers(picture.elevation_deg),
        "signals": {
            label: {
                "mean_dbhz": _numbers(picture.mean_dbhz[row]),
                "count": [int(count) for count in picture.count[row]],
            }
            for row, label in enumerate(picture.signals)
        },
    }


def _horizon(picture: SkyPicture) -> Json:
    """Estimated horizon by azimuth, the first sector from 0 to 10 degrees, with its interval."""
    return {
        "deg": _numbers(picture.horizon_deg),
        "low_deg": _numbers(picture.horizon_low_deg),
        "high_deg": _numbers(picture.horizon_high_deg),
    }


def _value(value: float | tuple[float | None, ...] | None) -> float | int | list[float | None] | None:
    return _numbers(value) if isinstance(value, tuple) else _number(value)


def _number(value: float | None) -> float | int | None:
    """A finite number as it is (a whole one that was counted stays whole), else None."""
    if value is None or not math.isfinite(value):
        return None
    return value if isinstance(value, int) else float(value)


def _numbers(values: Iterable[float | None]) -> list[float | None]:
    return [_number(None if value is None else float(value)) for value in values]


def _interval(interval: tuple[float, float] | None) -> list[float | None] | None:
    if interval is None or not all(map(math.isfinite, interval)):
        return None
    return [float(interval[0]), float(interval[1])]


def _instant(axis_ms: int | None, offset_ms: int | None) -> str | None:
    if axis_ms is None:
        return None
    return utc.time_of_day(axis_ms) if offset_ms is None else utc.iso(axis_ms + offset_ms)
