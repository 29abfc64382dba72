"""Cells: nothing leaves the grid, nothing enters that would not fill one cell, equal axes are equal."""

from __future__ import annotations

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from rich.cells import cell_len

from gnssmon.dashboard.canvas import changes
from gnssmon.dashboard.drawing import TONES, Grid, Plot, Size, round_step, ticks


@settings(max_examples=150, deadline=None)
@given(
    st.integers(0, 40),
    st.integers(0, 10),
    st.lists(
        st.tuples(st.integers(-50, 60), st.integers(-5, 15), st.text(max_size=30), st.sampled_from(TONES)), max_size=6
    ),
    st.booleans(),
)
def test_whatever_is_put_fills_single_cells(
    width: int, height: int, texts: list[tuple[int, int, str, str]], plain: bool
) -> None:
    """Any text at any place, wide or combining characters and controls included, leaves the grid whole."""
    grid = Grid(Size(width, height, plain))
    for x, y, text, tone in texts:
        grid.put(x, y, text, tone)
        grid.wrap(x, y, text, tone)
        grid.bar(x, y, 7, len(text) / 30, tone)
    for y, line in enumerate(grid.lines()):
        assert cell_len(line) == len(line) == width
        assert all(c.isprintable() for c in line)
        assert not plain or line.isascii()
        assert "".join(text for text, _ in grid.runs(y)) == line


def test_text_is_cut_with_an_ellipsis() -> None:
    """What does not fit ends in an ellipsis; what fits is not touched."""
    grid = Grid(Size(12, 2))
    grid.put(0, 0, "completeness", width=8)
    grid.put(0, 1, "complete", width=8)
    assert grid.lines() == ["complet…    ", "complete    "]


def test_wrap_cuts_between_words_and_tells_of_the_rest() -> None:
    """Words stay whole; rows that are not allowed end in an ellipsis."""
    grid = Grid(Size(10, 3))
    assert grid.wrap(0, 0, "look from the antenna", rows=2) == 2
    assert grid.lines() == ["look from ", "the anten…", "          "]


@pytest.mark.parametrize("plain", [False, True])
@pytest.mark.parametrize("box", [(0, 0, 40, 20), (3, 2, 71, 9), (0, 0, 9, 30)])
def test_equal_axes(box: tuple[int, int, int, int], plain: bool) -> None:
    """A circle is as wide as high in a terminal whose cells are twice as high as wide, and fits in whole."""
    grid = Grid(Size(80, 40, plain))
    plot = Plot(grid, box, (-1.0, 1.0), (-1.0, 1.0), equal=True)
    plot.ellipse(0.0, 0.0, 0.95, 0.95, 0.0)
    plot.draw()
    marked = [(x, y) for y, row in enumerate(grid.lines()) for x, c in enumerate(row) if c not in " \u2800"]
    wide = max(x for x, _ in marked) - min(x for x, _ in marked) + 1
    high = 2 * (max(y for _, y in marked) - min(y for _, y in marked) + 1)
    assert abs(wide - high) <= 3  # a cell's width and height of rounding
    left, top, width, height = box
    assert all(left <= x < left + width and top <= y < top + height for x, y in marked)


@settings(max_examples=100, deadline=None)
@given(
    st.floats(allow_nan=True, allow_infinity=True),
    st.floats(allow_nan=True, allow_infinity=True),
    st.floats(allow_nan=True, allow_infinity=True),
    st.booleans(),
)
def test_any_number_can_be_drawn(a: float, b: float, c: float, equal: bool) -> None:
    """No number, finite or not, as limit or point, raises or leaves the box."""
    grid = Grid(Size(30, 10))
    plot = Plot(grid, (5, 2, 20, 6), (a, b), (b, c), equal=equal)
    plot.point(a, c)
    plot.line(a, b, c, a)
    plot.ellipse(a, b, c, a, b)
    plot.text(c, a, "N")
    plot.draw()
    ticks(a, b, 4)
    for y, line in enumerate(grid.lines()):
        inside = line[5:25] if 2 <= y < 8 else ""
        assert not (line[:5] + line[25:]).strip()
        assert inside or not line.strip()


def test_braille_dots_are_where_unicode_puts_them() -> None:
    """Upper left is dot 1 (0x01), lower right dot 8 (0x80): Unicode chart U+2800."""
    grid = Grid(Size(1, 1))
    plot = Plot(grid, (0, 0, 1, 1), (0.0, 2.0), (0.0, 4.0))
    plot.point(0.5, 3.5)
    plot.point(1.5, 0.5)
    plot.draw()
    assert grid.lines() == [chr(0x2800 + 0x81)]


@settings(max_examples=100, deadline=None)
@given(st.floats(1e-6, 1e9), st.integers(1, 12))
def test_round_steps(span: float, most: int) -> None:
    """Steps are 1, 2 or 5 times a power of ten, few enough, and not needlessly few."""
    step = round_step(span, most)
    mantissa = step / 10 ** math.floor(math.log10(step) + 1e-9)
    assert min(abs(mantissa - m) for m in (1, 2, 5, 10)) < 1e-6
    assert span / step <= most * (1 + 1e-6)
    assert span / (step / 2.5) > most * (1 - 1e-6)


cells = st.lists(
    st.tuples(st.integers(0, 29), st.integers(0, 5), st.sampled_from("ab·"), st.sampled_from(TONES)), max_size=20
)


@settings(max_examples=150, deadline=None)
@given(cells, cells)
def test_changes_cover_exactly_what_differs(
    before: list[tuple[int, int, str, str]], after: list[tuple[int, int, str, str]]
) -> None:
    """Every cell that differs lies in a region, each region begins and ends with one, and equal grids have none."""
    old, new = Grid(Size(30, 6)), Grid(Size(30, 6))
    for grid, marks in ((old, before), (new, after)):
        for x, y, text, tone in marks:
            grid.put(x, y, text, tone)

    def differs(x: int, y: int) -> bool:
        return (old.rows[y][x], old.tones[y][x]) != (new.rows[y][x], new.tones[y][x])

    covered = set()
    for first, last in ((0, 7), (7, 20), (20, 30)):
        regions = changes(old, new, first, last)
        assert len({r.y for r in regions}) == len(regions)
        for r in regions:
            assert first <= first + r.x < first + r.right <= last
            assert r.height == 1
            assert differs(first + r.x, r.y)
            assert differs(first + r.right - 1, r.y)
            covered |= {(first + x, r.y) for x in range(r.x, r.right)}
        assert changes(new, new, first, last) == []
    assert {(x, y) for y in range(6) for x in range(30) if differs(x, y)} <= covered
