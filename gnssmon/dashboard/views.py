"""Which panels stand in which view, at which size; and the two lines above every view."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

from gnssmon.acceptance.verdict import in_words
from gnssmon.dashboard.drawing import Grid, Size
from gnssmon.dashboard.panels import panel
from gnssmon.dashboard.panels.panel import clock_time, metres, number, quality_tone, quality_words, value
from gnssmon.report import words
from gnssmon.snapshot import Snapshot

Column = tuple[int, tuple[tuple[str, int], ...]]
"""Share of the width, and from top to bottom the panels with their shares of the height."""

GAP = 1
"""Empty cells between two columns."""


@dataclass(frozen=True, slots=True)
class View:
    """What one key shows."""

    key: str
    name: str
    title: str
    layouts: tuple[tuple[int, int, tuple[Column, ...]], ...]
    """Least width and height of the whole screen, and what stands there; the first that fits is taken."""

    def columns(self, width: int, height: int) -> tuple[Column, ...]:
        """The layout for a screen of this size."""
        for least_width, least_height, columns in self.layouts:
            if width >= least_width and height >= least_height:
                return columns
        return self.layouts[-1][2]

    def panels(self) -> list[str]:
        """The keys of all its panels, at any size."""
        return list(dict.fromkeys(key for _, _, columns in self.layouts for _, stack in columns for key, _ in stack))

    def choices(self, snapshot: Snapshot) -> list[str]:
        """What of it may be looked at alone."""
        return [choice for key in self.panels() for choice in panel(key).choices(snapshot)]


def _alone(key: str) -> tuple[tuple[int, int, tuple[Column, ...]], ...]:
    return ((0, 0, ((1, ((key, 1),)),)),)


VIEWS: tuple[View, ...] = (
    View(
        "1",
        "situation",
        "Now",
        (
            (
                170,
                44,
                (
                    (40, (("fix", 14), ("verdict", 18), ("stream", 22))),
                    (64, (("satellites", 34), ("signal_level", 22))),
                    (90, (("sky", 32), ("scatter", 24))),
                ),
            ),
            (
                118,
                34,
                (
                    (37, (("fix", 12), ("verdict", 11), ("stream", 12))),
                    (37, (("satellites", 1),)),
                    (45, (("sky", 18), ("scatter", 17))),
                ),
            ),
            (76, 0, ((38, (("fix", 11), ("verdict", 5), ("stream", 5))), (41, (("satellites", 1),)))),
            (0, 0, ((1, (("fix", 9), ("satellites", 8))),)),
        ),
    ),
    View("2", "sky", "Sky", _alone("sky")),
    View(
        "3",
        "signals",
        "Signals",
        (
            (118, 30, ((34, (("satellites", 1),)), (84, (("signal_level", 1),)))),
            (0, 0, ((1, (("signal_level", 1),)),)),
        ),
    ),
    View("4", "position", "Position", _alone("scatter")),
    View(
        "5",
        "stream",
        "Stream",
        ((76, 0, ((1, (("stream", 1),)), (1, (("timing", 1),)))), (0, 0, ((1, (("stream", 1), ("timing", 1))),))),
    ),
    View("6", "acceptance", "Verdict", _alone("verdict")),
    View("7", "events", "Events", _alone("events")),
    View("8", "sentences", "Raw", _alone("sentences")),
)


def compose(snapshot: Snapshot | None, view: View, size: Size, *, now_s: float = math.nan, note: str = "") -> Grid:
    """Draw a whole screen: the answer, what is looked at, and the view's panels.

    ``now_s``: the host's time, for the age of what a live source sent. ``note``: a word on the state of the screen.
    """
    grid = Grid(size)
    if snapshot is None:
        grid.put(0, 0, "waiting for the first data …", "quiet")
        return grid
    answer(grid, snapshot, now_s)
    context(grid, snapshot, note)
    x, height = 0, size.height - 2
    columns = view.columns(size.width, size.height + 1)
    whole = sum(share for share, _ in columns)
    room = size.width - GAP * (len(columns) - 1)
    for i, (share, stack) in enumerate(columns):
        width = size.width - x if i == len(columns) - 1 else room * share // whole
        _stack(grid, snapshot, stack, (x, 2, width, height), size)
        x += width + GAP
    return grid


def _stack(
    grid: Grid, snapshot: Snapshot, stack: tuple[tuple[str, int], ...], box: tuple[int, int, int, int], size: Size
) -> None:
    x, y, width, height = box
    whole, end = sum(share for _, share in stack), y + height
    for i, (key, share) in enumerate(stack):
        one = panel(key)
        tall = end - y if i == len(stack) - 1 else max(2, height * share // whole)
        grid.put(x, y, f"─ {one.title} " + "─" * width, "title", None)
        grid.put(x + width, y, " " * GAP)
        inner = replace(size, width=width, height=max(0, min(tall, end - y) - 1))
        grid.paste(one.render(snapshot, inner), x, y + 1)
        y += tall


def fix_age_s(snapshot: Snapshot, now_s: float) -> float | None:
    """How old the latest fix is: by the stream's own time, and for a live source by the host's clock from there."""
    now = snapshot.receiver
    if now.last_fix_axis_ms is None or now.axis_ms is None:
        return None
    age = max(0.0, (now.axis_ms - now.last_fix_axis_ms) / 1000.0)
    if snapshot.source.kind == "live" and now.received_s is not None and not math.isnan(now_s):
        age += max(0.0, now_s - now.received_s)
    return age


def answer(grid: Grid, snapshot: Snapshot, now_s: float) -> None:
    """Row 0: state of the fix, how good, how old; alarms; the verdict so far and what it still needs."""
    mark, verdict, tone = _verdict(snapshot)
    alarms, alarm_tone = _alarms(snapshot)
    fix, fix_tone = _fix(snapshot, now_s)
    x = grid.put(0, 0, fix, fix_tone)
    x = grid.put(x, 0, " │ ", "line")
    x = grid.put(x, 0, alarms, alarm_tone)
    x = grid.put(x, 0, " │ ", "line")
    grid.put(x, 0, f"{mark} {verdict}", tone, max(0, grid.width - x))


def _fix(snapshot: Snapshot, now_s: float) -> tuple[str, str]:
    now = snapshot.receiver
    age = fix_age_s(snapshot, now_s)
    if now.quality is None and age is None:
        return ("✗ no data yet" if not snapshot.stream.bytes else "✗ no fix stated yet"), "bad"
    if now.quality == 0 or age is None:
        return f"✗ no fix{'' if age is None else f' for {in_words(age)}'}", "bad"
    r95, hdop = value(snapshot, "scatter.r95_m"), now.hdop
    good = f", R95 {metres(r95)}" if r95 is not None else "" if hdop is None else f", HDOP {number(hdop)}"
    stale = age > 5.0 + 2.0 * (value(snapshot, "stream.interval_s") or 0.0)
    usual = 1.5 * (value(snapshot, "stream.interval_s") or 1.0) + 0.5
    old = f", {in_words(age)} old" if age > usual else ", now"
    text = f"{quality_words(now.quality)}{good}{old}"
    return (f"✗ {text}", "bad") if stale else (text, quality_tone(now.quality) or "strong")


def _alarms(snapshot: Snapshot) -> tuple[str, str]:
    raised = [event for event in snapshot.alarms if event.cleared_ms is None]
    if not raised:
        return "no alarm", ""
    unseen = sum(not event.acknowledged for event in raised)
    serious = any(event.severity == "serious" for event in raised)
    text = f"! {len(raised)} alarm{'s' if len(raised) > 1 else ''}" + (", seen" if not unseen else "")
    return text, "bad" if serious else "doubt"


def _verdict(snapshot: Snapshot) -> tuple[str, str, str]:
    verdict = snapshot.verdict
    if verdict.verdict == "accept":
        return "✓", "accepted so far", "good"
    if verdict.verdict == "reject":
        failed = [one.quantity for one in verdict.criteria if one.result == "not met"]
        more = f" and {len(failed) - 1} more" if len(failed) > 1 else ""
        return "✗", f"rejected: {failed[0] if failed else ''}{more}", "bad"
    if not verdict.criteria:
        return "?", "nothing to judge by", "quiet"
    pending = [one for one in verdict.criteria if one.result == "undecided"]
    longer = f", {in_words(verdict.needed_s)} more" if verdict.needed_s is not None else ""
    what = f"{pending[0].quantity}" + (f" +{len(pending) - 1}" if len(pending) > 1 else "") if pending else ""
    return "?", f"undecided{longer}: {what}", "doubt"


def context(grid: Grid, snapshot: Snapshot, note: str) -> None:
    """Row 1: the source, its time, the window, and how a log plays."""
    progress, wide = snapshot.progress, grid.width >= 76
    right = f"window: {snapshot.window}" if wide else snapshot.window
    if "speed" in progress:
        speed = progress["speed"]
        pace = "PAUSED" if progress.get("paused") else "full speed" if math.isinf(speed) else f"×{speed:g}"
        right += f"  {pace}"
    if "recorded_bytes" in progress:
        right += f"  REC {words.size(int(progress['recorded_bytes']))}"
    if "share" in progress:
        right += f"  {progress['share'] * 100:.0f} %"
    if snapshot.source.state not in ("reading", ""):
        right += "  ended" if snapshot.source.state == "ended" else ""
    if note:
        right += f"  {note}"
    grid.right(grid.width, 1, right, "strong")
    room = grid.width - len(right) - 2
    x = 0
    if snapshot.source.simulated:
        x = grid.put(0, 1, "SIMULATED ", "bad", max(0, room))
    stream = snapshot.stream.last_utc
    date = f"{stream[:10]} " if stream is not None and snapshot.receiver.dated else ""
    time = f"{date}{clock_time(snapshot, snapshot.receiver.axis_ms)} UTC"
    label = snapshot.source.label
    state = snapshot.source.state
    if state not in ("reading", "ended", "rewound", ""):
        grid.put(x, 1, state, "bad", max(0, room - x))
        return
    if room - x >= len(time) + 6:
        x = grid.put(x, 1, time, "")
        grid.put(x + 2, 1, label.rsplit("/", 1)[-1] if snapshot.source.kind == "log" else label, "quiet", room - x - 2)
    else:
        grid.put(x, 1, time, "", max(0, room - x))
