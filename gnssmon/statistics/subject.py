"""What every subject of statistics obeys, and the span of time it is asked about."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar, Protocol, Self

import numpy as np
import numpy.typing as npt

from gnssmon.epochs.batch import EpochBatch
from gnssmon.quantities import DEFAULT_CONFIDENCE, Estimate, Quantity


@dataclass(frozen=True, slots=True)
class Span:
    """Half-open stretch of the time axis (``EpochBatch.axis_ms``); None: open on that side."""

    from_ms: int | None = None
    to_ms: int | None = None

    def holds(self, axis_ms: npt.NDArray[np.int64]) -> npt.NDArray[np.bool_]:
        """Which instants lie inside, shape as given."""
        inside = np.ones(axis_ms.shape, dtype=bool)
        if self.from_ms is not None:
            inside &= axis_ms >= self.from_ms
        if self.to_ms is not None:
            inside &= axis_ms < self.to_ms
        return inside


EVERYTHING = Span()


@dataclass(frozen=True, slots=True, kw_only=True)
class Site:
    """What is known of the site beforehand; all of it optional."""

    reference: tuple[float, float, float] | None = None
    """Where the receiver should say it is: latitude, longitude (deg, WGS 84), ellipsoidal height (m), antenna
    height already added."""
    reference_text: str = ""
    """The reference as the user gave it, with frame, epoch and antenna height, for the report."""
    reference_note: str = ""
    """What is doubtful about it (a datum shift of unknown accuracy); empty: nothing known to be."""
    mask_deg: float = 10.0
    """Elevation above which the sky is judged."""
    baud: int | None = None
    """Of a serial line; None where bytes do not come over one."""


class Subject(Protocol):
    """Sufficient statistics of one subject: exact under any cut of the stream (``merge``)."""

    QUANTITIES: ClassVar[tuple[Quantity, ...]]

    def __init__(self, site: Site) -> None: ...

    def update(self, batch: EpochBatch) -> None:
        """Take in closed epochs; the batch may be empty."""

    def merge(self, other: Self) -> None:
        """Take in what ``other`` (of a later part of the stream) knows; ``other`` is not changed."""

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity of ``QUANTITIES`` by name (families: each member), ``NOTHING`` where not computable."""

    def picture(self, span: Span = EVERYTHING) -> object:
        """What figures and panels draw: one of the classes in ``pictures``."""
