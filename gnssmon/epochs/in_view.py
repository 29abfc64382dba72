"""Satellites in view just now: the latest complete GSV set of each talker and signal.

For people who look at a live sky. A set counts once all its parts 1 to n have come in order, replaces the one before,
and is gone when it has not been renewed for three of its own periods. Statistics do not use this: to them every group
of every part is evidence.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from gnssmon.constellations.identity import named_system, satellite_codes, signal_rows
from gnssmon.epochs.statements import stated_times
from gnssmon.nmea.columns import Columns, Table
from gnssmon.utc import DAY_MS

PERIODS_KEPT = 3
"""Common practice, no source."""

UNKNOWN_PERIOD_MS = 10_000
"""Taken for the period of a set that has come once only: slower ones are rare."""

MOST_SETS = 64
"""Talkers times signals; no receiver has so many, but noise without checksums might."""

MOST_PARTS = 32
"""Of one set; the standard allows 9."""

Key = tuple[bytes, int]


@dataclass(frozen=True, slots=True)
class Group:
    """One satellite as one set lists it."""

    satellite: int
    """Code, see ``constellations.identity``."""
    signal: int
    """Row of ``SIGNALS``, -1 not stated."""
    elevation_deg: float
    azimuth_deg: float
    cn0_dbhz: float
    """NaN not stated."""


@dataclass(frozen=True, slots=True)
class _Set:
    groups: list[Group]
    time_ms: int
    period_ms: int

    def gone(self, now_ms: int) -> bool:
        return (now_ms - self.time_ms) % DAY_MS > PERIODS_KEPT * self.period_ms


class InView:
    """The sky of one stream."""

    def __init__(self) -> None:
        self._sets: dict[Key, _Set] = {}
        self._parts: dict[Key, tuple[int, list[Group]]] = {}  # number of the last part that came, and all groups so far
        self._now_ms = 0  # time of day

    def update(self, columns: Columns, first: int, count: int) -> None:
        """Take in the GSV sentences among ``count`` ones from sequence ``first`` on, the last ones of a block."""
        time_ms, _ = stated_times(columns, first, count)
        timed = np.flatnonzero(time_ms >= 0)
        times = np.concatenate(([self._now_ms], time_ms[timed]))
        table = columns.tables.get("GSV")
        if table is not None and len(table):
            begin = int(np.searchsorted(table.sequence, first))
            latest = np.searchsorted(timed, table.sequence[begin:] - first)  # how many times stand before
            self._take(table, columns, begin, times[latest].tolist())
        self._now_ms = int(times[-1])

    def groups(self) -> list[Group]:
        """Return what the sets in force list; a satellite stands there once for each of its signals."""
        self._sets = {key: kept for key, kept in self._sets.items() if not kept.gone(self._now_ms)}
        return [group for kept in self._sets.values() for group in kept.groups]

    def _take(self, table: Table, columns: Columns, begin: int, times: list[int]) -> None:
        listed = _listed(table, columns, begin)
        tail = table.rows(slice(begin, None))
        talkers, signals = tail.talker.tolist(), tail.fields["signal_id"].tolist()
        numbers, totals = tail.fields["number"].tolist(), tail.fields["total"].tolist()
        for row, (talker, signal, number, total) in enumerate(zip(talkers, signals, numbers, totals, strict=True)):
            key = (talker, signal)
            came, groups = self._parts.pop(key, (0, []))
            if number == 1:
                groups = []
            elif number != came + 1 or number > MOST_PARTS:
                continue  # a part is missing: the set before stays until the next whole one
            groups = groups + listed[row]
            if number < total and len(self._parts) < MOST_SETS:
                self._parts[key] = (number, groups)
            elif number == total:
                self._renew(key, groups, times[row])

    def _renew(self, key: Key, groups: list[Group], time_ms: int) -> None:
        before = self._sets.pop(key, None)
        period_ms = UNKNOWN_PERIOD_MS
        if before is not None:
            period_ms = (time_ms - before.time_ms) % DAY_MS or before.period_ms
        if len(self._sets) < MOST_SETS:
            self._sets[key] = _Set(groups, time_ms, period_ms)


def _listed(table: Table, columns: Columns, begin: int) -> list[list[Group]]:
    """The groups of each GSV sentence from row ``begin`` on; those without a satellite number are left out."""
    listed: list[list[Group]] = [[] for _ in range(begin, len(table))]
    rows = columns.satellites
    start = int(np.searchsorted(rows.sentence, begin))
    chosen = np.flatnonzero(rows.number[start:] >= 0) + start
    sentence = rows.sentence[chosen]
    tail = table.rows(slice(begin, None))
    satellite = satellite_codes(named_system(tail.talker)[sentence - begin], rows.number[chosen])
    signal = signal_rows(satellite, tail.fields["signal_id"].astype(np.uint8)[sentence - begin])
    values = (satellite, signal, rows.elevation_deg[chosen], rows.azimuth_deg[chosen], rows.cn0_dbhz[chosen])
    for row, group in zip((sentence - begin).tolist(), zip(*(v.tolist() for v in values), strict=True), strict=True):
        listed[row].append(Group(*group))
    return listed
