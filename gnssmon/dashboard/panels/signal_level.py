"""Signal levels: each signal's mean with its interval and by elevation, level against elevation, level over time.

A table first: with eight signals on a small screen, curves cross too often to be followed, numbers do not.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from gnssmon.constellations.systems import SYSTEMS
from gnssmon.dashboard.drawing import Grid, Plot, Size, ticks
from gnssmon.dashboard.panels.panel import Panel, clock_time, nothing, number
from gnssmon.printable import printable
from gnssmon.snapshot import Snapshot
from gnssmon.statistics.pictures import Floats, LevelPicture

NARROWEST_DB, NARROWEST_COURSE_DB = 15.0, 6.0
"""Least span of a level axis: a tenth of a decibel must not look like a cliff."""

TONES = ("one", "two", "three", "four")

LETTERS = "abcdefghijklmnopqrstuvwxyz"
"""A letter stands for a signal in the plots: colour alone would say nothing to many."""

AXIS = 4
"""Cells for the figures at the left of a plot."""

MEAN, INTERVAL, STEPS = 20, 34, 36
"""Cells at which the columns of the table end, and from which the elevations stand."""

STEP = 7

ELEVATIONS = ((0, 15), (15, 30), (30, 45), (45, 60), (60, 90))

LOWEST_PLOT = 6

WIDE_PLOT = 30
"""Least cells across for a plot; two stand side by side from twice that on."""


def render(snapshot: Snapshot, size: Size) -> Grid:
    """Draw the table of signals; below it level against elevation beside level over time."""
    picture = snapshot.pictures.level
    if not picture.signals:
        return nothing(size, "no signal levels yet: switch on GSV (satellites in view) in the receiver")
    grid = Grid(size)
    rows = len(picture.signals) + 4
    enough = size.height >= rows + LOWEST_PLOT
    y = _table(grid, snapshot, picture, size.height if not enough and size.height < 10 else max(5, size.height - 8))
    left = size.height - y
    if left >= LOWEST_PLOT:
        chosen = [i for i, signal in enumerate(picture.signals) if signal == size.choice] or range(len(picture.signals))
        both = size.width >= 2 * WIDE_PLOT
        width = (size.width - 2) // 2 if both else size.width
        _against_elevation(grid, picture, chosen, (0, y, width, left))
        if both:
            _over_time(grid, snapshot, picture, chosen, (width + 2, y, size.width - width - 2, left))
    return grid


def choices(snapshot: Snapshot) -> Sequence[str]:
    """A signal may be looked at alone."""
    return snapshot.pictures.level.signals


def letter(i: int) -> str:
    """What stands for the i-th signal in a plot."""
    return LETTERS[i % len(LETTERS)]


def _tone(i: int) -> str:
    return TONES[i % len(TONES)]


def _name(signal: str) -> str:
    """``G1`` → ``GPS 1``: the system's name, then the band as the receiver or the standard numbers it."""
    for system in SYSTEMS:
        if signal.startswith(system.letter):
            return f"{system.name} {signal[1:]}".strip()
    return printable(signal)


def _table(grid: Grid, snapshot: Snapshot, picture: LevelPicture, rows: int) -> int:
    """A row a signal, and one for all of them; returns the row behind it."""
    grid.put(0, 0, "  signal", "quiet")
    grid.right(MEAN, 0, "dB-Hz", "quiet")
    grid.right(INTERVAL, 0, "95 % of mean", "quiet")
    steps = [(i, low, high) for i, (low, high) in enumerate(ELEVATIONS) if STEPS + STEP * (i + 1) <= grid.width]
    for i, low, high in steps:
        grid.right(STEPS + STEP * (i + 1), 0, f"{low}-{high}°", "quiet")
    most = max(1, rows - 2)
    shown = len(picture.signals) if len(picture.signals) <= most else most - 1
    for i, signal in enumerate(picture.signals[:shown]):
        y = i + 1
        grid.put(0, y, letter(i), _tone(i))
        grid.put(2, y, _name(signal), "", MEAN - 8)
        _mean(grid, snapshot, y, f"cn0.mean_dbhz.{signal}")
        for j, low, high in steps:
            level = _between(picture, i, low, high)
            grid.right(STEPS + STEP * (j + 1), y, "·" if level is None else f"{level:.1f}", "" if level else "quiet")
    y = shown + 1
    if shown < len(picture.signals):
        grid.put(2, y, f"and {len(picture.signals) - shown} more signals", "quiet")
        y += 1
    if y < rows:
        grid.put(2, y, "all", "quiet")
        _mean(grid, snapshot, y, "cn0.mean_dbhz")
        strongest, median = (_value(snapshot, f"cn0.{name}_dbhz") for name in ("strongest4_mean", "median"))
        text = f"median {number(median)}   strongest four {number(strongest)}"
        grid.put(STEPS + 1, y, text, "quiet", max(0, grid.width - STEPS - 1))
        y += 1
    return y + (y < grid.height)


