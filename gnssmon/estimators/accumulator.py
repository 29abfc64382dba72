"""The one law of every accumulator, said once.

    update(a); update(b)    gives the same answers as    update(a and b joined)
    x.merge(y)              gives the same answers as    x having seen what y saw, after its own

to the rounding of sums, for any cut, also one that leaves an empty part or a part of a single sample. From it follow
windows of time, the use of all cores for a log, and the archive of many logs: nothing else has to be proved for them.
"""

from __future__ import annotations

from typing import Protocol, Self


class Accumulator(Protocol):
    """Sufficient statistics of a stream; each kind has its own ``update`` and its own read-only answers."""

    def merge(self, other: Self) -> None:
        """Take in what ``other`` saw, later in the stream than all that this one saw. ``other`` stays as it is."""
