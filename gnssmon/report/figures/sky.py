"""The sky: tracks of the satellites with the estimated horizon; which cells were probed and what was found there."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from gnssmon.report.figures.drawing import GREY, HALF_MM, INK, Drawing, colour, dome, on_dome
from gnssmon.snapshot import Snapshot
from gnssmon.statistics.pictures import (
    CELL_BLOCKED,
    CELL_MIXED,
    CELL_OPEN,
    CELL_UNKNOWN,
    CELL_UNREACHABLE,
    SkyPicture,
    Track,
)

Floats = npt.NDArray[np.float64]

SYSTEMS = {"G": "GPS", "R": "GLONASS", "E": "Galileo", "C": "BeiDou", "J": "QZSS", "I": "NavIC", "S": "SBAS"}
"""RINEX system letters."""

CELLS = {
    CELL_OPEN: ("received", "#A6D3EC", ""),
    CELL_MIXED: ("received in part", "#F2D58E", "///"),
    CELL_BLOCKED: ("no signal", "#D55E00", "xxx"),
    CELL_UNKNOWN: ("not yet known", "#ffffff", ""),
    CELL_UNREACHABLE: ("no satellite passes", "#e6e6e6", "..."),
}
MOST_NAMED = 45
"""With more satellites received their names would cover the picture."""
LARGEST_STEP_DEG = 15.0
"""A satellite's next point farther off than this belongs to another pass."""


def _draw_tracks(figure: Any, snapshot: Snapshot) -> None:
    from matplotlib.patches import Patch

    picture = snapshot.pictures.sky
    axes = figure.subplots()
    dome(axes)
    _horizon(axes, picture)
    named = sum(bool(track.tracked.any()) for track in picture.tracks) <= MOST_NAMED
    systems: dict[str, str] = {}
    for track in picture.tracks:
        letter = track.satellite[:1]
        systems.setdefault(letter, colour(list(SYSTEMS).index(letter)) if letter in SYSTEMS else GREY)
        x, y = _path(track)
        axes.plot(
            np.where(track.tracked, x, np.nan), np.where(track.tracked, y, np.nan), color=systems[letter], linewidth=0.8
        )
        axes.plot(
            np.where(track.tracked, np.nan, x), np.where(track.tracked, np.nan, y), color=INK, linewidth=0.6, ls=":"
        )
        if named and track.tracked.any():
            last = np.flatnonzero(track.tracked)[-1]
            place = on_dome(track.azimuth_deg[last:][:1], track.elevation_deg[last:][:1])
            axes.annotate(
                track.satellite,
                (place[0][0], place[1][0]),
                xytext=(2, 2),
                textcoords="offset points",
                fontsize=4.5,
                color=systems[letter],
                zorder=7,
            )
    _mask(axes, picture)
    handles = [Patch(color=systems[letter], label=SYSTEMS.get(letter, "unknown")) for letter in sorted(systems)]
    handles += [
        Patch(facecolor="#bbbbbb", label="hidden"),
        Patch(facecolor="white", edgecolor=GREY, hatch="////", label="not yet known"),
    ]
    figure.legend(handles=handles, loc="outside lower center", ncols=4, handlelength=1.2)


def _path(track: Track) -> tuple[Floats, Floats]:
    """The track on the dome, broken where a new pass begins."""
    x, y = on_dome(track.azimuth_deg, track.elevation_deg)
    far = np.hypot(np.diff(x, prepend=x[:1]), np.diff(y, prepend=y[:1])) > LARGEST_STEP_DEG
    return np.where(far, np.nan, x), np.where(far, np.nan, y)


def _horizon(axes: Any, picture: SkyPicture) -> None:
    for sector, height_deg in enumerate(picture.horizon_deg):
        known = bool(np.isfinite(height_deg))
        top = float(height_deg) if known else picture.mask_deg
        x, y = _cell(sector * 10.0, sector * 10.0 + 10.0, 0.0, max(top, 0.0))
        if known:
            axes.fill(x, y, color="#bbbbbb", linewidth=0, zorder=1)
        else:
            axes.fill(x, y, facecolor="white", edgecolor=GREY, hatch="////", linewidth=0, zorder=1)


def _mask(axes: Any, picture: SkyPicture) -> None:
    turn = np.arange(0.0, 361.0, 3.0)
    axes.plot(*on_dome(turn, np.full(len(turn), picture.mask_deg)), color=INK, linewidth=0.6, ls="--", zorder=5)


def _draw_coverage(figure: Any, snapshot: Snapshot) -> None:
    from matplotlib.patches import Patch

    picture = snapshot.pictures.sky
    axes = figure.subplots()
    dome(axes)
    for index, state in enumerate(picture.state):
        _, face, hatch = CELLS.get(int(state), CELLS[CELL_UNKNOWN])
        x, y = _cell(
            float(picture.azimuth_from_deg[index]),
            float(picture.azimuth_to_deg[index]),
            float(picture.elevation_from_deg[index]),
            float(picture.elevation_to_deg[index]),
        )
        axes.fill(x, y, facecolor=face, edgecolor="#cccccc", linewidth=0.3, hatch=hatch, zorder=1)
    _mask(axes, picture)
    present = [code for code in CELLS if (picture.state == code).any()]
    handles = [
        Patch(facecolor=CELLS[code][1], hatch=CELLS[code][2], edgecolor=GREY, linewidth=0.3, label=CELLS[code][0])
        for code in present
    ]
    figure.legend(handles=handles, loc="outside lower center", ncols=3, handlelength=1.2)


def _cell(from_deg: float, to_deg: float, low_deg: float, high_deg: float) -> tuple[Floats, Floats]:
    """Outline of a piece of sky, arcs in steps of at most 5 degrees."""
    if to_deg <= from_deg:
        to_deg += 360.0
    turn = np.linspace(from_deg, to_deg, max(int((to_deg - from_deg) / 5.0), 1) + 1)
    azimuth_deg = np.concatenate([turn, turn[::-1]])
    elevation_deg = np.concatenate([np.full(len(turn), low_deg), np.full(len(turn), high_deg)])
    return on_dome(azimuth_deg, elevation_deg)


TRACKS = Drawing(
    key="sky-tracks",
    title="Sky: tracks and horizon",
    caption="Where satellites passed; dotted: listed without a signal. Grey: estimated horizon. Dashed: the mask. "
    "North is up, the zenith in the middle.",
    width_mm=HALF_MM,
    height_mm=96.0,
    drawable=lambda snapshot: len(snapshot.pictures.sky.tracks) > 0,
    draw=_draw_tracks,
)
COVERAGE = Drawing(
    key="sky-coverage",
    title="Sky: what has been probed",
    caption="Equal pieces of sky: signals received, received in part, satellites without a signal, nothing known yet, "
    "or out of every satellite's reach.",
    width_mm=HALF_MM,
    height_mm=96.0,
    drawable=lambda snapshot: len(snapshot.pictures.sky.state) > 0,
    draw=_draw_coverage,
)
