"""The stream itself: is it complete, at which rate, what is damaged, how full is the line."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import ClassVar, Self

import numpy as np
import numpy.typing as npt

from gnssmon.epochs.batch import EpochBatch
from gnssmon.estimators.spells import Runs, Spells
from gnssmon.nmea.columns import Tally
from gnssmon.quantities import DEFAULT_CONFIDENCE, NOTHING, Estimate, Quantity, exact
from gnssmon.statistics.minutes import Minutes
from gnssmon.statistics.pictures import StreamPicture
from gnssmon.statistics.subject import EVERYTHING, Site, Span

HERE = "this program's own definition"
GAP = 1.5
"""Steps longer than so many intervals are gaps."""
CLOSE = 0.25
"""Steps this close to the commonest one, as a share of it, are of the same rate."""
REGULAR = 0.9
"""Share of the close steps from which on the commonest one alone is the interval."""
MOST_GAPS = 200
"""Gaps told of in the picture, the latest ones."""


def _quantity(name: str, unit: str, meaning: str, source: str = HERE) -> Quantity:
    return Quantity(name=f"stream.{name}", unit=unit, meaning=meaning, source=source)


@dataclass(slots=True)
class _Counts:
    """Totals of the framer's tally."""

    bytes: int = 0
    sentences: int = 0
    unverified: int = 0
    checksum_failures: int = 0
    malformed: int = 0
    non_nmea_bytes: int = 0

    def add(self, other: _Counts) -> None:
        for field in fields(self):
            setattr(self, field.name, getattr(self, field.name) + getattr(other, field.name))


