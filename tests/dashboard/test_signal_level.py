"""The signals panel: its table against sums by hand, one signal alone, letters that can be told apart."""

from __future__ import annotations

import re
from collections import defaultdict

import pytest

from gnssmon.dashboard.drawing import Size
from gnssmon.dashboard.panels.signal_level import PANEL
from tests.dashboard import snapshots

BANDS = {"1": "a", "6": "b"}
"""Signal identifiers of GPS in the invented stream: 1 is L1 C/A, 6 is L2 CL (NMEA 0183 4.11); letters in the panel."""


def levels_by_hand() -> dict[tuple[str, int, int], list[int]]:
    """Levels of the invented stream by signal identifier and elevation range, straight from its text."""
    found: dict[tuple[str, int, int], list[int]] = defaultdict(list)
    for line in snapshots.stream().decode().splitlines():
        if not line.startswith("$GPGSV"):
            continue
        *fields, signal = line.split("*")[0].split(",")
        for i in range(4, len(fields), 4):
            elevation, level = int(fields[i + 1]), fields[i + 3]
            if level:
                for low, high in ((0, 15), (15, 30), (30, 45), (45, 60), (60, 90)):
                    if low <= elevation < high or elevation == high == 90:
                        found[signal, low, high].append(int(level))
    return found


def test_table_holds_the_means_by_elevation() -> None:
    """Each cell is the mean of all levels that the sentences state in that range of elevation."""
    lines = PANEL.render(snapshots.full(), Size(80, 21)).lines()
    by_hand = levels_by_hand()
    for signal, letter in BANDS.items():
        row = next(line for line in lines if line.startswith(f"{letter} GPS"))
        shown = re.findall(r"\d+\.\d", row)[-5:]
        expected = [sum(v) / len(v) for (s, _, _), v in sorted(by_hand.items()) if s == signal]
        assert len(expected) == 5
        assert [float(text) for text in shown] == pytest.approx(expected, abs=0.051)


def test_one_signal_alone() -> None:
    """A chosen signal is drawn alone; the table still holds all."""
    snapshot = snapshots.full()
    first, second = PANEL.choices(snapshot)
    assert (first[0], second[0]) == ("G", "G")
    lines = PANEL.render(snapshot, Size(80, 21, True, choice=second)).lines()
    plots = "".join(lines[4:]).replace("dB", "").replace("against", "")
    assert "b" in plots
    assert sum(line.startswith(("a GPS", "b GPS")) for line in lines) == 2
    ends = [line[37:39].strip() for line in lines[5:]]
    assert ends.count("b") == 1
    assert "a" not in ends


@pytest.mark.parametrize("height", [12, 16, 21, 37])
def test_letters_at_the_ends_do_not_cover_each_other(height: int) -> None:
    """However near two curves end: each has its letter."""
    lines = PANEL.render(snapshots.full(), Size(80, height)).lines()
    ends = "".join(line[36:39] for line in lines[5:])
    assert ends.count("a") == ends.count("b") == 1
