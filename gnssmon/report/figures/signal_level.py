"""C/N0 against elevation by signal, and over time."""

from __future__ import annotations

from typing import Any

import numpy as np

from gnssmon.report.figures.drawing import (
    FEW_POINTS,
    FULL_MM,
    HALF_MM,
    MARKERS,
    Drawing,
    broken,
    colour,
    moments,
    time_axis,
)
from gnssmon.snapshot import Snapshot

FEWEST = 20
"""Reports in a bin of elevation below which its mean is left out."""
MOST_BANDS = 3
"""With more signals the shaded spreads would cover each other."""


def _draw_by_elevation(figure: Any, snapshot: Snapshot) -> None:
    picture = snapshot.pictures.level
    axes = figure.subplots()
    for row, label in enumerate(picture.signals):
        enough = picture.count[row] >= FEWEST
        elevation_deg = picture.elevation_deg[enough]
        if not enough.any():
            continue
        axes.plot(
            elevation_deg,
            picture.mean_dbhz[row][enough],
            marker=MARKERS[row % len(MARKERS)],
            color=colour(row),
            label=label,
        )
        if len(picture.signals) <= MOST_BANDS:
            axes.fill_between(
                elevation_deg,
                picture.low_dbhz[row][enough],
                picture.high_dbhz[row][enough],
                color=colour(row),
                alpha=0.15,
                linewidth=0,
            )
    axes.set_xlim(0, 90)
    axes.set_xticks(range(0, 91, 15))
    axes.set_xlabel("elevation, degrees")
    axes.set_ylabel("mean C/N0, dB-Hz")
    if picture.signals:
        figure.legend(*axes.get_legend_handles_labels(), loc="outside lower center", ncols=5)


def _draw_over_time(figure: Any, snapshot: Snapshot) -> None:
    picture = snapshot.pictures.level
    axes = figure.subplots()
    minute, level_dbhz = broken(picture.minute, picture.level_dbhz.T)
    when = moments(minute * 60_000, snapshot)
    mark = "." if len(when) < FEW_POINTS else None
    for row, label in enumerate(picture.signals):
        if np.isfinite(level_dbhz[:, row]).any():
            axes.plot(when, level_dbhz[:, row], color=colour(row), linewidth=0.8, marker=mark, label=label)
    axes.set_ylabel("level, dB-Hz")
    time_axis(axes, snapshot)
    figure.legend(*axes.get_legend_handles_labels(), loc="outside right upper")


BY_ELEVATION = Drawing(
    key="level-by-elevation",
    title="Signal level against elevation",
    caption="Mean C/N0 in steps of 5 degrees, by system letter and band (G1: GPS L1). A good antenna rises smoothly "
    "towards the zenith. Makes of receivers differ by 2 to 3 dB.",
    width_mm=HALF_MM,
    height_mm=96.0,
    drawable=lambda snapshot: bool(snapshot.pictures.level.count.any()),
    draw=_draw_by_elevation,
)
OVER_TIME = Drawing(
    key="level-over-time",
    title="Signal level over time",
    caption="Common level of all satellites by signal, free of their rising and setting. A step in all signals at once "
    "points to supply, connector or interference.",
    width_mm=FULL_MM,
    height_mm=52.0,
    drawable=lambda snapshot: bool(np.isfinite(snapshot.pictures.level.level_dbhz).any()),
    draw=_draw_over_time,
)
