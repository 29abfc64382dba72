"""The position scatter: east and north in metres with equal axes, rings, ellipse, reference; and the drift."""

from __future__ import annotations

import math

import numpy as np

from gnssmon.dashboard.drawing import FARTHEST, Grid, Plot, Size, ticks
from gnssmon.dashboard.panels.panel import QUALITIES, Panel, metres, nothing, number, value
from gnssmon.snapshot import Snapshot
from gnssmon.statistics.pictures import ScatterPicture

NUMBERS = 24
"""Cells for the numbers beside the plot."""

NARROWEST_PLOT = 20

SMALLEST_M = 0.001
"""Half width of a plot of positions that do not differ."""

DEGREE_M = 111_320.0
"""Of latitude, about; only to lay cells on the ground."""

STEP = 1.4
"""From one scale of the plot to the next."""

BASE_TONES = ("bad", "one", "two", "two", "good", "doubt", "doubt", "quiet", "quiet")
"""Dots by GGA quality; the qualities seen are also named beside the plot."""


def render(snapshot: Snapshot, size: Size) -> Grid:
    """Draw the cloud, its CEP50 and R95 rings about the mean, and its numbers."""
    picture = snapshot.pictures.scatter
    if picture.origin is None or not len(picture.east_m):
        return nothing(size, "no positions in this window yet: a fix (GGA, GNS, RMC or GLL with a position) is needed")
    grid = Grid(size)
    beside = size.width >= NUMBERS + NARROWEST_PLOT and size.height >= 6
    width = size.width - (NUMBERS + 1 if beside else 0)
    if width >= 8 and size.height >= 4:
        _plot(grid, picture, width, size.height)
    if beside:
        _numbers(grid, snapshot, picture, width + 1)
    return grid


def _plot(grid: Grid, picture: ScatterPicture, width: int, height: int) -> None:
    mean_east, mean_north = picture.mean_m[:2] if picture.mean_m else (0.0, 0.0)
    # In steps, so that the whole cloud does not move whenever the ring grows by a hair.
    half = max(picture.r95_m if math.isfinite(picture.r95_m) else 0.0, SMALLEST_M) * 1.1
    half = STEP ** math.ceil(math.log(min(half, FARTHEST)) / math.log(STEP))
    if picture.about == "reference":
        # The reference stays in sight unless it is so far that the cloud would be a dot.
        away = max(abs(mean_east), abs(mean_north))
        half = max(half, away * 1.2 if away < 20.0 * half else half)
    middle = (mean_east / 2, mean_north / 2) if picture.about == "reference" else (mean_east, mean_north)
    plot = _anchored(grid, picture, (0, 0, width, height - 1), middle, half)
    for edge in (picture.cep50_m, picture.r95_m):
        _ring(plot, mean_east, mean_north, edge)
    order = np.argsort(picture.quality, kind="stable")
    for i in order.tolist():
        quality = int(picture.quality[i])
        tone = BASE_TONES[quality] if 0 <= quality < len(BASE_TONES) else "bad"
        plot.point(float(picture.east_m[i]), float(picture.north_m[i]), tone, "+")
    plot.draw()
    plot.text(mean_east, mean_north, "×", "strong")
    if picture.about == "reference":
        plot.text(0.0, 0.0, "▲", "strong")
    plot.text(mean_east, plot.y_range[1] - 1e-9 * half, "N", "quiet")
    east = picture.r95_m if math.isfinite(picture.r95_m) else half
    plot.text(mean_east + east * 0.71, mean_north + east * 0.71, "R95", "line")
    _scale(grid, plot, height - 1)


def _ring(plot: Plot, east: float, north: float, radius: float) -> None:
    """A ring on widths of a cell: it moves when it has moved by one, not a little with every epoch."""
    dot = (plot.x_range[1] - plot.x_range[0]) / plot.width
    places = [(v - origin) / dot for v, origin in ((east, plot.x_range[0]), (north, plot.y_range[0]), (radius, 0.0))]
    if all(math.isfinite(v) and abs(v) < FARTHEST for v in places):
        x, y, size = (round(v) * dot for v in places)
        plot.ellipse(plot.x_range[0] + x, plot.y_range[0] + y, size, size, 0.0, "line")


