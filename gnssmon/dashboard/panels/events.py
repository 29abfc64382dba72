"""Events: alarms raised and cleared, and gaps of the stream, newest first."""

from __future__ import annotations

from gnssmon.acceptance.verdict import in_words
from gnssmon.dashboard.drawing import Grid, Size
from gnssmon.dashboard.panels.panel import Panel, clock_time, nothing
from gnssmon.snapshot import Snapshot

MARKS = {"serious": ("✗", "bad"), "warning": ("!", "doubt"), "info": ("i", "")}


def render(snapshot: Snapshot, size: Size) -> Grid:
    """Draw one event a line; open ones say so, and whether they were seen."""
    rows: list[tuple[int, str, str, str]] = []
    for event in snapshot.alarms:
        mark, tone = MARKS[event.severity]
        worst = f"worst {event.worst:.4g}, limit {event.limit:g}"
        if event.cleared_ms is None:
            end, tone = "open" + (", seen" if event.acknowledged else ""), tone or "strong"
        else:
            end, tone = f"for {in_words((event.cleared_ms - event.raised_ms) / 1000.0)}", "quiet"
        rows.append((event.raised_ms, mark, f"{event.quantity}  {worst}  {end}", tone))
    rows += [(at, "-", f"nothing came for {in_words(length)}", "") for at, length in snapshot.pictures.stream.gaps]
    if not rows:
        return nothing(size, "no alarm so far, and no gap in the window")
    grid = Grid(size)
    rows.sort(key=lambda row: row[0], reverse=True)
    first = max(0, min(size.row, len(rows) - size.height + 1))
    for y, (at, mark, text, tone) in enumerate(rows[first : first + size.height - 1]):
        x = grid.put(0, y, clock_time(snapshot, at), "quiet")
        x = grid.put(x + 1, y, mark, tone)
        grid.put(x + 1, y, text, tone, max(0, size.width - x - 1))
    below = len(rows) - first - (size.height - 1)
    open_now = sum(event.cleared_ms is None for event in snapshot.alarms)
    text = f"{len(rows)} events, {open_now} open; a: mark as seen"
    if below > 0:
        text += f"; up: {below} older"
    grid.put(0, size.height - 1, text, "quiet", size.width)
    return grid


PANEL = Panel(
    key="events",
    title="Events",
    help="""\
Alarms since the start, newest first, with the worst value and the limit; and the gaps of the stream in the window. An \
alarm is raised when its quantity, over a short window, stays beyond the limit for the hold time, and cleared when it \
stays inside the clearing limit. Each has a severity: ✗ serious, ! warning, i for information.

Marking alarms as seen changes nothing but the mark.""",
    render=render,
)
