"""Looking often without spoiling the error rate: a run that ends as soon as it is decided.

Who looks at a 95 % interval again and again and stops at the first one that pleases is wrong far more often than in
5 % of the runs. So the error α = 1 - confidence is a budget, and each look may spend a part of it: what the spending
function of K. K. G. Lan & D. L. DeMets, Biometrika 70 (1983), allows up to that share of the longest run, in their form
α ln(1 + (e - 1) t), which lets a clear case end early. At each look the criteria are judged with intervals of the
confidence 1 - (what this look may spend): repeated confidence intervals (C. Jennison & B. W. Turnbull, J. R. Stat. Soc.
B 51, 1989). Because the parts add up to α, the chance that any of the intervals misses the truth is at most α, whatever
the correlation between looks (Bonferroni); no model of the data is needed beyond that each interval holds its own
confidence. Measured: tests/benchmarks/sequential_error_rates.py.

What an interval cannot know, no plan of looks can mend: a spread about a run's own mean leaves out errors slower than
the run, and a share says little before several spells of what it counts were seen. Such criteria need a least duration
(``minimum_duration``) that is long against those; the presets have one.

The rate is that of one criterion. Of m criteria that all lie exactly on their limits, one is rejected by chance up to
m times as often; acceptance needs all of them and is not more often wrong.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

DAY_S = 86_400.0
"""Longest run where the user names none: then every satellite has been everywhere."""

FIRST_S = 300.0
"""No look before: errors of minutes cannot be seen in less."""

MOST_LOOKS = 9


@dataclass(frozen=True, slots=True)
class Looks:
    """When a run of at most ``longest_s`` is judged, and how sure each judgement must be."""

    longest_s: float = DAY_S

    @property
    def times_s(self) -> tuple[float, ...]:
        """Lengths of the run at which to look, each twice the one before, the last one ``longest_s``."""
        times = [self.longest_s / 2.0**k for k in range(MOST_LOOKS)]
        return tuple(sorted(time for time in times if time >= FIRST_S or time == self.longest_s))

    def confidence(self, number: int) -> Callable[[float], float]:
        """For look ``number`` (from 0): the confidence that a criterion asks for → the one to judge with."""
        before = self._spent(number - 1)
        return _spending(self._spent(number) - before)

    def confidence_at_end(self, taken: int) -> Callable[[float], float]:
        """The same for a run that ends by itself after ``taken`` looks: all that is left may be spent.

        Only where the end has nothing to do with what was seen: a log is over, the time asked for is over.
        """
        return _spending(1.0 - self._spent(taken - 1))

    def _spent(self, number: int) -> float:
        """Share of the error that may be spent up to and with look ``number``."""
        if number < 0:
            return 0.0
        return math.log1p((math.e - 1.0) * self.times_s[number] / self.longest_s)


def _spending(share: float) -> Callable[[float], float]:
    return lambda asked: 1.0 - (1.0 - asked) * share
