"""Signal levels: each signal's mean with its interval, level against elevation, and level over time."""

from __future__ import annotations

import math

import numpy as np

from gnssmon.constellations.systems import SYSTEMS
from gnssmon.dashboard.drawing import Grid, Plot, Size, ticks
from gnssmon.dashboard.panels.panel import Panel, clock_time, nothing, number
from gnssmon.printable import printable
from gnssmon.snapshot import Snapshot
from gnssmon.statistics.pictures import LevelPicture

NARROWEST_DB = 15.0
"""Least span of a level axis: a tenth of a decibel must not look like a cliff."""

TONES = ("one", "two", "three", "four")

LETTERS = "abcdefghijklmnopqrstuvwxyz"
"""A letter stands for a signal in the plots: colour alone would say nothing to many."""

AXIS = 3
"""Cells for the figures at the left of a plot."""


def render(snapshot: Snapshot, size: Size) -> Grid:
    """Draw the table of signals; under or beside it level against elevation, then level over time."""
    picture = snapshot.pictures.level
    if not picture.signals:
        return nothing(size, "no signal levels yet: switch on GSV (satellites in view) in the receiver")
    grid = Grid(size)
    if size.width >= 72:
        table = 36
        _table(grid, snapshot, picture, table, size.height)
        plot = size.width - table - 2
        if size.height >= 16:
            upper = size.height * 3 // 5
            _against_elevation(grid, picture, (table + 2, 0, plot, upper))
            _over_time(grid, snapshot, picture, (table + 2, upper, plot, size.height - upper))
        else:
            _against_elevation(grid, picture, (table + 2, 0, plot, size.height))
    else:
        rows = _table(grid, snapshot, picture, size.width, max(3, size.height // 2))
        _against_elevation(grid, picture, (0, rows, size.width, size.height - rows))
    return grid


def letter(i: int) -> str:
    """What stands for the i-th signal in a plot."""
    return LETTERS[i % len(LETTERS)]


def _name(signal: str) -> str:
    """``G1`` → ``GPS 1``: the system's name, then the band as the receiver or the standard numbers it."""
    for system in SYSTEMS:
        if signal.startswith(system.letter):
            return f"{system.name} {signal[1:]}".strip()
    return printable(signal)


def _table(grid: Grid, snapshot: Snapshot, picture: LevelPicture, width: int, height: int) -> int:
    """One row a signal; returns the row behind it."""
    grid.put(0, 0, "  signal", "quiet")
    grid.right(23, 0, "mean", "quiet")
    grid.right(min(36, width), 0, "95 % of mean", "quiet")
    shown = picture.signals[: max(1, height - 2)]
    for i, signal in enumerate(shown):
        estimate = snapshot.estimates.get(f"cn0.mean_dbhz.{signal}")
        tone = TONES[i % len(TONES)]
        grid.put(0, i + 1, letter(i), tone)
        grid.put(2, i + 1, _name(signal), "", 15)
        mean = estimate.value if estimate is not None and isinstance(estimate.value, float) else None
        grid.right(23, i + 1, number(mean), "strong")
        if estimate is not None and estimate.interval is not None:
            low, high = estimate.interval
            grid.right(min(36, width), i + 1, f"{low:.1f}–{high:.1f}", "quiet")
    y = len(shown) + 1
    if len(picture.signals) > len(shown):
        grid.put(2, y, f"and {len(picture.signals) - len(shown)} more signals", "quiet")
        y += 1
    for label, name in (
        ("all signals", "cn0.mean_dbhz"),
        ("median", "cn0.median_dbhz"),
        ("strongest four", "cn0.strongest4_mean_dbhz"),
    ):
        if y + 1 < height:
            estimate = snapshot.estimates.get(name)
            found = estimate.value if estimate is not None and isinstance(estimate.value, float) else None
            grid.put(2, y, label, "quiet")
            grid.right(23, y, number(found))
            grid.put(24, y, "dB-Hz", "quiet", max(0, width - 24))
            y += 1
    return y


def _range(values: np.ndarray) -> tuple[float, float]:
    finite = values[np.isfinite(values)]
    if not len(finite):
        return 20.0, 50.0
    low, high = float(finite.min()) - 1.0, float(finite.max()) + 1.0
    wider = max(0.0, NARROWEST_DB - (high - low)) / 2.0
    return low - wider, high + wider


def _frame(grid: Grid, plot: Plot, box: tuple[int, int, int, int], title: str) -> None:
    left, top, width, height = box
    grid.put(left, top, title, "quiet", width)
    for level in ticks(*plot.y_range, max(2, (height - 2) // 3)):
        _, y = plot.cell(plot.x_range[0], level)
        if top < y < top + height - 1:
            grid.right(left + AXIS, y, f"{level:.0f}", "quiet")


def _against_elevation(grid: Grid, picture: LevelPicture, box: tuple[int, int, int, int]) -> None:
    left, top, width, height = box
    if width < 16 or height < 5:
        return
    inner = (left + AXIS + 1, top + 1, width - AXIS - 1, height - 2)
    plot = Plot(grid, inner, (0.0, 90.0), _range(picture.mean_dbhz))
    _frame(grid, plot, box, "dB-Hz against elevation, mean of 5°")
    for i in range(len(picture.signals)):
        tone, last = TONES[i % len(TONES)], None
        for elevation, level in zip(picture.elevation_deg.tolist(), picture.mean_dbhz[i].tolist(), strict=True):
            if not math.isfinite(level):
                continue
            if last is not None:
                plot.line(*last, elevation, level, tone, "·")
            last = elevation, level
    plot.draw()
    for i in range(len(picture.signals)):
        for elevation, level in zip(picture.elevation_deg.tolist(), picture.mean_dbhz[i].tolist(), strict=True):
            if math.isfinite(level):
                plot.text(elevation, level, letter(i), TONES[i % len(TONES)])
    for elevation in (0, 15, 30, 45, 60, 75, 90):
        x, _ = plot.cell(min(89.9, float(elevation)), plot.y_range[0])
        text = f"{elevation}°"
        grid.put(min(x, left + width - len(text)), top + height - 1, text, "quiet")


def _over_time(grid: Grid, snapshot: Snapshot, picture: LevelPicture, box: tuple[int, int, int, int]) -> None:
    left, top, width, height = box
    if width < 16 or height < 5:
        return
    if len(picture.minute) < 2:
        grid.put(left, top, "level over time: from the second minute on", "quiet", width)
        return
    inner = (left + AXIS + 1, top + 1, width - AXIS - 1, height - 2)
    first, last = float(picture.minute[0]), float(picture.minute[-1])
    plot = Plot(grid, inner, (first, last + 0.001), _range(picture.level_dbhz))
    _frame(grid, plot, box, "dB-Hz over time, rising and setting taken out")
    for i in range(len(picture.signals)):
        before = None
        for minute, level in zip(picture.minute.tolist(), picture.level_dbhz[i].tolist(), strict=True):
            if not math.isfinite(level):
                before = None
                continue
            if before is not None:
                plot.line(*before, float(minute), level, TONES[i % len(TONES)], letter(i))
            else:
                plot.point(float(minute), level, TONES[i % len(TONES)], letter(i))
            before = float(minute), level
    plot.draw()
    for i in range(len(picture.signals)):
        seen = np.flatnonzero(np.isfinite(picture.level_dbhz[i]))
        if len(seen):
            x, y = plot.cell(float(picture.minute[seen[-1]]), float(picture.level_dbhz[i, seen[-1]]))
            if top < y < top + height - 1:
                grid.put(min(x, left + width - 1), y, letter(i), TONES[i % len(TONES)])
    grid.put(inner[0], top + height - 1, clock_time(snapshot, first * 60_000)[:5], "quiet")
    grid.right(left + width, top + height - 1, f"{clock_time(snapshot, last * 60_000)[:5]} UTC", "quiet")


PANEL = Panel(
    key="signal_level",
    title="Signal levels",
    help="""\
The carrier-to-noise density (C/N0, dB-Hz) of each signal over the window: its mean with a 95 % interval of that mean, \
its mean by elevation in steps of five degrees, and its course over time with the rising and setting of satellites \
taken out. A letter stands for a signal in both plots.

Usual: 40 to 50 dB-Hz above 30 degrees, falling by 5 to 10 dB towards the horizon (common practice, no source). \
Levels of different receivers differ by 1 to 2 dB for the same antenna.

If all signals fall together over time: rain on the antenna, a cable, a supply, or interference. A single band: \
interference, or an antenna not made for it. A curve that does not rise with elevation: shading, or an antenna that is \
not level.""",
    render=render,
)
