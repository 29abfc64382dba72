"""The sky: where satellites are and were, the estimated horizon, and what no satellite has yet shown."""

from __future__ import annotations

import math

import numpy as np

from gnssmon.dashboard.drawing import Grid, Plot, Size
from gnssmon.dashboard.panels.panel import SYSTEM_TONES, Panel, nothing, number, percent, value
from gnssmon.snapshot import Snapshot
from gnssmon.statistics.pictures import CELL_BLOCKED, CELL_MIXED, CELL_OPEN, CELL_UNREACHABLE, Floats, Ints, SkyPicture

BESIDE = 25
"""Cells for the words at the right."""

MARKS = {CELL_OPEN: ("", ""), CELL_BLOCKED: ("x", "bad"), CELL_MIXED: ("~", "doubt"), CELL_UNREACHABLE: (" ", "")}
"""What a cell of the sky is filled with; one of which nothing is known gets a dot."""

POINTS = ("N", "NE", "E", "SE", "S", "SW", "W", "NW")


def render(snapshot: Snapshot, size: Size) -> Grid:
    """Draw the sky as seen from the antenna, north up, zenith in the middle, horizon at the edge."""
    picture, listed = snapshot.pictures.sky, snapshot.receiver.satellites
    if not listed and not picture.tracks:
        return nothing(size, "no satellite directions yet: switch on GSV (satellites in view) in the receiver")
    grid = Grid(size)
    beside = size.width >= BESIDE + 2 * 9
    width = size.width - (BESIDE + 1 if beside else 0)
    width = min(width, 2 * size.height + 6)
    if width >= 10 and size.height >= 5:
        _plot(grid, snapshot, picture, width)
    if beside:
        _words(grid, snapshot, picture, width + 1)
    return grid


def _place(azimuth_deg: float, elevation_deg: float) -> tuple[float, float]:
    """East and north on a disc of radius 90, by zenith distance."""
    radius = 90.0 - elevation_deg
    azimuth = math.radians(azimuth_deg)
    return radius * math.sin(azimuth), radius * math.cos(azimuth)


def _plot(grid: Grid, snapshot: Snapshot, picture: SkyPicture, width: int) -> None:
    plot = Plot(grid, (0, 0, width, grid.height), (-92.0, 92.0), (-92.0, 92.0), equal=True)
    _cells(grid, plot, picture)
    for elevation in (0.0, 30.0, 60.0):
        plot.ellipse(0.0, 0.0, 90.0 - elevation, 90.0 - elevation, 0.0, "line")
    for track in picture.tracks:
        tone = SYSTEM_TONES.get(track.satellite[:1], "")
        for azimuth, elevation, tracked in zip(
            track.azimuth_deg.tolist(), track.elevation_deg.tolist(), track.tracked.tolist(), strict=True
        ):
            if 0.0 <= elevation <= 90.0 and tracked:
                plot.point(*_place(azimuth, elevation), tone, "·")
    plot.draw()
    _horizon(grid, plot, picture)
    for azimuth, name in ((0.0, "N"), (90.0, "E"), (180.0, "S"), (270.0, "W")):
        x, y = plot.cell(*_place(azimuth, 0.0))
        grid.put(x, y, name, "strong")
    plot.text(*_place(0.0, 30.0), "30", "quiet")
    plot.text(*_place(0.0, 60.0), "60", "quiet")
    for one in snapshot.receiver.satellites:
        if one.azimuth_deg is not None and one.elevation_deg is not None and -5.0 <= one.elevation_deg <= 90.0:
            x, y = plot.cell(*_place(one.azimuth_deg, max(0.0, one.elevation_deg)))
            tone = SYSTEM_TONES.get(one.satellite[:1], "") if one.cn0_dbhz else "quiet"
            text = one.satellite[:3] if one.cn0_dbhz else one.satellite[:1].lower()
            grid.put(min(x, plot.width - len(text)), y, text, tone)