class Stream:
    """Times of the counted epochs as runs of equal step; bytes and damage by the minute."""

    QUANTITIES: ClassVar[tuple[Quantity, ...]] = (
        _quantity("completeness", "share", "Epochs received / epochs due at the stream's own rate."),
        _quantity("epochs", "count", "Epochs whose position sentence came with a time."),
        _quantity("instants", "count", "Epochs known from any sentence with a time."),
        _quantity("gaps", "count", "Steps between epochs that are longer than 1.5 intervals."),
        _quantity("longest_gap_s", "s", "Time between the epochs before and after the longest gap; 0 without a gap."),
        _quantity("interval_s", "s", "The stream's own interval: the commonest step between epochs."),
        _quantity("duration_s", "s", "From the first epoch to the last."),
        _quantity("time_steps", "count", "How often the receiver's own time stepped back."),
        _quantity(
            "checksum_failure_share",
            "share",
            "Sentences with a wrong checksum / all with a checksum.",
            "checksum: NMEA 0183, exclusive or of the bytes between $ and *",
        ),
        _quantity("malformed_share", "share", "Torn, over-long or unprintable sentences / all that began."),
        _quantity("non_nmea_share", "share", "Bytes that are neither sentence, stamp nor line end / all bytes."),
        _quantity("bytes_per_s", "B/s", "Bytes received per second of stream."),
        _quantity(
            "link_load",
            "share",
            "Bytes per second / what the baud rate carries at 10 bits a byte; serial lines only.",
            "8N1: start bit, 8 data bits, stop bit",
        ),
    )

    def __init__(self, site: Site) -> None:
        self._site = site
        self._spells = Spells()
        self._minutes = Minutes(sums=("epochs", "instants", "bytes", "failures", "sentences", "malformed", "foreign"))
        self._counts = _Counts()
        self._earlier = _Counts()
        """Of the tally last observed."""

    def update(self, batch: EpochBatch) -> None:
        """Take in closed epochs."""
        if not len(batch):
            return
        counted = batch.counted
        self._spells.update(batch.axis_ms[counted], np.zeros(int(counted.sum()), dtype=np.int64))
        nothing = np.zeros(len(batch))
        self._minutes.update(
            batch.minute,
            sums={
                "epochs": counted,
                "instants": np.ones(len(batch)),
                **dict.fromkeys(("bytes", "failures", "sentences", "malformed", "foreign"), nothing),
            },
        )

    def observe(self, tally: Tally, axis_ms: int | None) -> None:
        """Take in what the framer has counted since the last call; ``axis_ms``: the latest epoch's time."""
        new = _Counts(**{f.name: getattr(tally, f.name) - getattr(self._earlier, f.name) for f in fields(_Counts)})
        self._earlier = _Counts(**{f.name: getattr(tally, f.name) for f in fields(_Counts)})
        self._counts.add(new)
        if axis_ms is not None and new.bytes:
            values = {
                "epochs": 0,
                "instants": 0,
                "bytes": new.bytes,
                "failures": new.checksum_failures,
                "sentences": new.sentences - new.unverified,
                "malformed": new.malformed,
                "foreign": new.non_nmea_bytes,
            }
            self._minutes.update(
                np.array([axis_ms // 60_000]), sums={name: np.array([value]) for name, value in values.items()}
            )

    def merge(self, other: Self) -> None:
        """Take in what ``other`` knows of a later part of the stream."""
        self._spells.merge(other._spells)
        self._minutes.merge(other._minutes)
        self._counts.add(other._counts)

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity by name. All are facts of what was received: their intervals have no width."""
        answers = {quantity.name: NOTHING for quantity in self.QUANTITIES}
        runs = self._spells.within(span.from_ms, span.to_ms)
        minute, by_minute = self._minutes.within(span)
        found: dict[str, float] = {"epochs": float(runs.count.sum())} if len(minute) or len(runs) else {}
        if len(minute):
            found["instants"] = float(by_minute["instants"].sum())
        duration_s = 0.0
        if len(runs):
            times = _Times(runs)
            duration_s = times.duration_ms / 1000.0
            found |= {"duration_s": duration_s, "time_steps": float(times.steps_back)}
            if times.interval_ms:
                found |= {
                    "interval_s": times.interval_ms / 1000.0,
                    "completeness": times.completeness,
                    "gaps": float(len(times.gaps_ms[1])),
                    "longest_gap_s": float(times.gaps_ms[1].max(initial=0)) / 1000.0,
                }
                duration_s += times.interval_ms / 1000.0
        counts = self._counts if span == EVERYTHING else _of_window(by_minute)
        verified = counts.sentences - counts.unverified
        found |= _shares(counts, verified)
        if duration_s > 0.0 and counts.bytes:
            found["bytes_per_s"] = counts.bytes / duration_s
            if self._site.baud:
                found["link_load"] = found["bytes_per_s"] * 10.0 / self._site.baud
        samples = int(runs.count.sum()) if len(runs) else 0
        return answers | {f"stream.{name}": exact(value, samples) for name, value in found.items()}

    def picture(self, span: Span = EVERYTHING) -> StreamPicture:
        """Epochs, bytes and damage minute by minute, and the latest gaps."""
        minute, columns = self._minutes.within(span)
        runs = self._spells.within(span.from_ms, span.to_ms)
        gaps: tuple[tuple[int, float], ...] = ()
        if len(runs):
            begin, length = _Times(runs).gaps_ms
            gaps = tuple(zip(begin[-MOST_GAPS:].tolist(), (length[-MOST_GAPS:] / 1000.0).tolist(), strict=True))
        return StreamPicture(
            minute=minute,
            epochs=columns["epochs"].astype(np.int64),
            bytes=columns["bytes"].astype(np.int64),
            checksum_failures=columns["failures"].astype(np.int64),
            gaps=gaps,
        )


def _of_window(by_minute: dict[str, npt.NDArray[np.float64]]) -> _Counts:
    total = {name: round(float(column.sum())) for name, column in by_minute.items()}
    return _Counts(total["bytes"], total["sentences"], 0, total["failures"], total["malformed"], total["foreign"])


def _shares(counts: _Counts, verified: int) -> dict[str, float]:
    found = {}
    if verified + counts.checksum_failures:
        found["checksum_failure_share"] = counts.checksum_failures / (verified + counts.checksum_failures)
    begun = counts.sentences + counts.checksum_failures + counts.malformed
    if begun:
        found["malformed_share"] = counts.malformed / begun
    if counts.bytes:
        found["non_nmea_share"] = counts.non_nmea_bytes / counts.bytes
    return found


def _interval_ms(steps: npt.NDArray[np.int64], weight: npt.NDArray[np.float64]) -> float:
    """The commonest step; where steps change by some milliseconds (three a second: 333, 333, 334), the mean of those
    close to it, for else a day would be short of some epochs."""
    commonest = int(steps[weight.argmax()])
    close = np.abs(steps - commonest) <= CLOSE * commonest
    if weight.max() >= REGULAR * weight[close].sum():
        return float(commonest)
    return float((steps[close] @ weight[close]) / weight[close].sum())


class _Times:
    """Steps between epochs, from runs of equal step."""

    def __init__(self, runs: Runs) -> None:
        between = runs.first_ms[1:] - runs.last_ms[:-1]
        step = np.concatenate([runs.step_ms, between])
        weight = np.concatenate([runs.count - 1, np.ones(len(between), dtype=np.int64)])
        forward = (step > 0) & (weight > 0)
        self.steps_back = int((between < 0).sum())
        self.duration_ms = int((step * weight)[forward].sum())
        self.interval_ms = 0.0
        self.completeness = 1.0
        self.gaps_ms = np.empty(0, dtype=np.int64), np.empty(0, dtype=np.int64)
        if not forward.any():
            return
        steps, which = np.unique(step[forward], return_inverse=True)
        self.interval_ms = _interval_ms(steps, np.bincount(which, weights=weight[forward]).astype(np.float64))
        due = round(self.duration_ms / self.interval_ms) + 1 + self.steps_back
        self.completeness = min(1.0, int(runs.count.sum()) / due)
        limit = GAP * self.interval_ms
        # A run of long steps is a row of gaps: each of its steps is one.
        inside = np.flatnonzero((runs.step_ms > limit) & (runs.count > 1))
        begins = [between_begin := runs.last_ms[:-1][between > limit]]
        lengths = [between[between > limit]]
        for i in inside.tolist():
            begins.append(runs.first_ms[i] + runs.step_ms[i] * np.arange(runs.count[i] - 1))
            lengths.append(np.full(runs.count[i] - 1, runs.step_ms[i]))
        begin, length = np.concatenate(begins), np.concatenate(lengths)
        order = np.argsort(begin, kind="stable") if len(begin) > len(between_begin) else slice(None)
        self.gaps_ms = begin[order], length[order]