def _anchored(
    grid: Grid, picture: ScatterPicture, box: tuple[int, int, int, int], middle: tuple[float, float], half: float
) -> Plot:
    """A plot about ``middle`` whose cells lie fast on the ground: the mean creeps, but no dot moves with it.

    The cloud is given from its own mean. To leave what was drawn where it is (and unpainted), the middle of the plot
    is put on a whole number of cells from the equator and the zero meridian.
    """
    plot = Plot(grid, box, (-half, half), (-half, half), equal=True)
    if picture.origin is None or plot.width < 1 or plot.height < 1:
        return plot
    latitude, longitude = picture.origin[:2]
    ground = longitude * DEGREE_M * math.cos(math.radians(round(latitude, 2))), latitude * DEGREE_M
    cell = (plot.x_range[1] - plot.x_range[0]) / plot.width, (plot.y_range[1] - plot.y_range[0]) / plot.height
    if not all(math.isfinite(v) and abs(v) < FARTHEST for v in (*ground, *middle)):
        return plot
    east, north = (round((g + m) / c) * c - g for g, m, c in zip(ground, middle, cell, strict=True))
    return Plot(grid, box, (east - half, east + half), (north - half, north + half), equal=True)


def _scale(grid: Grid, plot: Plot, y: int) -> None:
    """A rule of a round length, as long as that length is in the plot in both directions."""
    low, high = plot.x_range
    marks = ticks(low, high, 4)
    length = marks[1] - marks[0] if len(marks) > 1 else (high - low) / 2
    cells = max(1, round(length / (high - low) * plot.width))
    x = grid.put(0, y, "├" + "─" * (cells - 1) + "┤", "quiet")
    grid.put(x + 1, y, f"{_short(length)}, same scale both ways", "quiet", max(0, plot.width - x - 1))


def _short(length_m: float) -> str:
    for factor, unit in ((1000.0, "km"), (1.0, "m"), (0.01, "cm"), (0.001, "mm")):
        if length_m >= factor * 0.9999:
            return f"{length_m / factor:g} {unit}"
    return f"{length_m * 1e6:g} µm"


def _numbers(grid: Grid, snapshot: Snapshot, picture: ScatterPicture, x: int) -> None:
    def spread(name: str) -> str:
        return metres(value(snapshot, f"scatter.{name}_m"))

    rows: list[tuple[str, str]] = [
        ("CEP50", spread("cep50")),
        ("R95", spread("r95")),
        ("2DRMS", spread("drms2")),
        ("σ east", spread("east_std")),
        ("σ north", spread("north_std")),
        ("σ up", spread("up_std")),
        ("up 95 %", "±" + spread("vertical_95")),
    ]
    if picture.ellipse_m is not None:
        major, minor, azimuth = picture.ellipse_m
        rows += [("ellipse 1σ", f"{metres(major)}"), ("  minor", metres(minor)), ("  towards", f"{azimuth:.0f}°")]
    if picture.about == "reference" and picture.mean_m is not None:
        rows += [
            ("from mark E", metres(picture.mean_m[0])),
            ("  N", metres(picture.mean_m[1])),
            ("  up", metres(picture.mean_m[2])),
        ]
    positions = value(snapshot, "scatter.positions")
    rows.append(("positions", number(positions, 0)))
    rows.append(("worth", f"{number(value(snapshot, 'scatter.effective_samples'), 1)} indep."))
    jumps = value(snapshot, "scatter.jumps")
    if jumps:
        rows.append(("jumps", f"{jumps:.0f}"))
    counts = np.bincount(np.clip(picture.quality, 0, 9).astype(np.int64), minlength=10)
    seen = [QUALITIES[q] for q in np.argsort(-counts).tolist() if q < len(QUALITIES) and counts[q]]
    for y, (label, text) in enumerate(rows):
        grid.put(x, y, label, "quiet")
        grid.right(x + NUMBERS, y, text, "strong" if y < 2 else "")
    grid.wrap(x, len(rows), ", ".join(seen), "quiet", NUMBERS)


PANEL = Panel(
    key="scatter",
    title="Position",
    help="""\
Where the positions of the window lie, in metres east and north of their mean (×), or of the surveyed mark (▲) where \
one was given. A metre has the same length both ways. The rings are CEP50 and R95: they hold 50 % and 95 % of the \
positions. 2DRMS is twice the root of the summed variances; the ellipse is that of one standard deviation.

"Worth" says how many independent positions the window holds: errors last for minutes, so an hour at 1 Hz is far \
fewer than 3600. A position that wanders slowly needs longer observation, not a faster output.

Usual: R95 of 1 to 3 m autonomous, below 1 m differential, 1 to 3 cm with RTK fixed; a round cloud in the tropics, \
longer north to south at high latitudes (common practice, no source).

If it is not: a cloud in two clumps points to jumps (reflections, changing satellites); a long thin one to a sky that \
is blocked on one side.""",
    render=render,
)
