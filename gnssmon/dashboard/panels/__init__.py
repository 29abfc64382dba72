"""The panels: a new one is a file of its own and a line here."""

from __future__ import annotations

from gnssmon.dashboard.panels import (
    events,
    fix,
    satellites,
    scatter,
    sentences,
    signal_level,
    sky,
    stream,
    timing,
    verdict,
)
from gnssmon.dashboard.panels.panel import Panel

PANELS: tuple[Panel, ...] = (
    fix.PANEL,
    satellites.PANEL,
    sky.PANEL,
    signal_level.PANEL,
    scatter.PANEL,
    stream.PANEL,
    timing.PANEL,
    verdict.PANEL,
    events.PANEL,
    sentences.PANEL,
)


def panel(key: str) -> Panel:
    """The panel of that key; raises KeyError."""
    for one in PANELS:
        if one.key == key:
            return one
    raise KeyError(key)
