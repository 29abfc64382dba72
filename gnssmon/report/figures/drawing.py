"""What a figure of the report is, and how it becomes SVG: sizes for paper, colours that survive poor eyes and printers.

Matplotlib is imported only when a figure is drawn.
"""

from __future__ import annotations

import io
import re
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from gnssmon.snapshot import Snapshot

HALF_MM, FULL_MM = 88.0, 180.0
"""Widths that fit side by side, or alone, between the margins of A4 and Letter."""

INK, GREY, PALE = "#222222", "#777777", "#dddddd"
COLOURS = ("#0072B2", "#E69F00", "#009E73", "#D55E00", "#CC79A7", "#56B4E9", "#8C6D1F", "#000000")
"""Told apart by colour-blind people: M. Okabe & K. Ito, Color Universal Design (2008); their yellow made darker."""
MARKERS = "osD^vPX*"

GAP = 2.5
FEW_POINTS = 60
"""So few points of a line are marked, so that one that stands alone is seen."""

QUALITIES = {
    0: ("no fix", "#D55E00"),
    1: ("autonomous", "#56B4E9"),
    2: ("differential", "#0072B2"),
    3: ("precise", "#8C6D1F"),
    4: ("RTK fixed", "#009E73"),
    5: ("RTK float", "#E69F00"),
    6: ("estimated", "#CC79A7"),
    7: ("manual", "#777777"),
    8: ("simulated", "#000000"),
}
"""Names and colours of the GGA quality indicator."""

STYLE = {
    "font.family": ["DejaVu Sans", "sans-serif"],
    "font.size": 7.0,
    "axes.labelsize": 7.0,
    "axes.edgecolor": GREY,
    "axes.linewidth": 0.6,
    "axes.grid": True,
    "axes.axisbelow": True,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "grid.color": PALE,
    "grid.linewidth": 0.5,
    "xtick.color": INK,
    "ytick.color": INK,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "legend.fontsize": 6.5,
    "legend.frameon": False,
    "lines.linewidth": 1.0,
    "lines.markersize": 3.0,
    "hatch.linewidth": 0.4,
    "svg.fonttype": "path",
    "text.parse_math": False,
}


@dataclass(frozen=True, slots=True, kw_only=True)
class Drawing:
    """One figure of the report."""

    key: str
    title: str
    caption: str
    """What is seen, in one or two sentences."""
    width_mm: float
    height_mm: float
    drawable: Callable[[Snapshot], bool]
    """Whether there is anything to draw."""
    draw: Callable[[Any, Snapshot], None]
    """Takes an empty Matplotlib figure of the right size."""


def svg(drawing: Drawing, snapshot: Snapshot) -> str | None:
    """The figure as an ``<svg>`` element that stands alone; None where there is nothing to draw."""
    if not drawing.drawable(snapshot):
        return None
    import matplotlib
    from matplotlib.figure import Figure

    # With a fixed salt the identifiers are the same from run to run; below they are kept apart from other figures'.
    style: Any = {**STYLE, "svg.hashsalt": "gnssmon"}
    with matplotlib.rc_context(style):
        figure = Figure(figsize=(drawing.width_mm / 25.4, drawing.height_mm / 25.4), layout="constrained")
        drawing.draw(figure, snapshot)
        out = io.StringIO()
        figure.savefig(out, format="svg", metadata=dict.fromkeys(("Date", "Creator", "Format", "Type")))
    text = out.getvalue()
    text = re.sub(r'( id="|href="#|url\(#)', rf"\1{drawing.key}-", text)
    return text[text.index("<svg") :].replace("<svg ", f'<svg role="img" aria-label="{drawing.title}" ', 1)


def moments(axis_ms: npt.NDArray[np.int64], snapshot: Snapshot) -> npt.NDArray[np.datetime64]:
    """Instants of the time axis as UTC for a time axis on paper, shape as given."""
    return (axis_ms + (snapshot.utc_offset_ms or 0)).astype("datetime64[ms]")


def broken(
    minute: npt.NDArray[np.int64], values: npt.NDArray[np.float64]
) -> tuple[npt.NDArray[np.int64], npt.NDArray[np.float64]]:
    """The same series with a NaN in each gap, so that a line does not pretend to know what lies between.

    ``minute`` has shape (t,), ``values`` shape (t,) or (t, k). A gap is a step of more than ``GAP`` usual ones.
    """
    if len(minute) < 3:
        return minute, values
    steps = np.diff(minute)
    after = np.flatnonzero(steps > GAP * np.median(steps)) + 1
    return np.insert(minute, after, minute[after - 1] + 1), np.insert(values, after, np.nan, axis=0)


def time_axis(axes: Any, snapshot: Snapshot) -> None:
    """Label the horizontal axis as UTC; without a date only the time of day is shown."""
    import matplotlib.dates

    dates: Any = matplotlib.dates
    locator = dates.AutoDateLocator(minticks=4, maxticks=9)
    axes.xaxis.set_major_locator(locator)
    dated = snapshot.utc_offset_ms is not None
    axes.xaxis.set_major_formatter(dates.ConciseDateFormatter(locator) if dated else dates.DateFormatter("%H:%M:%S"))
    axes.set_xlabel("UTC")


def colour(index: int) -> str:
    return COLOURS[index % len(COLOURS)]


def dome(axes: Any) -> None:
    """Prepare equal axes as the sky laid on a map: north up, east right, the zenith in the middle."""
    axes.set_aspect("equal")
    axes.set_xlim(-103, 103)
    axes.set_ylim(-103, 103)
    axes.axis("off")
    turn = np.radians(np.arange(0.0, 361.0, 3.0))
    for elevation_deg in (0, 30, 60):
        radius = 90.0 - elevation_deg
        axes.plot(radius * np.sin(turn), radius * np.cos(turn), color=GREY, linewidth=0.5, zorder=5)
        if elevation_deg:
            axes.text(0, radius, f"{elevation_deg}°", fontsize=5.5, color=GREY, ha="center", va="center", zorder=6)
    for name, azimuth_deg in (("N", 0.0), ("E", 90.0), ("S", 180.0), ("W", 270.0)):
        x, y = on_dome(np.array([azimuth_deg]), np.array([-8.0]))
        axes.text(x[0], y[0], name, ha="center", va="center", fontsize=7.5, fontweight="bold")


def on_dome(
    azimuth_deg: npt.NDArray[np.float64], elevation_deg: npt.NDArray[np.float64]
) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.float64]]:
    """Where directions stand on the dome: x to the east, y to the north, radius 90 minus elevation; shapes as given."""
    radius, turn = 90.0 - elevation_deg, np.radians(azimuth_deg)
    return radius * np.sin(turn), radius * np.cos(turn)