def _mean(grid: Grid, snapshot: Snapshot, y: int, name: str) -> None:
    estimate = snapshot.estimates.get(name)
    grid.right(MEAN, y, number(_value(snapshot, name)), "strong")
    if estimate is not None and estimate.interval is not None:
        low, high = estimate.interval
        if math.isfinite(low) and math.isfinite(high):
            grid.right(INTERVAL, y, f"{low:.1f}–{high:.1f}", "quiet")


def _value(snapshot: Snapshot, name: str) -> float | None:
    estimate = snapshot.estimates.get(name)
    return estimate.value if estimate is not None and isinstance(estimate.value, float) else None


def _between(picture: LevelPicture, i: int, low_deg: float, high_deg: float) -> float | None:
    """Mean level of a signal between two elevations."""
    means, counts = picture.mean_dbhz[i], picture.count[i]
    inside = (picture.elevation_deg > low_deg) & (picture.elevation_deg < high_deg) & (counts > 0) & np.isfinite(means)
    if not inside.any():
        return None
    level = float((means[inside] * counts[inside]).sum() / counts[inside].sum())
    return level if -99.0 < level < 199.0 else None


def _range(values: Floats, narrowest: float) -> tuple[float, float]:
    finite = values[np.isfinite(values) & (np.abs(values) < 1000.0)]
    if not len(finite):
        return -narrowest / 2.0, narrowest / 2.0
    low, high = float(finite.min()) - 0.5, float(finite.max()) + 0.5
    wider = max(0.0, narrowest - (high - low)) / 2.0
    return low - wider, high + wider


