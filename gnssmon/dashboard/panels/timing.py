"""Timing: delay from the instant of a fix to its arrival, jitter, and the age of corrections."""

from __future__ import annotations

import math

from gnssmon.acceptance.verdict import in_words
from gnssmon.dashboard.drawing import Grid, Plot, Size, ticks
from gnssmon.dashboard.panels.panel import Panel, clock_time, number, value
from gnssmon.snapshot import Snapshot
from gnssmon.statistics.pictures import Floats, Ints

LABEL = 16

AXIS = 5

MOST_DELAY_S = 60.0
"""A longer delay is a clock that is set wrong, or an old log that is played into a port."""


def render(snapshot: Snapshot, size: Size) -> Grid:
    """Draw the figures; below them the delay, or else the age of corrections, over time."""
    grid = Grid(size)
    delay, worst = value(snapshot, "timing.delay_median_s"), value(snapshot, "timing.delay_95_s")
    jitter, steps = value(snapshot, "timing.jitter_s"), value(snapshot, "timing.clock_steps")
    age, oldest = value(snapshot, "corrections.age_median_s"), value(snapshot, "corrections.age_max_s")
    first, lost = value(snapshot, "fix.time_to_first_fix_s"), value(snapshot, "fix.longest_outage_s")
    rows = [
        ("Delay", _delay(delay)),
        ("  95 % below", f"{number(worst, 3)} s" if not _absurd(worst) else "–"),
        ("  jitter", f"{number(jitter, 3)} s"),
        ("Clock steps", number(steps, 0)),
        ("Corrections", "none" if age is None else f"{number(age)} s old, worst {number(oldest)} s"),
        ("First fix after", "–" if first is None else f"{number(first)} s"),
        ("Longest outage", "–" if lost is None else f"{number(lost)} s"),
    ]
    if delay is None:
        del rows[1:4]
    for y, (label, text) in enumerate(rows):
        grid.put(0, y, label, "quiet", LABEL - 1)
        grid.put(LABEL, y, text, "", size.width - LABEL)
    top = len(rows) + 1
    box = (0, top, size.width, min(14, size.height - top))
    timing, fix = snapshot.pictures.timing, snapshot.pictures.fix
    if delay is not None and not _absurd(delay):
        _over_time(grid, snapshot, box, "s of delay, median by minute", timing.minute, timing.delay_median_s)
    elif age is not None:
        _over_time(
            grid, snapshot, box, "s of age of corrections, worst by minute", fix.minute, fix.correction_age_max_s
        )
    else:
        _over_time(grid, snapshot, box, "satellites used, mean by minute", fix.minute, fix.used_mean)
    return grid


def _absurd(delay_s: float | None) -> bool:
    return delay_s is not None and not -MOST_DELAY_S < delay_s < MOST_DELAY_S


def _delay(delay_s: float | None) -> str:
    if delay_s is None:
        return "not known: no arrival times"
    if _absurd(delay_s):
        late = "behind" if delay_s > 0 else "ahead of"
        return f"{in_words(abs(delay_s))} {late} host's clock"
    return f"{number(delay_s, 3)} s median"


def _over_time(
    grid: Grid, snapshot: Snapshot, box: tuple[int, int, int, int], title: str, minutes: Ints, values: Floats
) -> None:
    left, top, width, height = box
    known = [(m, v) for m, v in zip(minutes.tolist(), values.tolist(), strict=True) if math.isfinite(v)]
    if height < 5 or width < 16 or len(known) < 2:
        return
    grid.put(left, top, title, "quiet", width)
    highest = max(v for _, v in known)
    lowest = min(0.0, *(v for _, v in known))
    plot = Plot(
        grid,
        (left + AXIS + 1, top + 1, width - AXIS - 1, height - 2),
        (known[0][0], known[-1][0] + 0.001),
        (lowest, max(highest, lowest + 1e-3) * 1.05),
    )
    last = None
    for minute, found in known:
        if last is not None and minute - last[0] <= 1:
            plot.line(*last, minute, found, "one", "+")
        else:
            plot.point(minute, found, "one", "+")
        last = minute, found
    plot.draw()
    for level in ticks(*plot.y_range, max(2, height // 3)):
        _, y = plot.cell(plot.x_range[0], level)
        if top < y < top + height - 1:
            grid.right(left + AXIS, y, f"{level:g}", "quiet")
    grid.put(left + AXIS + 1, top + height - 1, clock_time(snapshot, known[0][0] * 60_000)[:5], "quiet")
    grid.right(left + width, top + height - 1, f"{clock_time(snapshot, known[-1][0] * 60_000)[:5]} UTC", "quiet")


PANEL = Panel(
    key="timing",
    title="Timing",
    help="""\
How long after the instant of a fix its sentences arrive: known for live sources and recordings, whose host noted \
when bytes came; the host's clock must be right for the delay, not for its jitter. Steps of the clock are those of the \
receiver's own time against the host's.

Usual: 0.05 to 0.5 s, with a jitter far below that (common practice, no source). Corrections: 2 s old or less is \
recommended for RTK (network operators' guidelines).

If the delay grows through a burst: the baud rate is too low for what is sent. Corrections old or with outages: the \
link to the base or network.""",
    render=render,
)
