"""Drawing in cells: a grid of characters with tones, and plots on it.

A *tone* is a word for what a colour would say (``good``, ``bad``, ``quiet``): the theme gives it a look, and nothing
is ever said by the tone alone. Whatever is drawn outside the grid is cut off, and no character gets in that would
not fill exactly one cell of a terminal: so no panel can break the screen.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

from rich.cells import cell_len

from gnssmon.printable import printable

TONES = ("", "strong", "quiet", "title", "good", "doubt", "bad", "line", "one", "two", "three", "four", "picked")
"""Plain, emphasised, less important, a heading, fine, doubtful, wrong, drawn lines, four kinds of data, chosen."""

_TONE = {name: number for number, name in enumerate(TONES)}

PLAIN = str.maketrans("·•○●✓✗─│┌┐└┘├┤┬┴┼▲▼█▌░▒←→↑↓–…×σµ", ".*oo+x-|+++++++++^v#=:%<>^v-.xsu") | {
    ord("°"): "deg",
    ord("±"): "+-",
    ord("≤"): "<=",
    ord("≥"): ">=",
}
"""What is drawn instead where the terminal knows ASCII only."""

_BRAILLE = ((0x01, 0x08), (0x02, 0x10), (0x04, 0x20), (0x40, 0x80))
"""Unicode braille patterns, dot by row and column: U+2800 plus the sum."""

_EIGHTHS = " ▏▎▍▌▋▊▉█"


FARTHEST = 1e12
"""Data beyond this are not drawn: they are no metres, seconds or decibels of any receiver."""


@dataclass(frozen=True, slots=True)
class Size:
    """The cells there are to draw on, and what may be drawn in them."""

    width: int
    height: int
    plain: bool = False
    """ASCII only: no braille, no blocks."""
    row: int = 0
    """Of a list, the row that is looked at: counted from the newest, 0."""
    choice: str = ""
    """Of a list, the kind that is looked at; empty: all."""


class Grid:
    """Characters and tones, row by row. Everything outside is cut off."""

    __slots__ = ("height", "plain", "rows", "tones", "width")

    def __init__(self, size: Size) -> None:
        self.width, self.height, self.plain = max(0, size.width), max(0, size.height), size.plain
        self.rows = [[" "] * self.width for _ in range(self.height)]
        self.tones = [[0] * self.width for _ in range(self.height)]

    def put(self, x: int, y: int, text: str, tone: str = "", width: int | None = None) -> int:
        """Write ``text`` from cell (x, y) on; beyond ``width`` it ends in an ellipsis. Returns the cell behind it."""
        text = _safe(text, self.plain)
        if width is not None and len(text) > width:
            text = text[: max(0, width - 1)] + (("." if self.plain else "…") * (width > 0))
        if 0 <= y < self.height:
            first, last = max(0, x), min(self.width, x + len(text))
            if first < last:
                self.rows[y][first:last] = text[first - x : last - x]
                self.tones[y][first:last] = [_TONE[tone]] * (last - first)
        return x + len(text)

    def right(self, x: int, y: int, text: str, tone: str = "") -> None:
        """Write ``text`` so that it ends before cell x."""
        text = _safe(text, self.plain)
        self.put(x - len(text), y, text, tone)

    def wrap(self, x: int, y: int, text: str, tone: str = "", width: int | None = None, rows: int = 99) -> int:
        """Write ``text`` over several rows, cut between words; returns the row behind it."""
        width = self.width - x if width is None else width
        if width < 1:
            return y
        line, last = "", y + rows - 1
        words = printable(text).split()
        for i, word in enumerate(words):
            if line and len(line) + 1 + len(word) > width:
                if y == last:
                    self.put(x, y, f"{line} {' '.join(words[i:])}", tone, width)
                    return y + 1
                self.put(x, y, line, tone, width)
                y, line = y + 1, word
            else:
                line = f"{line} {word}" if line else word
        if line:
            self.put(x, y, line, tone, width)
            y += 1
        return y

    def bar(self, x: int, y: int, width: int, share: float, tone: str = "") -> None:
        """Draw a bar from cell x on, ``share`` (0 to 1) of ``width`` cells long, to an eighth of a cell."""
        if not math.isfinite(share) or width < 1:
            return
        eighths = round(min(1.0, max(0.0, share)) * width * 8)
        if self.plain:
            self.put(x, y, "=" * round(eighths / 8), tone)
            return
        self._raw(x, y, "█" * (eighths // 8) + (_EIGHTHS[eighths % 8] if eighths % 8 else ""), tone)

    def paste(self, other: Grid, x: int, y: int) -> None:
        """Lay another grid over this one with its upper left corner in cell (x, y)."""
        for i in range(max(0, -y), min(other.height, self.height - y)):
            first, last = max(0, x), min(self.width, x + other.width)
            if first < last:
                self.rows[y + i][first:last] = other.rows[i][first - x : last - x]
                self.tones[y + i][first:last] = other.tones[i][first - x : last - x]

    def lines(self) -> list[str]:
        """The characters alone, a string a row."""
        return ["".join(row) for row in self.rows]

    def runs(self, y: int, first: int = 0, last: int | None = None) -> Iterator[tuple[str, str]]:
        """Row y, from a column up to another, as stretches of equal tone: text and the tone's name."""
        row, tones = self.rows[y], self.tones[y]
        start, last = first, self.width if last is None else min(last, self.width)
        for x in range(first + 1, last + 1):
            if x == last or tones[x] != tones[start]:
                yield "".join(row[start:x]), TONES[tones[start]]
                start = x

    def _raw(self, x: int, y: int, text: str, tone: str) -> None:
        if 0 <= y < self.height:
            for i, character in enumerate(text, x):
                if 0 <= i < self.width:
                    self.rows[y][i], self.tones[y][i] = character, _TONE[tone]


