"""Positions in the plane: points, mean, rings, ellipse, reference, on equal axes."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from gnssmon.report.figures.drawing import GREY, HALF_MM, INK, QUALITIES, Drawing
from gnssmon.snapshot import Snapshot

ELLIPSE_95 = 2.4477
"""√χ²(2, 0.95): axes of the 95 % ellipse of normal errors over those of the 1-sigma one."""
VIEW = 1.35
"""Half width of the view in units of R95, where nothing lies far off."""
SMALLEST_M = 0.005
"""A receiver that prints few digits or holds its position still needs a view of some size."""


def _drawable(snapshot: Snapshot) -> bool:
    return len(snapshot.pictures.scatter.east_m) > 0


def _draw(figure: Any, snapshot: Snapshot) -> None:
    from matplotlib.lines import Line2D
    from matplotlib.patches import Circle, Ellipse

    picture = snapshot.pictures.scatter
    axes = figure.subplots()
    mean = picture.mean_m or (0.0, 0.0, 0.0)
    middle, half = _view(snapshot, mean)
    for code, (name, colour) in QUALITIES.items():
        chosen = picture.quality == code
        if chosen.any():
            axes.plot(
                picture.east_m[chosen],
                picture.north_m[chosen],
                ".",
                color=colour,
                markersize=2.2,
                alpha=0.45,
                markeredgewidth=0,
                label=name,
            )
    for radius, style, label in ((picture.cep50_m, "-", "CEP50"), (picture.r95_m, "--", "R95")):
        if math.isfinite(radius):
            axes.add_patch(
                Circle(mean[:2], radius, fill=False, color=INK, linestyle=style, label=f"{label} {radius:.3f} m")
            )
    if picture.ellipse_m is not None:
        major, minor, azimuth_deg = picture.ellipse_m
        axes.add_patch(
            Ellipse(
                mean[:2],
                2 * ELLIPSE_95 * major,
                2 * ELLIPSE_95 * minor,
                angle=90.0 - azimuth_deg,
                fill=False,
                color="#D55E00",
                linestyle=":",
                label="95 % ellipse",
            )
        )
    axes.plot(*mean[:2], "+", color=INK, markersize=7, label="mean")
    if picture.about == "reference":
        axes.plot(0, 0, "x", color="#D55E00", markersize=6, label="reference")
    axes.set_aspect("equal")
    axes.set_xlim(middle[0] - half, middle[0] + half)
    axes.set_ylim(middle[1] - half, middle[1] + half)
    axes.set_xlabel(f"east of the {picture.about}, m")
    axes.set_ylabel(f"north of the {picture.about}, m")
    beyond = int(
        np.count_nonzero(np.maximum(np.abs(picture.east_m - middle[0]), np.abs(picture.north_m - middle[1])) > half)
    )
    if beyond:
        axes.set_title(f"{beyond} of {len(picture.east_m)} points lie outside", fontsize=6.5, color=GREY)
    legend = figure.legend(*axes.get_legend_handles_labels(), loc="outside lower center", ncols=3)
    for handle in legend.legend_handles:
        if isinstance(handle, Line2D) and handle.get_marker() == ".":
            handle.set(markersize=8, alpha=1.0)


def _view(snapshot: Snapshot, mean: tuple[float, float, float]) -> tuple[tuple[float, float], float]:
    """Middle and half width: the R95 ring and nearly all points, and the reference where there is one."""
    picture = snapshot.pictures.scatter
    off = np.maximum(np.abs(picture.east_m - mean[0]), np.abs(picture.north_m - mean[1]))
    radius = picture.r95_m if math.isfinite(picture.r95_m) else float(off.max())
    half = max(VIEW * radius, 1.05 * min(float(off.max()), 2.0 * radius), SMALLEST_M)
    if picture.about != "reference":
        return (mean[0], mean[1]), half
    low = [min(0.0, mean[axis] - half) for axis in (0, 1)]
    high = [max(0.0, mean[axis] + half) for axis in (0, 1)]
    wide = max(high[axis] - low[axis] for axis in (0, 1))
    return ((low[0] + high[0]) / 2, (low[1] + high[1]) / 2), wide / 2 * 1.05


SCATTER = Drawing(
    key="scatter",
    title="Position scatter",
    caption="Each point is one epoch. CEP50 and R95 hold 50 % and 95 % of the points about their mean; the ellipse "
    "would hold 95 % of normally distributed errors.",
    width_mm=HALF_MM,
    height_mm=96.0,
    drawable=_drawable,
    draw=_draw,
)