def _cells(grid: Grid, plot: Plot, picture: SkyPicture) -> None:
    """Fill each cell of the disc by what is known of its part of the sky."""
    columns, (west, east_end) = np.arange(plot.width), plot.x_range
    east = west + (columns + 0.5) / plot.width * (east_end - west)
    for y in range(grid.height):
        north = plot.y_range[1] - (y + 0.5) / plot.height * (plot.y_range[1] - plot.y_range[0])
        elevation = 90.0 - np.hypot(east, north)
        azimuth = np.degrees(np.arctan2(east, north)) % 360.0
        above = np.flatnonzero(elevation >= 0.0)
        states = _states(picture, azimuth[above], elevation[above])
        for x, state in zip(above.tolist(), states.tolist(), strict=True):
            character, tone = MARKS.get(state, ("·", "quiet"))
            if character:
                grid.put(x, y, character, tone)


def _states(picture: SkyPicture, azimuth_deg: Floats, elevation_deg: Floats) -> Ints:
    """The state of the part of the sky in each direction; 0, not known, where no part lies there."""
    if not len(picture.state):
        return np.zeros(azimuth_deg.shape, dtype=np.int64)
    azimuth, elevation = azimuth_deg[:, None], elevation_deg[:, None]
    inside = (picture.azimuth_from_deg <= azimuth) & (azimuth < picture.azimuth_to_deg)
    inside &= (picture.elevation_from_deg <= elevation) & (elevation < picture.elevation_to_deg)
    return np.where(inside.any(axis=1), picture.state[inside.argmax(axis=1)].astype(np.int64), 0)


def _horizon(grid: Grid, plot: Plot, picture: SkyPicture) -> None:
    for i, elevation in enumerate(picture.horizon_deg.tolist()):
        if math.isfinite(elevation):
            x, y = plot.cell(*_place(10.0 * i + 5.0, min(90.0, max(0.0, elevation))))
            grid.put(x, y, "#", "bad")


def _words(grid: Grid, snapshot: Snapshot, picture: SkyPicture, x: int) -> None:
    y = 0
    for label, name in (
        ("crossed", "sky.coverage_share"),
        ("  of reachable", "sky.coverage_reachable_share"),
        ("blocked", "sky.obstructed_share"),
    ):
        grid.put(x, y, label, "quiet")
        grid.right(x + BESIDE, y, percent(value(snapshot, name)))
        y += 1
    grid.put(x, y, "judged above", "quiet")
    grid.right(x + BESIDE, y, f"{picture.mask_deg:.0f}°")
    y += 2
    y = _highest(grid, picture, x, y)
    words = (
        "G07 here now, with signal",
        "g   the same without",
        "#   estimated horizon",
        "x   blocked, ~ partly",
        "·   not yet known",
    )
    start = max(y + 1, grid.height - len(words))
    for i, text in enumerate(words):
        grid.put(x, start + i, text, "quiet", BESIDE)


def _highest(grid: Grid, picture: SkyPicture, x: int, y: int) -> int:
    """The estimated horizon by eighths of the circle."""
    grid.put(x, y, "horizon by direction", "quiet")
    y += 1
    for i, name in enumerate(POINTS):
        # Ten-degree steps whose middle lies within 22.5° of the direction.
        near = [j for j in range(36) if abs((j * 10 + 5 - i * 45 + 180) % 360 - 180) <= 22.5]
        seen = picture.horizon_deg[near] if len(picture.horizon_deg) == 36 else np.empty(0)
        seen = seen[np.isfinite(seen)]
        highest = float(seen.max()) if len(seen) else None
        column, row = divmod(i, 4)
        grid.put(x + 12 * column, y + row, name, "")
        grid.right(x + 12 * column + 8, y + row, "?" if highest is None else f"{number(highest, 0)}°")
    return y + 4


PANEL = Panel(
    key="sky",
    title="Sky",
    help="""\
The sky above the antenna: north up, the zenith in the middle, the horizon at the edge, rings at 30 and 60 degrees of \
elevation. Capital names are satellites with a signal, small letters satellites that are listed without one. Lines of \
dots are the ways they came. The estimated horizon (#, every ten degrees) is the \
elevation below which satellites stay without signal.

Dots mark parts of the sky that no satellite has shown yet: nothing is known of them, which is not the same as open. \
An empty part towards the pole is where no satellite ever passes.

Usual: a reference station asks for an open sky above 10 degrees (station guidelines of the IGS); what a site needs \
stands in its criteria.

If a direction is blocked: look from the antenna's place in that direction. A few metres of height change more than \
any receiver setting. Observe 24 hours to see the whole sky.""",
    render=render,
)
