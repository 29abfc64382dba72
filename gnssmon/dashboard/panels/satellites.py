"""The satellites: each with its direction, whether it is used, and its level by signal."""

from __future__ import annotations

from gnssmon.dashboard.drawing import Grid, Size
from gnssmon.dashboard.panels.panel import SYSTEM_TONES, Panel, nothing
from gnssmon.receiver import SatelliteNow
from gnssmon.snapshot import Snapshot

LEVEL = 4
"""Cells for one level with the gap before it."""

HEAD = 8
"""Cells for the satellite, the mark of use and its elevation."""

GAP = 2

WEAK_DBHZ, STRONG_DBHZ = 20.0, 55.0
"""Ends of a level bar: the weakest that receivers track, the strongest reported; common practice, no source."""


def render(snapshot: Snapshot, size: Size) -> Grid:
    """Draw tracked satellites in as many columns as fit, with a bar for the strongest level where there is room."""
    listed = snapshot.receiver.satellites
    if not listed:
        return nothing(size, "no satellite sentences yet: switch on GSV (satellites in view) in the receiver")
    grid = Grid(size)
    tracked = [one for one in listed if one.cn0_dbhz]
    silent = [one for one in listed if not one.cn0_dbhz]
    bands = _bands(tracked)
    rows = max(1, size.height - 2)
    wide = HEAD + LEVEL * len(bands)
    columns = max(1, min((size.width + GAP) // (wide + GAP), -(-len(tracked) // rows) or 1))
    while columns > 1 and -(-len(tracked) // rows) < columns:
        columns -= 1
    bar = max(0, min(24, (size.width + GAP) // columns - GAP - wide - 1))
    bar = bar if bar >= 4 else 0
    step = wide + GAP + (bar + 1 if bar else 0)
    shown = tracked[: columns * rows]
    for column in range(columns):
        part = shown[column * rows : (column + 1) * rows]
        if not part:
            break
        _column(grid, column * step, part, bands, bar)
    left_out = len(tracked) - len(shown)
    text = f"{len(tracked)} with signal, {len(silent)} without; * used"
    if left_out:
        text = f"{left_out} more; {text}"
    grid.put(0, size.height - 1, text, "quiet", size.width)
    return grid


def _bands(tracked: list[SatelliteNow]) -> list[str]:
    """Band names over all systems, as they stand behind the system letter, at most four."""
    return sorted({signal[1:] for one in tracked for signal in one.cn0_dbhz})[:4]


def _column(grid: Grid, x: int, part: list[SatelliteNow], bands: list[str], bar: int) -> None:
    grid.put(x, 0, "sat  el°", "quiet")
    for i, band in enumerate(bands):
        grid.right(x + HEAD + LEVEL * (i + 1), 0, (band or "?")[: LEVEL - 1], "quiet")
    for y, one in enumerate(part, 1):
        tone = SYSTEM_TONES.get(one.satellite[:1], "")
        grid.put(x, y, one.satellite[:4], tone)
        grid.put(x + 4, y, "*" if one.used else " ")
        grid.right(x + HEAD, y, "–" if one.elevation_deg is None else f"{one.elevation_deg:.0f}", "quiet")
        for i, band in enumerate(bands):
            level = next((v for signal, v in one.cn0_dbhz.items() if signal[1:] == band), None)
            text = "·" if level is None else f"{level:.0f}"
            grid.right(x + HEAD + LEVEL * (i + 1), y, text, "quiet" if level is None else "strong")
        if bar and one.cn0_dbhz:
            best = max(one.cn0_dbhz.values())
            start = x + HEAD + LEVEL * len(bands) + 1
            grid.bar(start, y, bar, (best - WEAK_DBHZ) / (STRONG_DBHZ - WEAK_DBHZ), tone)


PANEL = Panel(
    key="satellites",
    title="Satellites: C/N0 in dB-Hz by band",
    help="""\
Every satellite that the receiver lists with a level, as last listed: its RINEX name (G GPS, R GLONASS, E Galileo, \
C BeiDou, J QZSS, I NavIC, S SBAS), a star when the position solution uses it, its elevation in degrees and the \
carrier-to-noise density (C/N0, dB-Hz) by band. A dot: no level listed for that band; a question mark: the \
receiver does not name the signal.

Usual: 40 to 50 dB-Hz above 30 degrees of elevation with an open sky, 30 to 40 near the horizon (common practice, \
no source).

If levels are low everywhere: antenna, cable, connector, amplifier supply. Low in one direction: something stands \
there. Low on one band only: interference, or an antenna that is not made for it.""",
    render=render,
)