def _framed(
    grid: Grid, box: tuple[int, int, int, int], title: str, x_range: tuple[float, float], y_range: tuple[float, float]
) -> Plot:
    """A plot with its title above, the levels at its left, and room for letters at its right."""
    left, top, width, height = box
    plot = Plot(grid, (left + AXIS, top + 1, width - AXIS - 2, height - 2), x_range, y_range)
    grid.put(left, top, title, "quiet", width)
    for level in ticks(*plot.y_range, max(2, (height - 2) // 3)):
        _, y = plot.cell(plot.x_range[0], level)
        if top < y < top + height - 1:
            grid.right(left + AXIS - 1, y, f"{level:g}", "quiet")
    return plot


def _curve(plot: Plot, points: Sequence[tuple[float, float]], i: int, gap: float) -> None:
    """Through the points; broken where they are more than ``gap`` apart."""
    last: tuple[float, float] | None = None
    for x, y in points:
        if last is not None and x - last[0] <= gap:
            plot.line(*last, x, y, _tone(i), letter(i))
        else:
            plot.point(x, y, _tone(i), letter(i))
        last = x, y


def _name_ends(grid: Grid, plot: Plot, box: tuple[int, int, int, int], ends: dict[int, float]) -> None:
    """A letter at the right of each curve, at its own height or as near as there is room."""
    _, top, width, height = box
    x = box[0] + width - 1
    rows = range(top + 1, top + height - 1)
    taken: set[tuple[int, int]] = set()
    for i, level in sorted(ends.items(), key=lambda pair: -pair[1]):
        _, wanted = plot.cell(plot.x_range[0], level)
        free = [(row, column) for column in (x - 1, x) for row in rows if (row, column) not in taken]
        if not free:
            return
        row, column = min(free, key=lambda place: (abs(place[0] - wanted) + 3 * (place[1] - x + 1), place))
        taken.add((row, column))
        grid.put(column, row, letter(i), _tone(i))


def _against_elevation(
    grid: Grid, picture: LevelPicture, chosen: Sequence[int], box: tuple[int, int, int, int]
) -> None:
    left, top, width, height = box
    y_range = _range(picture.mean_dbhz[chosen], NARROWEST_DB)
    alone = len(chosen) == 1
    if alone:
        i = chosen[0]
        y_range = _range(np.concatenate([picture.low_dbhz[i], picture.high_dbhz[i]]), NARROWEST_DB)
    title = "dB-Hz against elevation" + (": mean, 5, 95 %" if alone else "")
    plot = _framed(grid, box, title, (0.0, 90.0), y_range)
    ends: dict[int, float] = {}
    for i in chosen:
        points = _points(picture.elevation_deg.tolist(), picture.mean_dbhz[i].tolist())
        if alone:
            for edge in (picture.low_dbhz[i], picture.high_dbhz[i]):
                for elevation, level in _points(picture.elevation_deg.tolist(), edge.tolist()):
                    plot.point(elevation, level, _tone(i), "·")
        _curve(plot, points, i, 90.0)
        if points:
            ends[i] = points[-1][1]
    plot.draw()
    _name_ends(grid, plot, box, ends)
    for elevation in (0, 30, 60, 90) if width < 50 else (0, 15, 30, 45, 60, 75, 90):
        x, _ = plot.cell(min(89.9, float(elevation)), plot.y_range[0])
        text = f"{elevation}°"
        grid.put(min(x, left + width - len(text)), top + height - 1, text, "quiet")


def _over_time(
    grid: Grid, snapshot: Snapshot, picture: LevelPicture, chosen: Sequence[int], box: tuple[int, int, int, int]
) -> None:
    """Each signal's level against its own mean: what happens to all of them, or to a band, is seen at once."""
    left, top, width, height = box
    if len(picture.minute) < 2:
        grid.put(left, top, "level over time: from the second minute on", "quiet", width)
        return
    minutes = picture.minute.astype(float)
    courses: dict[int, Floats] = {}
    for i in chosen:
        level = np.where(np.abs(picture.level_dbhz[i]) < 1000.0, picture.level_dbhz[i], np.nan)
        known = np.isfinite(level)
        if known.any():
            courses[i] = level - level[known].mean()
    if not courses:
        grid.put(left, top, "level over time: too few satellites yet", "quiet", width)
        return
    y_range = _range(np.concatenate(list(courses.values())), NARROWEST_COURSE_DB)
    first, last = float(minutes[0]), float(minutes[-1])
    plot = _framed(grid, box, "dB from own mean, rising/setting out", (first, last + 0.001), y_range)
    ends: dict[int, float] = {}
    for i, course in courses.items():
        points = _points(minutes.tolist(), course.tolist())
        _curve(plot, points, i, 1.5)
        ends[i] = points[-1][1]
    plot.draw()
    _name_ends(grid, plot, box, ends)
    grid.put(left + AXIS, top + height - 1, clock_time(snapshot, first * 60_000)[:5], "quiet")
    grid.right(left + width - 2, top + height - 1, f"{clock_time(snapshot, last * 60_000)[:5]} UTC", "quiet")


def _points(x: list[float], y: list[float]) -> list[tuple[float, float]]:
    return [(a, b) for a, b in zip(x, y, strict=True) if math.isfinite(b) and abs(b) < 1000.0]


PANEL = Panel(
    key="signal_level",
    title="Signal levels",
    choices=choices,
    help="""\
The carrier-to-noise density (C/N0, dB-Hz) of each signal over the window: its mean with a 95 % interval of that mean, \
and its mean by elevation. Below it the same as curves, and how each signal moved over time against its own mean, with \
the rising and setting of satellites taken out. A letter stands for a signal; t shows one signal alone, with the \
levels that 5 % and 95 % of its values stay below.

Usual: 40 to 50 dB-Hz above 30 degrees, falling by 5 to 10 dB towards the horizon (common practice, no source). \
Levels of different receivers differ by 1 to 2 dB for the same antenna.

If all signals fall together over time: rain on the antenna, a cable, a supply, or interference. A single band: \
interference, or an antenna not made for it. A curve that does not rise with elevation: shading, or an antenna that is \
not level.""",
    render=render,
)
