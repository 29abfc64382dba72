"""Fix quality: shares, losses, outages, how long until a fix."""

from __future__ import annotations

import math
from typing import ClassVar, Self

import numpy as np
import numpy.typing as npt

from gnssmon.epochs.batch import EpochBatch
from gnssmon.estimators import long_run, uncertainty
from gnssmon.estimators.spells import Runs, Spells
from gnssmon.quantities import DEFAULT_CONFIDENCE, NOTHING, Estimate, Quantity, exact
from gnssmon.statistics.minutes import Minutes
from gnssmon.statistics.pictures import FixPicture
from gnssmon.statistics.subject import EVERYTHING, Site, Span

QUALITY = "GGA quality indicator, IEC 61162-1; without GGA from the mode letters"
HERE = "this program's own definition"

SHARES = {
    "none": (0, "without a fix"),
    "autonomous": (1, "with an autonomous fix"),
    "differential": (2, "with a differential fix, SBAS included"),
    "precise": (3, "with a precise (PPS) fix"),
    "rtk_fixed": (4, "with an RTK fix of whole-number ambiguities"),
    "rtk_float": (5, "with an RTK fix of floating ambiguities"),
    "estimated": (6, "that are dead reckoning, not measured"),
    "manual": (7, "that were entered by hand"),
    "simulated": (8, "that a receiver says are simulated"),
    "unknown": (-1, "whose quality the stream does not say"),
}
RTK_FIXED = 4

UNSEEN_SPELL_S = 10.0
"""A state not seen so far is thought to come in spells of this length: an hour without one is worth 360 trials.
Common practice, no source."""


class _Waiting:
    """Time of the stream until a state is first reached; a clock that is set back on the way does not shorten it."""

    def __init__(self) -> None:
        self.waited_ms = 0
        self.reached = False

    def update(self, step_ms: npt.NDArray[np.int64], there: npt.NDArray[np.bool_]) -> None:
        """``step_ms``: from the epoch before to each; ``there``: whether the state holds; shapes (n,)."""
        if not self.reached:
            self.reached = bool(there.any())
            upto = int(there.argmax()) + 1 if self.reached else len(there)
            self.waited_ms += int(np.maximum(step_ms[:upto], 0).sum())

    def merge(self, other: Self, *, between_ms: int) -> None:
        """``between_ms``: from this part's last epoch to the other's first."""
        if not self.reached:
            self.waited_ms += max(between_ms, 0) + other.waited_ms
            self.reached = other.reached


