"""Before against after: what got better, what got worse, and what difference this much data could have shown.

Works on two results (the JSON objects of ``gnssmon check``). Levels are compared at matched elevation and signal,
horizons at matched azimuth; the rest by the quantities and their intervals.

Levels: differences per elevation are averaged. Their spread from one stretch of elevation to the next is the error of
the mean, but not less than what comes from having seen other satellites. What all satellites share, the slow drift of
receiver and amplifier, cannot be seen from inside one log and is added; without it 17 to 58 % of comparisons of
unchanged sites raised a false alarm in simulation.

Intervals of differences of two quantities: from the interval of each (G. Y. Zou & A. Donner, Statistics in Medicine 27,
2008). A row is *better* or *worse* when its interval excludes zero. The outcome over all rows asks for more: with m
rows each must be clear at an m-th of the error (Bonferroni), so that looking at many things finds no ghost.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from gnssmon.estimators.uncertainty import count_interval, normal
from gnssmon.quantities import DEFAULT_CONFIDENCE
from gnssmon.statistics import catalogue

Outcome = Literal["better", "worse", "mixed", "no difference shown", "cannot be compared"]
Interval = tuple[float, float]
Floats = npt.NDArray[np.float64]
Result = Mapping[str, Any]

POWER_FACTOR = 0.8416
"""Normal quantile of 80 %: a true difference of the smallest size named is found in four comparisons of five."""

DRIFT_DB = 0.21
"""√2 times 0.15 dB, the slow drift of receiver and amplifier between two logs. From simulation."""

SATELLITE_DB = 1.0
"""How far satellites of one signal differ from one another at the same elevation: powers, blocks, antennas. Two logs
that saw different ones differ by √(2/n) of it, n satellites received on average. Common practice, no source."""

FEWEST_SATELLITES = 8.0
"""Taken where the number received is not known."""

CLUSTER_DEG = 15.0
"""Stretch of elevation that one satellite passes in an hour: differences within it are not independent."""

FEWEST_REPORTS = 60
"""Levels in a bin of elevation and signal, in each log, below which the bin does not count."""

FEWEST_CLUSTERS = 3

MOST_FREEDOM = 1e6
"""Degrees of freedom that are as good as infinite."""

QUANTITIES: tuple[tuple[str, Literal["lower", "higher"]], ...] = (
    ("scatter.r95_m", "lower"),
    ("scatter.vertical_95_m", "lower"),
    ("fix.share_none", "lower"),
    ("fix.share_rtk_fixed", "higher"),
    ("satellites.used_mean", "higher"),
    ("satellites.tracked_mean", "higher"),
)
"""What is compared beside levels, horizon and completeness, and which direction is better."""

OPTIONAL = ("fix.share_rtk_fixed",)
"""Not a word about these where neither run has any of it."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Difference:
    """One thing before and after. ``difference`` is after minus before."""

    name: str
    """A quantity's name; ``level`` over all signals, ``level.G1`` of one; ``horizon``."""
    unit: str
    better: Literal["lower", "higher"]
    """Which direction is an improvement."""
    before: float | None
    after: float | None
    difference: float | None
    interval: Interval | None
    confidence: float
    smallest: float | None
    """The smallest true difference that would have been found in four of five such comparisons."""
    outcome: Outcome
    note: str
    detail: bool = False
    """Part of another row: does not count for the outcome over all."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Comparison:
    outcome: Outcome
    differences: tuple[Difference, ...]
    notes: tuple[str, ...] = ()


def compare(before: Result, after: Result, *, confidence: float = DEFAULT_CONFIDENCE) -> Comparison:
    """Compare two results; never raises for what they lack: such rows *cannot be compared*, with the reason."""
    rows = (
        *_levels(before, after, confidence),
        _horizon(before, after, confidence),
        _completeness(before, after, confidence),
        *(
            _quantity(name, better, before, after, confidence)
            for name, better in QUANTITIES
            if name not in OPTIONAL or _number(before, name) or _number(after, name)
        ),
    )
    return Comparison(outcome=_overall(rows, confidence), differences=rows, notes=tuple(_notes(before, after)))


def _overall(rows: tuple[Difference, ...], confidence: float) -> Outcome:
    told = [row for row in rows if not row.detail and row.interval is not None]
    if not told:
        return "cannot be compared"
    stretch = normal(1.0 - (1.0 - confidence) / len(told)) / normal(confidence)
    found = set()
    for row in told:
        assert row.interval is not None
        assert row.difference is not None
        low = row.difference - stretch * (row.difference - row.interval[0])
        high = row.difference + stretch * (row.interval[1] - row.difference)
        found.add(_direction((low, high), row.better))
    found.discard("no difference shown")
    if len(found) == 2:
        return "mixed"
    return found.pop() if found else "no difference shown"


def _direction(interval: Interval, better: str) -> Outcome:
    if interval[0] <= 0.0 <= interval[1]:
        return "no difference shown"
    return "better" if (interval[0] > 0.0) == (better == "higher") else "worse"


def _row(
    name: str,
    unit: str,
    better: Literal["lower", "higher"],
    values: tuple[float | None, float | None],
    told: tuple[float, Interval] | str,
    confidence: float,
    *,
    note: str = "",
    detail: bool = False,
) -> Difference:
    """A finished row; ``told`` is the difference with its interval, or why there is none."""
    before, after = values
    difference, interval, smallest = None, None, None
    outcome: Outcome = "cannot be compared"
    if isinstance(told, str):
        note = told
        if before is not None and after is not None:
            difference = after - before
    else:
        difference, interval = told
        half = max(interval[1] - difference, difference - interval[0])
        smallest = half * (1.0 + POWER_FACTOR / normal(confidence))
        outcome = _direction(interval, better)
    return Difference(
        name=name,
        unit=unit,
        better=better,
        before=before,
        after=after,
        difference=difference,
        interval=interval,
        confidence=confidence,
        smallest=smallest,
        outcome=outcome,
        note=note,
        detail=detail,
    )


# Levels


def _levels(before: Result, after: Result, confidence: float) -> Iterator[Difference]:
    """A row over all signals, then one for each signal of either log."""
    elevation_deg = _floats(before["levels"]["elevation_deg"])
    one, other = before["levels"]["signals"], after["levels"]["signals"]
    if list(elevation_deg) != list(_floats(after["levels"]["elevation_deg"])):
        one = other = {}
    shared = [label for label in one if label in other]
    tables = {label: _matched(one[label], other[label]) for label in shared}
    received = [_number(side, "satellites.tracked_mean") or FEWEST_SATELLITES for side in (before, after)]
    floor = 2.0 * SATELLITE_DB**2 / max(min(received), 1.0)
    told: tuple[float, Interval] | str = "no signal has its levels in both logs"
    values: tuple[float | None, float | None] = (None, None)
    if shared:
        weight = np.sum([table[0] for table in tables.values()], axis=0)
        first, second = (_pooled(list(tables.values()), side, weight) for side in (1, 2))
        told, values = _clustered(first, second, weight, elevation_deg, confidence, floor)
    yield _row("level", "dB-Hz", "higher", values, told, confidence, note="all signals, at matched elevation")
    for label in sorted({*one, *other}):
        name = f"level.{label}"
        if label in tables:
            weight, first, second = tables[label]
            told, values = _clustered(first, second, weight, elevation_deg, confidence, floor)
            yield _row(name, "dB-Hz", "higher", values, told, confidence, note="at matched elevation", detail=True)
        else:
            missing = "after" if label in one else "before"
            yield _row(name, "dB-Hz", "higher", (None, None), f"not received {missing}", confidence, detail=True)


def _pooled(tables: list[tuple[Floats, Floats, Floats]], side: int, weight: Floats) -> Floats:
    """Mean over the signals per bin of elevation, NaN where none is matched."""
    total = np.sum([np.where(table[0] > 0, table[side], 0.0) * table[0] for table in tables], axis=0)
    mean = np.full(len(weight), np.nan)
    np.divide(total, weight, out=mean, where=weight > 0)
    return mean


def _matched(one: Result, other: Result) -> tuple[Floats, Floats, Floats]:
    """Weight and the two mean levels per bin of elevation; weight 0 where either log has too few."""
    counts = np.minimum(_floats(one["count"]), _floats(other["count"]))
    first, second = _floats(one["mean_dbhz"]), _floats(other["mean_dbhz"])
    usable = (counts >= FEWEST_REPORTS) & np.isfinite(first) & np.isfinite(second)
    return np.where(usable, counts, 0.0), first, second


def _clustered(
    first: Floats, second: Floats, weight: Floats, elevation_deg: Floats, confidence: float, floor: float
) -> tuple[tuple[float, Interval] | str, tuple[float | None, float | None]]:
    """Difference of the mean levels with its interval, and the two levels.

    Its variance is the spread between stretches of elevation, at least ``floor``, and the drift. Each stretch counts
    alike: there are many more reports near the horizon than overhead.
    """
    from scipy.special import stdtrit

    usable = weight > 0
    cluster = (elevation_deg[usable] // CLUSTER_DEG).astype(np.int64)
    total = np.bincount(cluster, weights=weight[usable])
    held = total > 0
    count = int(held.sum())
    if count < FEWEST_CLUSTERS:
        return f"levels are matched in fewer than {FEWEST_CLUSTERS} stretches of elevation", (None, None)
    before, after = (
        np.bincount(cluster, weights=weight[usable] * side[usable])[held] / total[held] for side in (first, second)
    )
    difference = after - before
    value = float(difference.mean())
    spread = float(difference.var(ddof=1)) / count
    variance = max(spread, floor) + DRIFT_DB**2
    # Degrees of freedom of a sum of a measured and a known variance (B. L. Welch 1947, F. E. Satterthwaite 1946).
    freedom = min((count - 1) * (variance / spread) ** 2, MOST_FREEDOM) if spread > 0 else MOST_FREEDOM
    half = float(stdtrit(freedom, 0.5 + confidence / 2.0)) * math.sqrt(variance)
    return (value, (value - half, value + half)), (float(before.mean()), float(after.mean()))


# Horizon


def _horizon(before: Result, after: Result, confidence: float) -> Difference:
    """Mean change of the estimated horizon over the sectors that both logs know."""
    one, other = (
        {key: _floats(side["horizon"][key]) for key in ("deg", "low_deg", "high_deg")} for side in (before, after)
    )
    known = np.ones(len(one["deg"]), dtype=bool)
    for side in (one, other):
        for column in side.values():
            known &= np.isfinite(column)
    count = int(known.sum())
    if count == 0:
        return _row("horizon", "deg", "lower", (None, None), "no sector's horizon is known in both logs", confidence)
    first, second = one["deg"][known], other["deg"][known]
    value = float((second - first).mean())
    down = np.hypot(second - other["low_deg"][known], one["high_deg"][known] - first)
    up = np.hypot(other["high_deg"][known] - second, first - one["low_deg"][known])
    told = value, (value - float(np.linalg.norm(down)) / count, value + float(np.linalg.norm(up)) / count)
    higher = np.flatnonzero(known & (other["low_deg"] > one["high_deg"]))
    lower = np.flatnonzero(known & (other["high_deg"] < one["low_deg"]))
    words = [f"{count} sectors of 10 degrees known in both logs"]
    for name, sectors in (("higher", higher), ("lower", lower)):
        if len(sectors):
            words.append(f"{name} at azimuth {', '.join(f'{10 * sector}-{10 * sector + 10}' for sector in sectors)}")
    values = float(first.mean()), float(second.mean())
    return _row("horizon", "deg", "lower", values, told, confidence, note="; ".join(words))


# Quantities


def _completeness(before: Result, after: Result, confidence: float) -> Difference:
    """Completeness with the uncertainty of how many gaps a stream like this has, and how long they are."""
    name = "stream.completeness"
    sides = [_gap_interval(side, confidence) for side in (before, after)]
    values = _number(before, name), _number(after, name)
    if sides[0] is None or sides[1] is None or values[0] is None or values[1] is None:
        return _row(name, "share", "higher", values, "not known in both logs", confidence)
    told = _between(values[0], sides[0], values[1], sides[1])
    return _row(
        name, "share", "higher", values, told, confidence, note="gaps taken as random events of their mean length"
    )


def _gap_interval(side: Result, confidence: float) -> Interval | None:
    complete, epochs, gaps = (_number(side, f"stream.{name}") for name in ("completeness", "epochs", "gaps"))
    if complete is None or epochs is None or gaps is None or not complete > 0.0 or not epochs > 0.0:
        return None
    due = epochs / complete
    missing = due - epochs
    length = missing / gaps if gaps else 1.0
    low, high = count_interval(round(gaps), confidence)
    return min(1.0 - high * length / due, complete), max(1.0 - low * length / due, complete)


def _quantity(
    name: str, better: Literal["lower", "higher"], before: Result, after: Result, confidence: float
) -> Difference:
    quantity = catalogue.find(name)
    unit = quantity.unit if quantity is not None else ""
    first, second = _number(before, name), _number(after, name)
    one, other = before["intervals"].get(name), after["intervals"].get(name)
    told: tuple[float, Interval] | str
    if first is None or second is None:
        told = "not known in both logs"
    elif one is None or other is None or one[0] == one[1] or other[0] == other[1]:
        told = "how far it varies from run to run is not known"
    else:
        told = _between(first, (one[0], one[1]), second, (other[0], other[1]))
    return _row(name, unit, better, (first, second), told, confidence)


def _between(first: float, one: Interval, second: float, other: Interval) -> tuple[float, Interval]:
    """Difference of two independent estimates and its interval, from the interval of each (Zou & Donner 2008)."""
    value = second - first
    low = value - math.hypot(second - other[0], one[1] - first)
    high = value + math.hypot(other[1] - second, first - one[0])
    return value, (low, high)


def _number(side: Result, name: str) -> float | None:
    value = side["quantities"].get(name)
    return float(value) if isinstance(value, int | float) else None


def _floats(values: list[float | None]) -> Floats:
    return np.array([math.nan if value is None else value for value in values], dtype=np.float64)


def _notes(before: Result, after: Result) -> Iterator[str]:
    """What a reader should know before believing any row."""
    if before["source"]["sha256"] and before["source"]["sha256"] == after["source"]["sha256"]:
        yield "Both are the same input."
    first, second = _number(before, "stream.duration_s"), _number(after, "stream.duration_s")
    if first is not None and second is not None and max(first, second) > 4.0 * max(min(first, second), 1.0):
        yield "One run is more than four times as long as the other: its slow errors show, the other's do not."
    if before["source"]["simulated"] or after["source"]["simulated"]:
        yield "Simulated data take part."
