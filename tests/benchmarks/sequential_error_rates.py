"""How often a run that is looked at again and again decides wrongly, when the truth lies exactly on the limit.

usage: python -m tests.benchmarks.sequential_error_rates [runs] [seed]

Every run goes the way of the program: epochs into a subject of the statistics, its summaries at each look to ``judge``
with the confidences of ``Looks``, stop at the first decision. At the limit every decision is wrong, whether it accepts
or rejects. ``naive``: the same looks with the 95 % interval at each. The last columns: the limit moved away from the
truth by one unit (a standard deviation; for shares 3 %), how many runs then decide rightly, and the median time.

A spread about a run's own mean grows with the run while errors slower than the run are about: an early acceptance then
speaks of a run of that length. That is why such criteria have a least duration; the rows of R95 are with one. So is
one row of the share: before the first long spell without a fixed solution was seen, nobody can know of it.
"""

from __future__ import annotations

import sys
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from gnssmon.acceptance.criteria import CriteriaSet, Criterion
from gnssmon.acceptance.sequential import Looks
from gnssmon.acceptance.verdict import judge
from gnssmon.estimators import long_run
from gnssmon.quantities import Estimate
from gnssmon.statistics.fix import Fix
from gnssmon.statistics.scatter import Scatter
from gnssmon.statistics.subject import Site, Span
from tests.estimators.noise import Floats, autonomous_like, rtk_like, slow
from tests.statistics.batches import make_batch

LATITUDE_DEG, LONGITUDE_DEG = 48.0, 11.0
M_PER_DEGREE = 111_200.035, 74_625.0
"""Metres per degree there, near enough."""

DAY_S = 86_400
STEP_S = 30.0
COUNT = round(DAY_S / STEP_S)

Generator = np.random.Generator
Known = Callable[[float, float], Mapping[str, Estimate]]
"""Estimates of a run after so many seconds, at this confidence."""


@dataclass(frozen=True, slots=True)
class Case:
    """One criterion under one noise."""

    label: str
    quantity: str
    truth: float
    unit: float
    make: Callable[[Generator], Known]
    minimum_s: float = 0.0
    side: str = "at_most"

    def criterion(self, units: float) -> Criterion:
        """The criterion with its limit so many units beyond the truth, on the easy side."""
        sign = 1.0 if self.side == "at_most" else -1.0
        limit = {self.side: self.truth + sign * units * self.unit}
        return Criterion(quantity=self.quantity, minimum_duration_s=self.minimum_s, **limit)


def level(time_constant_s: float) -> Callable[[Generator], Known]:
    """A mean whose error is told from the record alone, as that of a signal level."""

    def make(rng: Generator) -> Known:
        values = slow(rng, time_constant_s, 1, COUNT, STEP_S)[0]

        def known(after_s: float, confidence: float) -> Mapping[str, Estimate]:
            seen = values[: round(after_s / STEP_S)]
            error = long_run.mean_error(seen)
            if error is None:
                return {}
            mean, half = float(seen.mean()), error.half_width(confidence)
            return {"cn0.mean_dbhz": Estimate(mean, (mean - half, mean + half), confidence)}

        return known

    return make


def positions(noise: Callable[[Generator, int, int, float], Floats], quality: int) -> Callable[[Generator], Known]:
    """A day of positions about a reference."""

    def make(rng: Generator) -> Known:
        north_m, east_m = noise(rng, 2, COUNT, STEP_S)
        subject = Scatter(Site(reference=(LATITUDE_DEG, LONGITUDE_DEG, 500.0)))
        subject.update(
            make_batch(
                np.arange(COUNT) * round(STEP_S * 1000),
                latitude_deg=LATITUDE_DEG + north_m / M_PER_DEGREE[0],
                longitude_deg=LONGITUDE_DEG + east_m / M_PER_DEGREE[1],
                altitude_m=np.full(COUNT, 500.0),
                quality=np.full(COUNT, quality),
            )
        )
        return lambda after_s, confidence: subject.summary(Span(0, round(after_s * 1000)), confidence=confidence)

    return make


def fixed_share(time_constant_s: float) -> Callable[[Generator], Known]:
    """RTK fixed for 95 % of the epochs; the rest comes in spells."""

    def make(rng: Generator) -> Known:
        quality = np.where(slow(rng, time_constant_s, 1, COUNT, STEP_S)[0] > -1.6448536, 4, 5)
        subject = Fix(Site())
        subject.update(make_batch(np.arange(COUNT) * round(STEP_S * 1000), quality=quality))
        return lambda after_s, confidence: subject.summary(Span(0, round(after_s * 1000)), confidence=confidence)

    return make


