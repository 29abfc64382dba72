"""Spells: how long a state lasted, and how often it changed, for every sample of a stream in a few rows.

Strategy. A state (fix quality, reference station) rarely changes and its samples come at a regular pace. So samples
are kept as runs: first time, step, count, state. A new run starts where the state changes or the step does. A month
of undisturbed 1 Hz data is one row, and any stretch of time can still be cut out to the sample.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.estimators.rows import Rows

Ints = npt.NDArray[np.int64]
Flags = npt.NDArray[np.bool_]

MOST_RUNS = 400_000
"""Newest runs that are kept, 11 MB: four days of a state that changes every second, and years of an ordinary one."""


@dataclass(frozen=True, slots=True)
class Runs:
    """Runs of equal state in stream order; arrays of shape (k,)."""

    first_ms: Ints
    step_ms: Ints
    """Distance between samples of the run; also the distance from the sample before to the first of the run, but for
    the very first run."""
    count: Ints
    state: Ints

    def __len__(self) -> int:
        return len(self.first_ms)

    @property
    def last_ms(self) -> Ints:
        """Time of each run's last sample."""
        return self.first_ms + self.step_ms * (self.count - 1)

    def samples(self) -> tuple[Ints, Ints]:
        """Every sample again: times and states, shapes (n,)."""
        start = np.repeat(np.cumsum(self.count) - self.count, self.count)
        within = np.arange(len(start)) - start
        return np.repeat(self.first_ms, self.count) + within * np.repeat(self.step_ms, self.count), np.repeat(
            self.state, self.count
        )

    def spells(self, chosen: Flags) -> tuple[Ints, Ints, Ints]:
        """Stretches in which ``chosen`` (one flag a run) holds without a break.

        Returns, one entry a stretch, the time of its first sample, of its last sample, and of the first sample after
        it; the last stretch may still last: then the time after is that of its last sample.
        """
        if not len(self):
            return self.first_ms, self.first_ms, self.first_ms
        edge = np.flatnonzero(np.diff(chosen.astype(np.int8), prepend=0, append=0))
        start, stop = edge[::2], edge[1::2]
        last_ms = self.last_ms
        following = np.append(self.first_ms, last_ms[-1])
        return self.first_ms[start], last_ms[stop - 1], following[stop]


class Spells:
    """States of a stream, sample by sample, as runs; the newest ``MOST_RUNS`` runs."""

    def __init__(self) -> None:
        self._rows = Rows({"first_ms": np.int64, "step_ms": np.int64, "count": np.int64, "state": np.int64})
        self._last_ms = 0
        self.forgotten = 0
        """Runs that were dropped because there were too many."""

    def update(self, axis_ms: Ints, state: npt.NDArray[np.integer]) -> None:
        """Take in samples in stream order, shape (n,) each."""
        if not len(axis_ms):
            return
        rows = self._rows
        if not len(rows):
            # The first sample has no step yet; it takes that of the second.
            step_ms = np.diff(axis_ms, prepend=2 * axis_ms[0] - axis_ms[1] if len(axis_ms) > 1 else axis_ms[0])
        else:
            step_ms = np.diff(axis_ms, prepend=self._last_ms)
            if len(rows) == 1 and rows["count"][0] == 1 and rows["step_ms"][0] == 0:
                rows["step_ms"][0] = step_ms[0]
        starts = np.ones(len(axis_ms), dtype=bool)
        starts[1:] = (step_ms[1:] != step_ms[:-1]) | (state[1:] != state[:-1]) | (step_ms[1:] <= 0)
        if len(rows):
            same = rows["step_ms"][-1] == step_ms[0] and rows["state"][-1] == state[0] and step_ms[0] > 0
            starts[0] = not same
        first = np.flatnonzero(starts)
        count = np.diff(first, append=len(axis_ms))
        if not starts[0]:
            rows["count"][-1] += first[0] if len(first) else len(axis_ms)
        rows.append(first_ms=axis_ms[first], step_ms=step_ms[first], count=count, state=state[first])
        self._last_ms = int(axis_ms[-1])
        self._forget()

    def merge(self, other: Spells) -> None:
        """Take in the runs of ``other``, a later part of the stream; ``other`` stays as it is."""
        if not len(other._rows):
            return
        runs = other.within(None, None)
        head = runs.first_ms[:1]
        self.update(head, runs.state[:1])
        rest = runs.count[0] - 1
        if rest:
            self.update(head + runs.step_ms[0], runs.state[:1])
            self._rows["count"][-1] += rest - 1
        self._rows.append(
            first_ms=runs.first_ms[1:], step_ms=runs.step_ms[1:], count=runs.count[1:], state=runs.state[1:]
        )
        self._last_ms = other._last_ms
        self.forgotten += other.forgotten
        self._forget()

    def within(self, from_ms: int | None, to_ms: int | None) -> Runs:
        """The runs inside the half-open stretch of time, cut to the sample; None: open on that side."""
        first_ms, step_ms, count, state = (
            self._rows[name].view(np.int64)[-MOST_RUNS:] for name in ("first_ms", "step_ms", "count", "state")
        )
        if from_ms is None and to_ms is None:
            return Runs(first_ms.copy(), step_ms.copy(), count.copy(), state.copy())
        stride = np.maximum(step_ms, 1)
        low = np.zeros(len(count), dtype=np.int64)
        high = count.copy()
        if from_ms is not None:
            low = np.clip(-((first_ms - from_ms) // stride), 0, count)
        if to_ms is not None:
            high = np.clip(-((first_ms - to_ms) // stride), low, count)
        kept = high > low
        return Runs((first_ms + low * step_ms)[kept], step_ms[kept], (high - low)[kept], state[kept])

    def _forget(self) -> None:
        # Dropped in bulk, at twice the bound, so that a live stream does not copy at every sample.
        surplus = len(self._rows) - MOST_RUNS
        if surplus > MOST_RUNS:
            self._rows.keep(slice(surplus, None))
            self.forgotten += surplus
