"""Corrections from a base, network or satellite: their age, their outages, the station they come from."""

from __future__ import annotations

from typing import ClassVar, Self

import numpy as np

from gnssmon.epochs.batch import EpochBatch
from gnssmon.estimators import long_run, uncertainty
from gnssmon.estimators.series import Series
from gnssmon.estimators.spells import Spells
from gnssmon.quantities import DEFAULT_CONFIDENCE, NOTHING, Estimate, Quantity, exact
from gnssmon.statistics.subject import EVERYTHING, Site, Span

GGA_AGE = "GGA age of differential data, IEC 61162-1"
GGA_STATION = "GGA differential reference station, IEC 61162-1"
HERE = "this program's own definition"

OUTAGE_AGE_S = 10.0
"""Corrections older than this count as out. Common practice: real-time positioning begins to suffer after some
seconds (2 s recommended, 5 s seen: NGS guidelines for single-base real-time positioning, p. 44, 47)."""
MOST_AGES = 1_000_000
"""Ages kept one by one, 16 MB: eleven days at 1 Hz in full, then one of every two seconds, and so on."""
OUT, IN_USE = 0, 1


class Corrections:
    """Age of corrections where stated; stretches without; changes of station."""

    QUANTITIES: ClassVar[tuple[Quantity, ...]] = (
        Quantity(
            name="corrections.age_median_s", unit="s", meaning="Median age of the corrections in use.", source=GGA_AGE
        ),
        Quantity(
            name="corrections.age_95_s", unit="s", meaning="Age that 95 % of the epochs stay below.", source=GGA_AGE
        ),
        Quantity(name="corrections.age_max_s", unit="s", meaning="Largest age of the corrections.", source=GGA_AGE),
        Quantity(name="corrections.share", unit="share", meaning="Share of epochs that state an age.", source=GGA_AGE),
        Quantity(
            name="corrections.outages",
            unit="count",
            meaning="How often corrections, once there, went missing or grew older than 10 s.",
            source=HERE,
        ),
        Quantity(
            name="corrections.longest_outage_s",
            unit="s",
            meaning="Longest time from the first epoch of such an outage to the first epoch after it.",
            source=HERE,
        ),
        Quantity(
            name="corrections.stations",
            unit="count",
            meaning="How many reference stations were in use, one after another.",
            source=GGA_STATION,
        ),
        Quantity(
            name="corrections.station_changes",
            unit="count",
            meaning="How often the reference station changed.",
            source=GGA_STATION,
        ),
    )

    def __init__(self, site: Site) -> None:
        self._ages = Series({"age_s": np.float64}, most_rows=MOST_AGES)
        self._use = Spells()
        self._station = Spells()
        self._answers: dict[tuple[Span, float], dict[str, Estimate]] = {}

    def update(self, batch: EpochBatch) -> None:
        """Take in closed epochs."""
        counted = batch.counted
        axis_ms, age_s = batch.axis_ms[counted], batch.correction_age_s[counted]
        if not len(axis_ms):
            return
        self._answers.clear()
        stated = np.isfinite(age_s)
        self._ages.update(axis_ms[stated], age_s=age_s[stated])
        with np.errstate(invalid="ignore"):
            self._use.update(axis_ms, np.where(age_s <= OUTAGE_AGE_S, IN_USE, OUT))
        # A receiver without corrections may still print a station: it counts only beside an age.
        named = stated & (batch.station[counted] >= 0)
        self._station.update(axis_ms[named], batch.station[counted][named])

    def merge(self, other: Self) -> None:
        """Take in what ``other`` knows of a later part of the stream."""
        self._answers.clear()
        self._ages.merge(other._ages)
        self._use.merge(other._use)
        self._station.merge(other._station)

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity by name; ``NOTHING`` where the stream tells of no corrections."""
        key = (span, confidence)
        if key not in self._answers:
            self._answers[key] = self._summarise(span, confidence)
        return dict(self._answers[key])

    def picture(self, span: Span = EVERYTHING) -> None:
        """Drawn with the fix, minute by minute."""

    def _summarise(self, span: Span, confidence: float) -> dict[str, Estimate]:
        answers = {quantity.name: NOTHING for quantity in self.QUANTITIES}
        runs = self._use.within(span.from_ms, span.to_ms)
        age_s = self._ages["age_s"][self._ages.within(span.from_ms, span.to_ms)].astype(np.float64)
        if not len(runs):
            return answers
        total = int(runs.count.sum())
        answers["corrections.share"] = exact(len(age_s) / total, total)
        if not len(age_s):
            return answers
        ordered = np.sort(age_s)
        for name, share in (("age_median_s", 0.5), ("age_95_s", 0.95)):
            value = uncertainty.ordered_quantile(ordered, share)
            (error,) = long_run.mean_errors([age_s > value])
            trials = uncertainty.effective_trials(share, error, confidence, len(age_s))
            interval = uncertainty.quantile_interval(ordered, share, trials, confidence)
            answers[f"corrections.{name}"] = Estimate(value, interval, confidence, len(age_s), trials)
        answers["corrections.age_max_s"] = exact(float(ordered[-1]), len(age_s))
        out = runs.state == OUT
        begin_ms, _, after_ms = runs.spells(out)
        if out[0]:  # before the first corrections is not an outage
            begin_ms, after_ms = begin_ms[1:], after_ms[1:]
        answers["corrections.outages"] = exact(float(len(begin_ms)), total)
        longest_ms = int((after_ms - begin_ms).max()) if len(begin_ms) else 0
        answers["corrections.longest_outage_s"] = exact(longest_ms / 1000.0, total)
        stations = self._station.within(span.from_ms, span.to_ms).state
        if len(stations):
            answers["corrections.stations"] = exact(float(len(np.unique(stations))), len(age_s))
            answers["corrections.station_changes"] = exact(float(np.count_nonzero(np.diff(stations))), len(age_s))
        return answers
