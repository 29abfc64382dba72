"""The sentences themselves: the latest as they came, and one of them field by field."""

from __future__ import annotations

from collections.abc import Sequence

from gnssmon.dashboard.drawing import Grid, Size
from gnssmon.dashboard.panels.panel import Panel, nothing
from gnssmon.nmea.inspection import Fields, inspect
from gnssmon.printable import printable
from gnssmon.receiver import LineNow
from gnssmon.snapshot import Snapshot


def render(snapshot: Snapshot, size: Size) -> Grid:
    """Draw the latest sentences, the picked one marked, and its fields with units below (or beside, where wide)."""
    lines = [one for one in snapshot.receiver.lines if not size.choice or _formatter(one) == size.choice]
    if not snapshot.receiver.lines:
        return nothing(size, "no sentences yet")
    if not lines:
        return nothing(size, f"no {printable(size.choice)} among the latest sentences; t: another kind")
    grid = Grid(size)
    picked = max(0, len(lines) - 1 - size.row)
    if size.width >= 110:
        list_width = min(84, size.width - 46)
        _list(grid, lines, picked, (0, 0, list_width, size.height - 1))
        _fields(grid, inspect(lines[picked].raw), (list_width + 2, 0, size.width - list_width - 2, size.height - 1))
    else:
        upper = max(3, (size.height - 1) * 2 // 5)
        _list(grid, lines, picked, (0, 0, size.width, upper))
        _fields(grid, inspect(lines[picked].raw), (0, upper, size.width, size.height - 1 - upper))
    kind = printable(size.choice) if size.choice else "all kinds"
    grid.put(0, size.height - 1, f"{kind} (t), {len(lines)} kept; up, down: pick; f: freeze", "quiet", size.width)
    return grid


def choices(snapshot: Snapshot) -> Sequence[str]:
    """One kind of sentence."""
    return sorted(snapshot.stream.by_type)


def _formatter(line: LineNow) -> str:
    address = line.raw.split(b",", 1)[0].decode("latin-1")
    return address if address.startswith("P") else address[2:]


def _list(grid: Grid, lines: list[LineNow], picked: int, box: tuple[int, int, int, int]) -> None:
    left, top, width, height = box
    last = min(len(lines), max(picked + 1 + height // 2, height))
    for y, i in enumerate(range(max(0, last - height), last)):
        mark = ">" if i == picked else " "
        text = f"{mark} {printable(lines[i].raw)}"
        grid.put(left, top + y, text, "picked" if i == picked else "", width)


def _fields(grid: Grid, fields: Fields, box: tuple[int, int, int, int]) -> None:
    left, top, width, height = box
    if height < 2:
        return
    x = grid.put(left, top, fields.address, "strong", width)
    grid.put(x + 2, top, fields.meaning or "not a sentence we know", "quiet", max(0, left + width - x - 2))
    rows = height - 1
    columns = max(1, min(-(-len(fields.fields) // rows), width // 26))
    step = width // columns
    label = min(20, step // 2)
    hidden = len(fields.fields) - rows * columns
    for i, one in enumerate(fields.fields[: rows * columns]):
        column, row = divmod(i, rows)
        x, y = left + column * step, top + 1 + row
        if hidden > 0 and i == rows * columns - 1:
            grid.put(x, y, f"and {hidden + 1} more fields", "quiet", step - 1)
            break
        grid.put(x, y, one.name, "quiet", label - 1)
        text = f"{one.text} {one.unit}".strip() if one.text else "–"
        grid.put(x + label, y, text, "strong" if one.text else "quiet", max(0, step - label - 1))


PANEL = Panel(
    key="sentences",
    title="Sentences",
    choices=choices,
    help="""\
The latest sentences, oldest first, without start character and checksum; and one of them taken apart, each field with \
its name and unit. A dash is an empty field: the receiver does not state it. Up and down pick an older or newer one, t \
shows one kind only, f freezes the picture while reading goes on.

Sentences with a wrong checksum are not shown; they are counted in the stream view.""",
    render=render,
)