def cases(rng: Generator) -> tuple[Case, ...]:
    """Every row of the table."""
    rtk = rtk_like(rng, 2, 100 * COUNT, STEP_S)
    one = slow(rng, 600.0, 2, 100 * COUNT, STEP_S)
    r95_rtk, r95_one = (float(np.quantile(np.hypot(*pair), 0.95)) for pair in (rtk, one))
    return (
        Case("level, 30 s", "cn0.mean_dbhz", 0.0, 1.0, level(30.0)),
        Case("level, 5 min", "cn0.mean_dbhz", 0.0, 1.0, level(300.0)),
        Case("level, 30 min", "cn0.mean_dbhz", 0.0, 1.0, level(1800.0)),
        Case("offset, RTK-like", "reference.north_m", 0.0, 0.0067, positions(rtk_like, 4)),
        Case("offset, autonomous", "reference.north_m", 0.0, 0.86, positions(autonomous_like, 1)),
        Case("R95, RTK-like, 6 h", "scatter.r95_m", r95_rtk, r95_rtk, positions(rtk_like, 4), 21_600.0),
        Case("R95, 10 min, 6 h", "scatter.r95_m", r95_one, r95_one, positions(_ten_minutes, 1), 21_600.0),
        Case("share, 30 s", "fix.share_rtk_fixed", 0.95, 0.03, fixed_share(30.0), side="at_least"),
        Case("share, 5 min", "fix.share_rtk_fixed", 0.95, 0.03, fixed_share(300.0), side="at_least"),
        Case("share, 5 min, 6 h", "fix.share_rtk_fixed", 0.95, 0.03, fixed_share(300.0), 21_600.0, side="at_least"),
    )


def _ten_minutes(rng: Generator, runs: int, count: int, step_s: float) -> Floats:
    return slow(rng, 600.0, runs, count, step_s)


def decided(known: Known, criterion: Criterion, looks: Looks, *, spending: bool = True) -> tuple[str, float]:
    """The first decision (``accept``, ``reject``, or ``undecided`` at the end), and after how many seconds."""
    criteria = CriteriaSet(name="simulation", criteria=(criterion,))
    for number, time_s in enumerate(looks.times_s):
        if time_s < criterion.minimum_duration_s:
            continue
        verdict = judge(
            criteria,
            lambda confidence, time_s=time_s: known(time_s, confidence),  # type: ignore[misc]
            duration_s=time_s,
            confidence=looks.confidence(number) if spending else lambda asked: asked,
        ).verdict
        if verdict != "undecided":
            return verdict, time_s
    return "undecided", looks.longest_s


def rates(case: Case, looks: Looks, runs: int, rng: Generator) -> dict[str, float]:
    """Shares of runs: accepted and rejected at the limit, decided by the naive way, rightly decided off the limit."""
    counts = {"accept": 0, "reject": 0, "undecided": 0}
    naive, right, times = 0, 0, []
    for _ in range(runs):
        known = case.make(rng)
        counts[decided(known, case.criterion(0.0), looks)[0]] += 1
        naive += decided(known, case.criterion(0.0), looks, spending=False)[0] != "undecided"
        verdict, time_s = decided(known, case.criterion(1.0), looks)
        right += verdict == "accept"
        times.append(time_s if verdict == "accept" else np.inf)
    return {
        "accept": counts["accept"] / runs,
        "reject": counts["reject"] / runs,
        "naive": naive / runs,
        "right": right / runs,
        "hours": float(np.median(times)) / 3600.0,
    }


def main() -> None:
    """Print a row for each case."""
    runs = int(sys.argv[1]) if len(sys.argv) > 1 else 500
    seed = int(sys.argv[2]) if len(sys.argv) > 2 else 1
    rng = np.random.default_rng(seed)
    looks = Looks(float(DAY_S))
    print(f"{runs} runs of a day, seed {seed}, looks at {[round(t / 60) for t in looks.times_s]} min")
    print(f"{'case':22}{'accepts':>9}{'rejects':>9}{'wrong':>8}{'naive':>8}{'right':>10}{'median':>9}")
    for case in cases(rng):
        r = rates(case, looks, runs, rng)
        print(
            f"{case.label:22}{r['accept']:9.3f}{r['reject']:9.3f}{r['accept'] + r['reject']:8.3f}{r['naive']:8.3f}"
            f"{r['right']:10.0%}{r['hours']:7.1f} h",
            flush=True,
        )


if __name__ == "__main__":
    main()
