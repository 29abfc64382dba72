"""The satellites: each with its direction, whether it is used, and its level by signal."""

from __future__ import annotations

from gnssmon.constellations.systems import SIGNALS
from gnssmon.dashboard.drawing import Grid, Size
from gnssmon.dashboard.panels.panel import SYSTEM_TONES, Panel, nothing
from gnssmon.receiver import SatelliteNow
from gnssmon.snapshot import Snapshot

LEVEL, TIGHT_LEVEL = 4, 3
"""Cells for one level with the gap before it; the second where satellites would have no place otherwise."""

HEAD = 7
"""Cells for the satellite, the mark of use and its elevation."""

GAP = 2

BANDS = (
    ("L1", 1550.0, 1620.0),
    ("L2", 1216.0, 1260.0),
    ("L5", 1164.0, 1189.0),
    ("E5", 1189.0, 1216.0),
    ("L6", 1260.0, 1300.0),
    ("S", 2480.0, 2500.0),
)
"""Signals of all systems stand under one another by their carrier, MHz: E5a and B2a under L5, E5b and B2b under E5."""

UNKNOWN = "?"

_CARRIERS = {signal.label: signal.carrier_mhz for signal in SIGNALS}

LEAST_BAR, MOST_BAR = 4, 24
"""Cells of a bar worth drawing, and beyond which it tells nothing more."""

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
    needed = max(1, -(-len(tracked) // rows))

    def fitting(level: int) -> int:
        return max(1, (size.width + GAP) // (HEAD + level * len(bands) + GAP))

    level = LEVEL if fitting(LEVEL) >= min(needed, fitting(TIGHT_LEVEL)) else TIGHT_LEVEL
    columns = min(fitting(level), needed)
    wide = HEAD + level * len(bands)
    bar = min(MOST_BAR, (size.width + GAP) // columns - GAP - wide - 1)
    bar = bar if bar >= LEAST_BAR else 0
    step = wide + GAP + (bar + 1 if bar else 0)
    shown = tracked[: columns * rows]
    for column in range(columns):
        _column(grid, column * step, shown[column * rows : (column + 1) * rows], bands, level, bar)
    left_out = len(tracked) - len(shown)
    text = f"{len(tracked)} with signal, {len(silent)} without; * used"
    if left_out:
        text = f"{left_out} more; {text}"
    grid.put(0, size.height - 1, text, "quiet", size.width)
    return grid


def _bands(tracked: list[SatelliteNow]) -> list[str]:
    """The bands with a level, in the order of the table."""
    seen = {_band(signal) for one in tracked for signal in one.cn0_dbhz}
    return [name for name in (*(name for name, _, _ in BANDS), UNKNOWN) if name in seen]


def _band(signal: str) -> str:
    """The band of a signal's carrier."""
    carrier_mhz = _CARRIERS.get(signal, 0.0)
    return next((name for name, low, high in BANDS if low <= carrier_mhz < high), UNKNOWN)


def _column(grid: Grid, x: int, part: list[SatelliteNow], bands: list[str], level: int, bar: int) -> None:
    if not part:
        return
    grid.put(x, 0, "sat  el", "quiet")
    for i, band in enumerate(bands):
        grid.right(x + HEAD + level * (i + 1), 0, band[: level - 1], "quiet")
    for y, one in enumerate(part, 1):
        tone = SYSTEM_TONES.get(one.satellite[:1], "")
        grid.put(x, y, one.satellite[:3], tone)
        grid.put(x + 3, y, "*" if one.used else " ")
        grid.right(x + HEAD, y, "–" if one.elevation_deg is None else f"{one.elevation_deg:.0f}", "quiet")
        for i, band in enumerate(bands):
            found = max((v for signal, v in one.cn0_dbhz.items() if _band(signal) == band), default=None)
            text = "·" if found is None else f"{found:.0f}"
            grid.right(x + HEAD + level * (i + 1), y, text, "quiet" if found is None else "strong")
        if bar and one.cn0_dbhz:
            best = max(one.cn0_dbhz.values())
            start = x + HEAD + level * len(bands) + 1
            grid.bar(start, y, bar, (best - WEAK_DBHZ) / (STRONG_DBHZ - WEAK_DBHZ), tone)


PANEL = Panel(
    key="satellites",
    title="Satellites: C/N0 in dB-Hz by band",
    help="""\
Every satellite that the receiver lists with a level, as last listed: its RINEX name (G GPS, R GLONASS, E Galileo, \
C BeiDou, J QZSS, I NavIC, S SBAS), a star when the position solution uses it, its elevation in degrees and the \
carrier-to-noise density (C/N0, dB-Hz) by band, GPS and all others under one another by their carrier: L1 1575 MHz \
and near it, L2 1227 and 1246, L5 1176 (with E5a and B2a), E5 1207 (E5b and B2b), L6 1269 to 1279. Of two signals on \
one band the stronger is shown. A dot: no level listed there; a column with a question mark: the receiver does not \
name the signal. The bar is that of the strongest signal, from 20 to 55 dB-Hz.

Usual: 40 to 50 dB-Hz above 30 degrees of elevation with an open sky, 30 to 40 near the horizon (common practice, \
no source).

If levels are low everywhere: antenna, cable, connector, amplifier supply. Low in one direction: something stands \
there. Low on one band only: interference, or an antenna that is not made for it.""",
    render=render,
)
