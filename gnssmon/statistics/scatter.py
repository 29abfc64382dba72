"""East, north, up: where the antenna is, how far the positions scatter, how far they are from a reference."""

from __future__ import annotations

import math
from typing import ClassVar, Self

import numpy as np
import numpy.typing as npt

from gnssmon.epochs.batch import EpochBatch
from gnssmon.geodesy import geoid
from gnssmon.quantities import DEFAULT_CONFIDENCE, NOTHING, Estimate, Quantity, exact
from gnssmon.statistics.minutes import Minutes
from gnssmon.statistics.pictures import MOST_POINTS, ScatterPicture
from gnssmon.statistics.positions import Cloud, Positions
from gnssmon.statistics.scatter_numbers import numbers
from gnssmon.statistics.scatter_quantities import QUANTITIES
from gnssmon.statistics.subject import EVERYTHING, Site, Span

Floats = npt.NDArray[np.float64]

MOST_ANSWERS = 8
"""Windows whose answers are kept until the next position comes."""


class Scatter:
    """Positions of a window: spread, rings, ellipse, mean, offset from the reference."""

    QUANTITIES: ClassVar[tuple[Quantity, ...]] = QUANTITIES

    def __init__(self, site: Site) -> None:
        self._site = site
        self._positions = Positions()
        self._separation = Minutes(sums=("total", "count"))
        self._clouds: dict[Span, Cloud | None] = {}
        self._answers: dict[tuple[Span, float], dict[str, Estimate]] = {}

    def update(self, batch: EpochBatch) -> None:
        """Take in the positions of closed epochs."""
        fixed = np.flatnonzero(batch.fixed_position)
        if not len(fixed):
            return
        self._forget_answers()
        self._positions.update(batch, fixed)
        separation_m = batch.separation_m[fixed]
        stated = np.isfinite(separation_m)
        self._separation.update(
            batch.minute[fixed], {"total": np.where(stated, separation_m, 0.0), "count": stated.astype(np.float64)}
        )

    def merge(self, other: Self) -> None:
        """Take in the positions of a later part of the stream."""
        self._forget_answers()
        self._positions.merge(other._positions)
        self._separation.merge(other._separation)

    def summary(self, span: Span = EVERYTHING, *, confidence: float = DEFAULT_CONFIDENCE) -> dict[str, Estimate]:
        """Every quantity by name; ``NOTHING`` where there are too few positions."""
        key = (span, confidence)
        if key not in self._answers:
            answers = {quantity.name: NOTHING for quantity in self.QUANTITIES}
            cloud = self._cloud(span)
            if cloud is not None:
                answers |= numbers(cloud, self._site.reference, confidence)
                answers |= self._geoid(span, cloud)
            if len(self._answers) >= MOST_ANSWERS:
                self._answers.clear()
            self._answers[key] = answers
        return dict(self._answers[key])

    def picture(self, span: Span = EVERYTHING) -> ScatterPicture:
        """Positions, ellipse and rings for drawing."""
        return _picture(self._cloud(span), self._site, self.summary(span))

    def _cloud(self, span: Span) -> Cloud | None:
        if span not in self._clouds:
            if len(self._clouds) >= MOST_ANSWERS:
                self._clouds.clear()
            self._clouds[span] = self._positions.cloud(span)
        return self._clouds[span]

    def _geoid(self, span: Span, cloud: Cloud) -> dict[str, Estimate]:
        """The stated separation of the minutes that the window touches, and how far EGM96 is from it."""
        _, columns = self._separation.within(span)
        count = int(columns["count"].sum())
        if not count:
            return {}
        stated_m = float(columns["total"].sum()) / count
        answers = {"scatter.separation_m": exact(stated_m, count)}
        difference_m = geoid.check(cloud.centre[0], cloud.centre[1], stated_m).difference_m
        if difference_m is not None:
            answers["scatter.geoid_difference_m"] = exact(difference_m, count)
        return answers

    def _forget_answers(self) -> None:
        self._clouds.clear()
        self._answers.clear()


def _picture(cloud: Cloud | None, site: Site, answers: dict[str, Estimate]) -> ScatterPicture:
    about = "mean" if site.reference is None else "reference"
    if cloud is None:
        nothing = np.empty(0)
        return ScatterPicture(
            axis_ms=np.empty(0, dtype=np.int64),
            east_m=nothing,
            north_m=nothing,
            up_m=nothing,
            quality=np.empty(0, dtype=np.int8),
            origin=site.reference,
            about=about,
            mean_m=None,
            ellipse_m=None,
            cep50_m=math.nan,
            r95_m=math.nan,
            minute=np.empty(0, dtype=np.int64),
            minute_mean_m=np.empty((0, 3)),
        )
    enu_m = cloud.enu_m if site.reference is None else cloud.about(site.reference)
    shown = slice(None)
    if len(cloud) > MOST_POINTS:
        shown = np.linspace(0, len(cloud) - 1, MOST_POINTS).astype(np.intp)  # type: ignore[assignment]
    minute, minute_mean_m = _minute_means(cloud.axis_ms, enu_m)

    def number(name: str) -> float:
        value = answers[name].value
        return value if isinstance(value, float) else math.nan

    axes = tuple(number(f"scatter.ellipse_{name}") for name in ("major_m", "minor_m", "azimuth_deg"))
    mean_up_m = float(np.nanmean(enu_m[:, 2])) if np.isfinite(enu_m[:, 2]).any() else math.nan
    return ScatterPicture(
        axis_ms=cloud.axis_ms[shown],
        east_m=enu_m[shown, 0],
        north_m=enu_m[shown, 1],
        up_m=enu_m[shown, 2],
        quality=cloud.quality[shown],
        origin=cloud.centre if site.reference is None else site.reference,
        about=about,
        mean_m=(float(enu_m[:, 0].mean()), float(enu_m[:, 1].mean()), mean_up_m),
        ellipse_m=None if math.isnan(axes[0]) else (axes[0], axes[1], axes[2]),
        cep50_m=number("scatter.cep50_m"),
        r95_m=number("scatter.r95_m"),
        minute=minute,
        minute_mean_m=minute_mean_m,
    )


def _minute_means(axis_ms: npt.NDArray[np.int64], enu_m: Floats) -> tuple[npt.NDArray[np.int64], Floats]:
    minute, row = np.unique(axis_ms // 60_000, return_inverse=True)
    means = np.full((len(minute), 3), np.nan)
    for axis in range(3):
        known = np.isfinite(enu_m[:, axis])
        count = np.bincount(row[known], minlength=len(minute))
        total = np.bincount(row[known], weights=enu_m[known, axis], minlength=len(minute))
        np.divide(total, count, out=means[:, axis], where=count > 0)
    return minute, means
