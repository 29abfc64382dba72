"""A finding: something that is wrong, with numbers, and what to do about it; and the check that looks for it.

A check is one class: its docstring is the title, ``check`` takes the facts and answers *yes* (what was found), *no*
(``FINE``) or *cannot say* (with the reason). The words follow the rule: the observation, the comparison value and its
source, possible causes, the next check; never more certainty than a stream of sentences can carry.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import ClassVar

from gnssmon.quantities import NOTHING, Estimate, Severity
from gnssmon.receiver import ReceiverState
from gnssmon.statistics.pictures import Pictures
from gnssmon.statistics.subject import Site

Evidence = dict[str, float | int | str | None]


@dataclass(frozen=True, slots=True, kw_only=True)
class Finding:
    code: str
    """Stable, lower-case words with hyphens."""
    severity: Severity
    summary: str
    """One sentence: the observation with its comparison value."""
    evidence: Evidence = field(default_factory=dict)
    advice: str = ""
    """Possible causes and the next check, in a technician's words."""
    source: str = "common practice, no source"


@dataclass(frozen=True, slots=True, kw_only=True)
class Facts:
    """All that a check may look at."""

    estimates: Mapping[str, Estimate]
    by_type: Mapping[str, int]
    """Accepted sentences per formatter."""
    talkers: Mapping[str, int]
    pictures: Pictures
    receiver: ReceiverState
    site: Site

    def value(self, name: str) -> float | None:
        """The value of a scalar quantity, None where it could not be computed."""
        value = self.estimates.get(name, NOTHING).value
        return value if isinstance(value, float | int) else None

    def interval(self, name: str) -> tuple[float, float] | None:
        return self.estimates.get(name, NOTHING).interval


@dataclass(frozen=True, slots=True)
class Found:
    """Yes: what was seen, in one sentence, and the numbers behind it."""

    summary: str
    evidence: Evidence
    severity: Severity | None = None
    """Where it differs from the check's usual one."""


@dataclass(frozen=True, slots=True)
class CannotSay:
    """The data do not allow an answer (yet); ``reason`` says what is missing."""

    reason: str


class Fine:
    """No."""


FINE = Fine()
Answer = Found | Fine | CannotSay


class Check(ABC):
    """One thing that may be wrong. The class's docstring is its title."""

    code: ClassVar[str]
    severity: ClassVar[Severity]
    advice: ClassVar[str]
    source: ClassVar[str]

    @staticmethod
    @abstractmethod
    def check(facts: Facts) -> Answer:
        """Look at the facts; never raises for what a stream may hold."""
