"""Every panel in the list draws any snapshot at any size."""

from __future__ import annotations

import sys
from dataclasses import replace
from pathlib import Path

import pytest
from rich.cells import cell_len

from gnssmon.dashboard import panels
from gnssmon.dashboard.drawing import Size
from gnssmon.dashboard.panels import PANELS
from gnssmon.dashboard.panels.panel import Panel
from gnssmon.dashboard.views import VIEWS, compose
from gnssmon.snapshot import Snapshot
from tests.dashboard import snapshots

SIZES = ((60, 20), (80, 24), (120, 40), (200, 60), (31, 9), (7, 3), (1, 1), (0, 0))
"""The sizes that the design names, and what a layout may leave over."""

SUBJECTS = {
    "empty": snapshots.empty,
    "full": snapshots.full,
    "hostile": snapshots.hostile,
    "absurd": snapshots.absurd,
}


def check_lines(lines: list[str], width: int, height: int, *, plain: bool) -> None:
    """As many rows as asked for, each exactly as wide, and nothing in them that a terminal would obey."""
    assert len(lines) == height
    for line in lines:
        assert cell_len(line) == width
        assert line.isprintable() or not line, repr(line)
        assert not plain or line.isascii(), repr(line)


@pytest.mark.parametrize("subject", SUBJECTS)
@pytest.mark.parametrize("panel", PANELS, ids=lambda panel: panel.key)
def test_any_size(panel: Panel, subject: str) -> None:
    """No exception, no line wider than the size, no control character, with and without braille."""
    snapshot = SUBJECTS[subject]()
    for width, height in SIZES:
        for plain in (False, True):
            grid = panel.render(snapshot, Size(width, height, plain))
            check_lines(grid.lines(), width, height, plain=plain)


@pytest.mark.parametrize("panel", PANELS, ids=lambda panel: panel.key)
def test_any_row_and_choice(panel: Panel) -> None:
    """A row beyond the end of a list, and a kind that is not there, are drawn too."""
    for row, choice in ((0, "GGA"), (10_000, ""), (3, "\x1b[31m"), (199, "GSV")):
        grid = panel.render(snapshots.full(), Size(80, 21, row=row, choice=choice))
        check_lines(grid.lines(), 80, 21, plain=False)


@pytest.mark.parametrize("panel", PANELS, ids=lambda panel: panel.key)
def test_says_what_is_missing(panel: Panel) -> None:
    """An empty panel is not blank: words say what is missing."""
    text = " ".join(panel.render(snapshots.empty(), Size(78, 20)).lines())
    assert any(word in text for word in ("yet", "no alarm", "not known", "unknown")), text


def test_pure() -> None:
    """The same snapshot at the same size gives the same picture."""
    for panel in PANELS:
        first, second = (panel.render(snapshots.full(), Size(90, 30)) for _ in range(2))
        assert (first.rows, first.tones) == (second.rows, second.tones)


def test_list_is_complete() -> None:
    """Each file of the folder with a panel in it is in the list, and each panel stands in a view and has help."""
    folder = Path(panels.__file__).parent
    files = {path.stem for path in folder.glob("*.py")} - {"__init__", "panel"}
    assert files == {panel.key for panel in PANELS}
    shown = {key for view in VIEWS for _, _, columns in view.layouts for _, stack in columns for key, _ in stack}
    assert shown == files
    assert all(
        (len(panel.help) > 200 and "sual" in panel.help) or panel.key in ("events", "sentences", "verdict")
        for panel in PANELS
    )


@pytest.mark.parametrize("view", VIEWS, ids=lambda view: view.name)
def test_views(view: object) -> None:
    """Every view at every size is as large as the screen, whatever the snapshot."""
    for make in SUBJECTS.values():
        for width, height in SIZES:
            grid = compose(make(), view, Size(width, height))  # type: ignore[arg-type]
            check_lines(grid.lines(), width, height, plain=False)


def test_real_logs() -> None:
    """Real logs, where this machine holds them, are drawn in every view."""
    found = snapshots.real()
    if not found:
        sys.stderr.write("no real logs on this machine: only the invented receiver was drawn\n")
    for snapshot in [*found, snapshots.full()]:
        for view in VIEWS:
            check_lines(compose(snapshot, view, Size(80, 23)).lines(), 80, 23, plain=False)


def _row(snapshot: Snapshot, row: int, width: int = 100) -> str:
    return compose(snapshot, VIEWS[0], Size(width, 24)).lines()[row].strip()


def test_answer_first() -> None:
    """Row 0 says the fix, how good it is, alarms and the verdict, in words."""
    assert _row(snapshots.empty(), 0).startswith("✗ no data yet │ no alarm │ ? undecided")
    answer = _row(snapshots.full(), 0)
    assert answer.startswith("differential, R95 ")
    assert "no alarm" in answer


def test_no_fix_is_said_with_its_age() -> None:
    """Quality 0 reads as no fix, with the time since the last one."""
    snapshot = snapshots.full()
    at = snapshot.receiver.axis_ms
    assert at is not None
    lost = replace(snapshot.receiver, quality=0, last_fix_axis_ms=at - 12_000)
    assert _row(replace(snapshot, receiver=lost), 0).startswith("✗ no fix for 12 s")


def test_silence_of_a_live_source_ages_the_fix() -> None:
    """The fix of a live source grows old by the host's clock; an old one is marked."""
    snapshot = snapshots.full()
    source = replace(snapshot.source, kind="live")
    receiver = replace(snapshot.receiver, received_s=1000.0)
    grid = compose(replace(snapshot, source=source, receiver=receiver), VIEWS[0], Size(100, 24), now_s=1100.0)
    assert grid.lines()[0].startswith("✗ differential")
    assert "2 min old" in grid.lines()[0]


def test_simulated_is_said() -> None:
    """A simulated source is never mistaken for a receiver."""
    snapshot = snapshots.full()
    source = replace(snapshot.source, simulated=True, kind="simulated")
    assert _row(replace(snapshot, source=source), 1).startswith("SIMULATED")
