"""Canvas: paints a grid, and of it only what has changed.

The screen library repaints a changed stretch of a row from the left edge of the widget in which it lies. So the
canvas is cut into narrow upright slices, each a widget: a number that changes costs a few cells, not half a row.
"""

from __future__ import annotations

from typing import ClassVar

from rich.segment import Segment
from rich.style import Style
from textual.app import ComposeResult
from textual.containers import Horizontal
from textual.geometry import Region
from textual.message import Message
from textual.strip import Strip
from textual.widget import Widget

from gnssmon.dashboard.drawing import TONES, Grid

SLICES = 16
"""At 80 columns five cells each: narrower ones cost more in moves of the cursor than they save."""


class Canvas(Horizontal):
    """Shows the grid that it was last given."""

    class Resized(Message):
        """There are more or fewer cells now."""

    def __init__(self) -> None:
        super().__init__()
        self._grid: Grid | None = None
        self._slices = [Slice(self) for _ in range(SLICES)]

    def compose(self) -> ComposeResult:
        yield from self._slices

    def on_resize(self) -> None:
        self.post_message(self.Resized())

    @property
    def grid(self) -> Grid | None:
        """What is on it."""
        return self._grid

    def show(self, grid: Grid) -> None:
        """Paint another grid; cells that did not change stay as they are."""
        old, self._grid = self._grid, grid
        for part in self._slices:
            first, width = part.place
            if old is None or (old.width, old.height) != (grid.width, grid.height):
                part.refresh()
            elif regions := changes(old, grid, first, first + width):
                part.refresh(*regions)

    def text(self) -> str:
        """What is on it, as text."""
        return "\n".join(line.rstrip() for line in self._grid.lines()) if self._grid is not None else ""


class Slice(Widget):
    """Some columns of a canvas."""

    COMPONENT_CLASSES: ClassVar[set[str]] = {f"tone-{tone}" for tone in TONES if tone}

    def __init__(self, canvas: Canvas) -> None:
        super().__init__()
        self._canvas = canvas
        self._styles: dict[str, Style | None] = {}

    @property
    def place(self) -> tuple[int, int]:
        """First column on the canvas, and how many."""
        return self.region.x - self._canvas.region.x, self.size.width

    def render_line(self, y: int) -> Strip:
        """Row y for the compositor."""
        grid, (first, width) = self._canvas.grid, self.place
        if grid is None or y >= grid.height:
            return Strip.blank(width, self._style(""))
        segments = [Segment(text, self._style(tone)) for text, tone in grid.runs(y, first, first + width)]
        return Strip(segments).adjust_cell_length(width, self._style(""))

    def notify_style_update(self) -> None:
        """The theme has changed."""
        super().notify_style_update()
        self._styles.clear()

    def _style(self, tone: str) -> Style | None:
        if tone not in self._styles:
            style = self.get_component_rich_style(f"tone-{tone}") if tone else self.rich_style
            bare = self.app.no_color or self.app.current_theme.ansi
            self._styles[tone] = _bare(style, colour=not self.app.no_color) if bare else style
        return self._styles[tone]


def _bare(style: Style, *, colour: bool) -> Style | None:
    """Without the terminal's own colours: what it shows anyway need not be asked for."""
    plain = not colour or style.color is None or style.color.is_default
    found = Style(
        color=None if plain else style.color,
        bold=style.bold or None,
        dim=style.dim or None,
        reverse=style.reverse or None,
    )
    return found if found else None


def changes(old: Grid, new: Grid, first: int, last: int) -> list[Region]:
    """Where two grids of one size differ between two columns: at most one stretch a row, counted from ``first``."""
    regions = []
    for y in range(new.height):
        rows, tones, old_rows, old_tones = new.rows[y], new.tones[y], old.rows[y], old.tones[y]
        if rows[first:last] == old_rows[first:last] and tones[first:last] == old_tones[first:last]:
            continue
        differing = [x for x in range(first, last) if rows[x] != old_rows[x] or tones[x] != old_tones[x]]
        regions.append(Region(differing[0] - first, y, differing[-1] + 1 - differing[0], 1))
    return regions