class Fix:
    """Every counted epoch's quality as runs; satellites, HDOP and age by the minute."""

    QUANTITIES: ClassVar[tuple[Quantity, ...]] = (
        *(
            Quantity(name=f"fix.share_{name}", unit="share", meaning=f"Share of epochs {words}.", source=QUALITY)
            for name, (_, words) in SHARES.items()
        ),
        Quantity(
            name="fix.losses",
            unit="count",
            meaning="How often an epoch with a fix was followed by one without.",
            source=HERE,
        ),
        Quantity(
            name="fix.longest_outage_s",
            unit="s",
            meaning=(
                "Longest time from a first epoch without a fix after one with, to the next with a fix (or to the last "
                "epoch), silence of the stream in between included; a stream that never had a fix: all of it."
            ),
            source=HERE,
        ),
        Quantity(
            name="fix.time_to_first_fix_s",
            unit="s",
            meaning="From the stream's first instant to the first epoch with a fix; 0 when it began with one.",
            source=HERE,
        ),
        Quantity(
            name="fix.time_to_fixed_s",
            unit="s",
            meaning="From the stream's first instant to the first RTK fixed epoch; 0 when it began with one.",
            source=HERE,
        ),
        Quantity(
            name="fix.mean_time_between_losses_s",
            unit="s",
            meaning="Time with a fix / losses; without a loss the time with a fix, a lower bound.",
            source="exact Poisson interval, F. Garwood, Biometrika 28 (1936)",
        ),
        Quantity(
            name="fix.fixed_losses",
            unit="count",
            meaning="How often an RTK fixed epoch was followed by one of another quality.",
            source=HERE,
        ),
    )

    def __init__(self, site: Site) -> None:
        self._spells = Spells()
        self._first_ms: int | None = None
        self._last_ms: int | None = None
        self._waiting = {"time_to_first_fix_s": _Waiting(), "time_to_fixed_s": _Waiting()}
        self._minutes = Minutes(
            sums=("used", "used_count", "hdop", "hdop_count", *(f"quality_{q}" for q in range(9))), peaks=("age_s",)
        )
        self._answers: dict[tuple[Span, float], dict[str, Estimate]] = {}

    def update(self, batch: EpochBatch) -> None:
        """Take in closed epochs."""
        if not len(batch):
            return
        self._answers.clear()
        if self._first_ms is None:
            self._first_ms = int(batch.axis_ms[0])
        step_ms = np.diff(batch.axis_ms, prepend=batch.axis_ms[0] if self._last_ms is None else self._last_ms)
        self._last_ms = int(batch.axis_ms[-1])
        counted = batch.counted
        self._waiting["time_to_first_fix_s"].update(step_ms, counted & (batch.quality > 0))
        self._waiting["time_to_fixed_s"].update(step_ms, counted & (batch.quality == RTK_FIXED))
        axis_ms, quality = batch.axis_ms[counted], batch.quality[counted].astype(np.int64)
        self._spells.update(axis_ms, quality)
        used, hdop = batch.satellites_used[counted].astype(np.float64), batch.hdop[counted]
        used_known, hdop_known = used >= 0, np.isfinite(hdop)
        self._minutes.update(
            axis_ms // 60_000,
            sums={
                "used": np.where(used_known, used, 0.0),
                "used_count": used_known,
                "hdop": np.where(hdop_known, hdop, 0.0),
                "hdop_count": hdop_known,
                **{f"quality_{q}": quality == q for q in range(9)},
            },
            peaks={"age_s": batch.correction_age_s[counted]},
        )

    def merge(self, other: Self) -> None:
        """Take in what ``other`` knows of a later part of the stream."""
        self._answers.clear()
        if other._first_ms is not None:
            between_ms = 0 if self._last_ms is None else other._first_ms - self._last_ms
            for name, waiting in self._waiting.items():
                waiting.merge(other._waiting[name], between_ms=between_ms)
            self._first_ms = other._first_ms if self._first_ms is None else self._first_ms
            self._last_ms = other._last_ms
        self._spells.merge(other._spells)
        self._minutes.merge(other._minutes)

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity by name; ``NOTHING`` where not computable."""
        key = (span, confidence)
        if key not in self._answers:
            self._answers[key] = self._summarise(span, confidence)
        return dict(self._answers[key])

    def picture(self, span: Span = EVERYTHING) -> FixPicture:
        """Epochs by quality, satellites, HDOP and correction age, minute by minute."""
        minute, columns = self._minutes.within(span)
        return FixPicture(
            minute=minute,
            by_quality=np.column_stack([columns[f"quality_{q}"] for q in range(9)]).astype(np.int64),
            used_mean=_ratio(columns["used"], columns["used_count"]),
            hdop_mean=_ratio(columns["hdop"], columns["hdop_count"]),
            correction_age_max_s=columns["age_s"],
        )

    def _summarise(self, span: Span, confidence: float) -> dict[str, Estimate]:
        answers = {quantity.name: NOTHING for quantity in self.QUANTITIES}
        runs = self._spells.within(span.from_ms, span.to_ms)
        if not len(runs) or self._first_ms is None:
            return answers
        answers |= _shares(runs, confidence)
        start_ms = self._first_ms if span.from_ms is None else max(self._first_ms, span.from_ms)
        start_ms = min(start_ms, int(runs.first_ms[0]))
        for name, reached in (("time_to_first_fix_s", runs.state > 0), ("time_to_fixed_s", runs.state == RTK_FIXED)):
            if span == EVERYTHING and self._waiting[name].reached:
                answers[f"fix.{name}"] = exact(self._waiting[name].waited_ms / 1000.0)
            elif reached.any():
                answers[f"fix.{name}"] = exact((int(runs.first_ms[reached.argmax()]) - start_ms) / 1000.0)
        fixed = runs.state == RTK_FIXED
        answers["fix.fixed_losses"] = exact(float(np.count_nonzero(fixed[:-1] & ~fixed[1:])), int(runs.count.sum()))
        return answers | _losses(runs, confidence)


def _shares(runs: Runs, confidence: float) -> dict[str, Estimate]:
    total = int(runs.count.sum())
    step_ms = float(np.median(np.repeat(runs.step_ms, np.minimum(runs.count, 1000))))
    unseen_trials = min(max(total * max(step_ms, 1.0) / 1000.0 / UNSEEN_SPELL_S, 1.0), float(total))
    _, states = runs.samples()
    answers = {}
    for name, (code, _) in SHARES.items():
        held = states == code
        count = int(np.count_nonzero(held))
        share = count / total
        (error,) = long_run.mean_errors([held]) if 0 < count < total else (None,)
        trials = uncertainty.effective_trials(share, error, confidence, total)
        if math.isnan(trials):
            trials = unseen_trials
        interval = uncertainty.share_interval(share, trials, confidence)
        answers[f"fix.share_{name}"] = Estimate(share, interval, confidence, total, trials)
    return answers


def _losses(runs: Runs, confidence: float) -> dict[str, Estimate]:
    # Epochs of unknown quality neither end a fix nor begin one.
    known = runs.state >= 0
    if not known.any():
        return {}
    told = Runs(runs.first_ms[known], runs.step_ms[known], runs.count[known], runs.state[known])
    has_fix = told.state > 0
    total = int(told.count.sum())
    losses = int(np.count_nonzero(has_fix[:-1] & ~has_fix[1:]))
    begin_ms, _, after_ms = told.spells(~has_fix)
    if has_fix.any() and not has_fix[0]:
        begin_ms, after_ms = begin_ms[1:], after_ms[1:]
    longest_ms = int((after_ms - begin_ms).max()) if len(begin_ms) else 0
    fix_begin_ms, _, fix_after_ms = told.spells(has_fix)
    held_s = float((fix_after_ms - fix_begin_ms).sum()) / 1000.0
    answers = {
        "fix.losses": exact(float(losses), total),
        "fix.longest_outage_s": exact(longest_ms / 1000.0, total),
    }
    if held_s > 0.0:
        fewest, most = uncertainty.count_interval(losses, confidence)
        answers["fix.mean_time_between_losses_s"] = Estimate(
            held_s / max(losses, 1), (held_s / most, held_s / fewest), confidence, losses
        )
    return answers


def _ratio(total: npt.NDArray[np.float64], count: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]:
    ratio = np.full(len(total), np.nan)
    np.divide(total, count, out=ratio, where=count > 0)
    return ratio