@lru_cache(maxsize=4096)
def _safe(text: str, plain: bool) -> str:
    """The text in characters that fill one cell each, and that the terminal knows. A screen says much again."""
    if not text.isascii() or not text.isprintable():
        text = "".join(c if c.isascii() or cell_len(c) == 1 else "?" for c in printable(text))
    if plain and not text.isascii():
        text = text.translate(PLAIN)
        text = text if text.isascii() else "".join(c if c.isascii() else "?" for c in text)
    return text


class Plot:
    """Points and lines in data coordinates on a rectangle of a grid, finer than its cells where braille is known.

    A cell is taken as twice as high as wide. ``equal``: a unit has the same length on both axes; the wider of the two
    scales is used, about the middle of both ranges.
    """

    def __init__(
        self,
        grid: Grid,
        box: tuple[int, int, int, int],
        x_range: tuple[float, float],
        y_range: tuple[float, float],
        *,
        equal: bool = False,
    ) -> None:
        """``box``: left and upper cell, width and height in cells."""
        self._grid = grid
        self._left, self._top, self.width, self.height = box
        self._across, self._down = (1, 1) if grid.plain else (2, 4)
        columns, rows = max(1, self.width * self._across), max(1, self.height * self._down)
        self._columns, self._rows = columns, rows
        (x0, x1), (y0, y1) = (r if _drawable(*r) else (0.0, 1.0) for r in (x_range, y_range))
        step_x = (x1 - x0) / columns or 1.0
        step_y = (y1 - y0) / rows or 1.0
        if equal:
            tall = 2.0 * self._across / self._down  # height of a dot in widths of a dot
            step_x = max(step_x, step_y / tall)
            step_y = step_x * tall
        self._step_x, self._step_y = step_x, step_y
        self._x0, self._y1 = (x0 + x1 - step_x * columns) / 2.0, (y0 + y1 + step_y * rows) / 2.0
        self.x_range = self._x0, self._x0 + step_x * columns
        self.y_range = self._y1 - step_y * rows, self._y1
        self._dots: dict[tuple[int, int], tuple[int, str]] = {}

    def cell(self, x: float, y: float) -> tuple[int, int]:
        """The cell of the grid in which a point lies; may be outside the box."""
        column, row = self._dot(x, y)
        return self._left + column // self._across, self._top + row // self._down

    def inside(self, x: float, y: float) -> bool:
        """Whether a point lies in the box."""
        column, row = self._dot(x, y)
        return 0 <= column < self._columns and 0 <= row < self._rows

    def point(self, x: float, y: float, tone: str = "", mark: str = "") -> None:
        """Set a dot; ``mark`` is the character that stands for it where only characters can be drawn."""
        if math.isfinite(x) and math.isfinite(y) and self.inside(x, y):
            column, row = self._dot(x, y)
            at = column // self._across, row // self._down
            if self._grid.plain:
                self._dots[at] = ord((mark or "+").translate(PLAIN)), tone
            else:
                bits, was = self._dots.get(at, (0, tone))
                self._dots[at] = bits | _BRAILLE[row % 4][column % 2], tone or was

    def line(self, x0: float, y0: float, x1: float, y1: float, tone: str = "", mark: str = "") -> None:
        """Set the dots of a straight line."""
        if all(math.isfinite(v) for v in (x0, y0, x1, y1)):
            (c0, r0), (c1, r1) = self._dot(x0, y0), self._dot(x1, y1)
            steps = min(max(abs(c1 - c0), abs(r1 - r0), 1), 4 * (self._columns + self._rows))
            for i in range(steps + 1):
                self.point(x0 + (x1 - x0) * i / steps, y0 + (y1 - y0) * i / steps, tone, mark)

    def ellipse(self, x: float, y: float, along: float, across: float, azimuth_deg: float, tone: str = "") -> None:
        """Set the dots of an ellipse: half axes, and the azimuth of the first, clockwise from the y axis."""
        if not all(math.isfinite(v) for v in (x, y, along, across, azimuth_deg)):
            return
        azimuth = math.radians(azimuth_deg)
        around = max(along / self._step_y, along / self._step_x, 1.0) * math.tau
        count = int(min(2000, max(16, around)))
        for i in range(count):
            u, v = along * math.cos(math.tau * i / count), across * math.sin(math.tau * i / count)
            self.point(
                x + u * math.sin(azimuth) + v * math.cos(azimuth),
                y + u * math.cos(azimuth) - v * math.sin(azimuth),
                tone,
                "·",
            )

    def text(self, x: float, y: float, text: str, tone: str = "") -> None:
        """Write text with its first character in the cell of a point; call ``draw`` before."""
        if self.inside(x, y):
            column, row = self.cell(x, y)
            self._grid.put(column, row, text, tone, self._left + self.width - column)

    def draw(self) -> None:
        """Lay all dots on the grid."""
        for (column, row), (bits, tone) in self._dots.items():
            character = chr(bits) if self._grid.plain else chr(0x2800 + bits)
            self._grid._raw(self._left + column, self._top + row, character, tone)
        self._dots.clear()

    def _dot(self, x: float, y: float) -> tuple[int, int]:
        if not (math.isfinite(x) and math.isfinite(y)):
            return -1, -1  # outside
        far = 1e6
        column = min(far, max(-far, (x - self._x0) / self._step_x))
        row = min(far, max(-far, (self._y1 - y) / self._step_y))
        return math.floor(column), math.floor(row)


def _drawable(low: float, high: float) -> bool:
    return math.isfinite(low) and math.isfinite(high) and abs(low) < FARTHEST and abs(high) < FARTHEST


def round_step(span: float, most: int) -> float:
    """The smallest of 1, 2, 5 times a power of ten that divides ``span`` into at most ``most`` steps."""
    if not (math.isfinite(span) and span > 0.0) or most < 1:
        return 1.0
    power = 10.0 ** math.floor(math.log10(span / most))
    for factor in (1.0, 2.0, 5.0, 10.0):
        if span / (power * factor) <= most * (1.0 + 1e-9):
            return power * factor
    return power * 10.0


def ticks(low: float, high: float, most: int) -> list[float]:
    """Round numbers from ``low`` to ``high``, at most ``most`` steps apart."""
    if not _drawable(low, high):
        return []
    step = round_step(high - low, most)
    first, last = math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9)
    return [i * step for i in range(first, min(last, first + 100) + 1)]
