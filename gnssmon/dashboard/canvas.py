"""Canvas: the one widget that paints a grid, and of it only what has changed."""

from __future__ import annotations

from typing import ClassVar

from rich.segment import Segment
from rich.style import Style
from textual.geometry import Region
from textual.message import Message
from textual.strip import Strip
from textual.widget import Widget

from gnssmon.dashboard.drawing import TONES, Grid

JOINED_CELLS = 8
"""Two changes on a line no farther apart are painted as one: moving the cursor costs as many bytes."""


class Canvas(Widget):
    """Shows the grid that it was last given."""

    COMPONENT_CLASSES: ClassVar[set[str]] = {f"tone-{tone}" for tone in TONES if tone}

    class Resized(Message):
        """There are more or fewer cells now."""

    def __init__(self) -> None:
        super().__init__()
        self._grid: Grid | None = None
        self._styles: dict[str, Style] = {}

    def show(self, grid: Grid) -> None:
        """Paint another grid; cells that did not change stay as they are."""
        old, self._grid = self._grid, grid
        if old is None or (old.width, old.height) != (grid.width, grid.height):
            self.refresh()
            return
        regions = changes(old, grid)
        if regions:
            self.refresh(*regions)

    def on_resize(self) -> None:
        self.post_message(self.Resized())

    def text(self) -> str:
        """What is on it, as text."""
        return "\n".join(line.rstrip() for line in self._grid.lines()) if self._grid is not None else ""

    def render_line(self, y: int) -> Strip:
        """Row y for the compositor."""
        base = self.rich_style
        grid = self._grid
        if grid is None or y >= grid.height:
            return Strip.blank(self.size.width, base)
        segments = [Segment(text, self._style(tone)) for text, tone in grid.runs(y)]
        return Strip(segments, grid.width).adjust_cell_length(self.size.width, base)

    def notify_style_update(self) -> None:
        """The theme has changed."""
        super().notify_style_update()
        self._styles.clear()

    def _style(self, tone: str) -> Style:
        style = self._styles.get(tone)
        if style is None:
            style = self.get_component_rich_style(f"tone-{tone}") if tone else self.rich_style
            self._styles[tone] = style
        return style


def changes(old: Grid, new: Grid) -> list[Region]:
    """Where two grids of one size differ, as stretches of single rows."""
    regions: list[Region] = []
    for y in range(new.height):
        rows, tones, old_rows, old_tones = new.rows[y], new.tones[y], old.rows[y], old.tones[y]
        if rows == old_rows and tones == old_tones:
            continue
        start = end = -1
        for x in range(new.width):
            if rows[x] == old_rows[x] and tones[x] == old_tones[x]:
                continue
            if start >= 0 and x - end > JOINED_CELLS:
                regions.append(Region(start, y, end - start, 1))
                start = x
            elif start < 0:
                start = x
            end = x + 1
        regions.append(Region(start, y, end - start, 1))
    return regions
