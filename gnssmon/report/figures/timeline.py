"""Position and fix quality over time."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from gnssmon.report.figures.drawing import (
    FEW_POINTS,
    FULL_MM,
    GREY,
    INK,
    QUALITIES,
    Drawing,
    broken,
    moments,
    time_axis,
)
from gnssmon.snapshot import Snapshot

MOST_BARS = 720
"""More columns than this cannot be told apart on paper; minutes are then taken together."""


def _draw_position(figure: Any, snapshot: Snapshot) -> None:
    picture = snapshot.pictures.scatter
    minute, mean_m = broken(picture.minute, picture.minute_mean_m)
    when = moments(minute * 60_000, snapshot)
    rows = figure.subplots(3, 1, sharex=True)
    for axis, (axes, name) in enumerate(zip(rows, ("east", "north", "up"), strict=True)):
        values = mean_m[:, axis]
        axes.axhline(0.0, color=GREY, linewidth=0.6)
        axes.plot(
            when, values, color=INK, linewidth=0.7, marker="." if len(values) < FEW_POINTS else None, markersize=2.5
        )
        axes.set_ylabel(f"{name}, m")
    time_axis(rows[-1], snapshot)


def _draw_fix(figure: Any, snapshot: Snapshot) -> None:
    picture = snapshot.pictures.fix
    minute, by_quality, used = _thinned(picture.minute, picture.by_quality, picture.used_mean)
    when = moments(minute * 60_000, snapshot)
    step = np.timedelta64(60_000 * max(int(np.median(np.diff(minute))) if len(minute) > 1 else 1, 1), "ms")
    top, bottom = figure.subplots(2, 1, sharex=True, height_ratios=(2, 1))
    total = np.maximum(by_quality.sum(axis=1), 1)
    floor = np.zeros(len(minute))
    for code, (name, colour) in QUALITIES.items():
        share = 100.0 * by_quality[:, code] / total
        if share.any():
            top.bar(when, share, width=step, bottom=floor, align="edge", color=colour, linewidth=0, label=name)
            floor += share
    top.set_ylim(0, 100)
    top.set_ylabel("epochs, %")
    for start_ms, _ in snapshot.pictures.stream.gaps:
        top.axvline(moments(np.array([start_ms]), snapshot)[0], ymin=0.94, color=INK, linewidth=1.2)
    minute, used = broken(minute, used)
    bottom.plot(moments(minute * 60_000, snapshot), used, color=INK, linewidth=0.8, drawstyle="steps-post")
    bottom.set_ylim(bottom=0)
    bottom.set_ylabel("satellites")
    time_axis(bottom, snapshot)
    figure.legend(*top.get_legend_handles_labels(), loc="outside right upper")


def _thinned(
    minute: npt.NDArray[np.int64], by_quality: npt.NDArray[np.int64], used: npt.NDArray[np.float64]
) -> tuple[npt.NDArray[np.int64], npt.NDArray[np.int64], npt.NDArray[np.float64]]:
    """At most ``MOST_BARS`` columns: neighbouring minutes are added up; satellites are those of the first of them."""
    every = -(-len(minute) // MOST_BARS)
    if every <= 1:
        return minute, by_quality, used
    starts = np.arange(0, len(minute), every)
    return minute[starts], np.add.reduceat(by_quality, starts, axis=0), used[starts]


POSITION = Drawing(
    key="position-over-time",
    title="Position over time",
    caption="Mean position of each minute, from the mean of the whole time or from the reference.",
    width_mm=FULL_MM,
    height_mm=75.0,
    drawable=lambda snapshot: len(snapshot.pictures.scatter.minute) > 0,
    draw=_draw_position,
)
FIX = Drawing(
    key="fix-timeline",
    title="Fix quality and satellites in use",
    caption="Above: share of each minute's epochs by quality; marks at the upper edge are gaps in the stream. Below: "
    "satellites in use.",
    width_mm=FULL_MM,
    height_mm=62.0,
    drawable=lambda snapshot: bool(snapshot.pictures.fix.by_quality.any()),
    draw=_draw_fix,
)
