"""Alarm rules: a quantity over a short window, a limit to raise, a limit to clear, a hold time, a severity."""

from __future__ import annotations

from dataclasses import dataclass, field
from importlib import resources
from typing import Annotated

from gnssmon.configuration import Duration, load, nearest
from gnssmon.errors import ConfigurationError
from gnssmon.printable import printable
from gnssmon.quantities import Severity
from gnssmon.statistics import instants

DEFAULT_WINDOW_S = 10.0
LONGEST_WINDOW_S = 3600.0
"""Epochs of the longest window are kept in memory; slower changes are a criterion's business."""


def watchable(value: object) -> str:
    """A quantity's name as alarms may use it; raises ConfigurationError with the nearest known names."""
    if not isinstance(value, str):
        raise ConfigurationError("wanted the name of a quantity in quotes")
    if instants.find(value) is None:
        offers = nearest(value, instants.INSTANTS, 3)
        raise ConfigurationError(
            f"no alarm can watch '{printable(value, 60)}' over a short window; nearest that one can: {offers}"
        )
    return value


@dataclass(frozen=True, slots=True, kw_only=True)
class AlarmRule:
    """Raise when the quantity is beyond the limit for ``hold_s``; clear when it is well inside again for as long."""

    quantity: Annotated[str, watchable]
    below: float | None = None
    above: float | None = None
    clear: float | None = None
    """Back inside this limit the alarm clears; None: the raising limit."""
    hold_s: Duration = field(default=0.0, metadata={"key": "hold"})
    over_s: Duration = field(default=DEFAULT_WINDOW_S, metadata={"key": "over"})
    """Length of the window."""
    severity: Severity = "warning"
    note: str = ""
    source: str = ""

    def __post_init__(self) -> None:
        if (self.below is None) == (self.above is None):
            raise ConfigurationError(f"'{self.quantity}' needs exactly one of below, above")
        if not 1.0 <= self.over_s <= LONGEST_WINDOW_S:
            raise ConfigurationError(f"over = {self.over_s:g} s: a window lies between 1 s and 1 h")
        if self.below is not None and self.clear_limit < self.below:
            raise ConfigurationError(f"clear = {self.clear:g} must not lie below below = {self.below:g}")
        if self.above is not None and self.clear_limit > self.above:
            raise ConfigurationError(f"clear = {self.clear:g} must not lie above above = {self.above:g}")

    @property
    def limit(self) -> float:
        """The limit that raises."""
        if self.below is not None:
            return self.below
        assert self.above is not None
        return self.above

    @property
    def clear_limit(self) -> float:
        return self.limit if self.clear is None else self.clear

    def beyond(self, value: float) -> bool:
        """Whether the value is past the raising limit."""
        return value < self.limit if self.below is not None else value > self.limit

    def recovered(self, value: float) -> bool:
        """Whether the value is back on the good side of the clearing limit."""
        return value >= self.clear_limit if self.below is not None else value <= self.clear_limit

    def worse(self, one: float, other: float) -> float:
        """The worse of two values."""
        return min(one, other) if self.below is not None else max(one, other)


@dataclass(frozen=True, slots=True, kw_only=True)
class _File:
    alarm: tuple[AlarmRule, ...] = ()


def default_alarms() -> tuple[AlarmRule, ...]:
    """The alarms of a run whose criteria name none."""
    text = (resources.files("gnssmon.alarms") / "presets" / "default.toml").read_text(encoding="utf-8")
    return load(_File, text, name="preset alarms").alarm
