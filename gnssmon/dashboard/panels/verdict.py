"""The verdict: every criterion with value, interval, limit, margin and forecast; and what was found."""

from __future__ import annotations

from dataclasses import asdict

from gnssmon.acceptance.verdict import Judged, in_words
from gnssmon.dashboard.drawing import Grid, Size
from gnssmon.dashboard.panels.panel import Panel, nothing
from gnssmon.report import words
from gnssmon.snapshot import Snapshot

MARKS = {"met": ("✓", "good"), "not met": ("✗", "bad"), "undecided": ("?", "doubt")}

SEVERITIES = {"serious": ("✗", "bad"), "warning": ("!", "doubt"), "info": ("i", "")}

FULL = 74
"""Cells from which a criterion is told with its interval."""


def render(snapshot: Snapshot, size: Size) -> Grid:
    """Draw the criteria, undecided and failed ones first where room is short; below them the findings."""
    verdict = snapshot.verdict
    if not verdict.criteria:
        return nothing(size, "no criteria: nothing is judged")
    grid = Grid(size)
    wide = size.width >= FULL
    order = list(verdict.criteria)
    lines = 2 if wide and size.height >= 2 * len(order) + 4 else 1
    if size.height < lines * len(order) + 1:
        order.sort(key=lambda one: ("not met", "undecided", "met").index(one.result))
    y = 0
    if wide:
        _head(grid, snapshot)
        y = 1
    room = max(1, size.height - y)
    shown = order if lines * len(order) <= room else order[: max(1, (room - 1) // lines)]
    for one in shown:
        _criterion(grid, y, one, wide)
        if lines == 2:
            grid.put(4, y + 1, one.reason or one.note, "doubt" if one.reason else "quiet", size.width - 4)
        y += lines
    if len(shown) < len(order):
        met = sum(one.result == "met" for one in order[len(shown) :])
        rest = len(order) - len(shown)
        text = f"and {rest} more" + (", all met" if met == rest else f", {met} met" if met else "")
        grid.put(2, y, text, "quiet", size.width - 2)
        y += 1
    if size.height - y >= 3:
        _findings(grid, snapshot, y + 1)
    return grid


def _head(grid: Grid, snapshot: Snapshot) -> None:
    verdict = snapshot.verdict
    longer = f"  about {in_words(verdict.needed_s)} more needed" if verdict.needed_s is not None else ""
    x = grid.put(0, 0, f"{words.VERDICTS[verdict.verdict]} by the criteria '", "strong")
    x = grid.put(x, 0, verdict.criteria_name, "strong", max(8, grid.width - x - len(longer) - 2))
    grid.put(x, 0, f"'{longer}", "strong", max(0, grid.width - x))


def _criterion(grid: Grid, y: int, one: Judged, wide: bool) -> None:
    mark, tone = MARKS[one.result]
    facts = asdict(one)
    found = words.with_unit(one.value, one.unit, one.quantity)
    limit = words.limit(facts)
    x = grid.put(0, y, f"{mark} ", tone)
    if not wide:
        text = f"{found} {limit}" if one.value is not None else "unknown"
        room = max(4, grid.width - 3 - len(text))
        name = one.quantity if len(one.quantity) <= room else one.quantity.partition(".")[2]
        grid.put(x, y, name, "", room)
        grid.right(grid.width, y, text, tone if one.result != "met" else "")
        return
    interval = words.interval(one.interval, one.unit, one.quantity)
    behind = min(grid.width, 100)
    grid.put(x, y, one.quantity, "", behind - 50)
    grid.right(behind - 36, y, found, "strong")
    grid.right(behind - 14, y, interval if interval != "unknown" else "", "quiet")
    grid.right(behind, y, limit)
    forecast = f"{one.result}" + (f", {in_words(one.needed_s)} more" if one.needed_s is not None else "")
    if grid.width >= behind + 12:
        grid.put(behind + 2, y, forecast, tone, grid.width - behind - 2)


def _findings(grid: Grid, snapshot: Snapshot, y: int) -> None:
    quiet = "Nothing stands out." if snapshot.stream.sentences else "Nothing to look at yet."
    grid.put(0, y, "What stands out" if snapshot.findings else quiet, "title")
    y += 1
    for one in snapshot.findings:
        if y >= grid.height:
            break
        mark, tone = SEVERITIES[one.severity]
        grid.put(0, y, mark, tone)
        left = grid.height - y
        y = grid.wrap(2, y, one.summary, "", grid.width - 2, min(left, 3))
        if grid.width >= FULL and one.advice and y < grid.height:
            y = grid.wrap(4, y, one.advice, "quiet", grid.width - 4, min(grid.height - y, 3))


PANEL = Panel(
    key="verdict",
    title="Verdict so far",
    help="""\
Each criterion with the value over the window, its confidence interval, and the limit. ✓ met: the whole interval is \
inside the limit. ✗ not met: the whole interval is outside. ? undecided: the limit lies inside the interval, or the \
least time is not reached; the forecast says about how much longer to observe.

Accepted: every criterion is met. Rejected: one is not. Looking often does not make a result firmer: the verdict \
counts at the end of the time that was set before.

Below: what stands out in the data, each with the numbers behind it, possible causes and the next check.""",
    render=render,
)
