"""The state store: the latest of everything a receiver has said, with a bounded history of its sentences."""

from __future__ import annotations

import math
import re
from collections import deque
from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from gnssmon.constellations.identity import SYSTEM_STEP, label, signal_label
from gnssmon.epochs.batch import KINDS, EpochBatch, Ints
from gnssmon.epochs.in_view import InView
from gnssmon.epochs.rows import Rows
from gnssmon.epochs.statements import LEADING, WHOLE, heading_rows, position_rows, velocity_rows
from gnssmon.nmea.columns import Columns, Sentences, Table
from gnssmon.pipeline import Block
from gnssmon.printable import printable

MOST_LINES = 200
"""As many as anyone scrolls back on a screen while sentences run."""

MOST_TEXTS = 20

LATEST_SENTENCES = 1000
"""How far back in one block the satellites in view are looked for: thirty full bursts. Of several blocks of a log,
each larger than this, only the last one is looked into before somebody asks."""

LONGEST_SILENCE = 500
"""A sentence type that has not come for so many sentences no longer speaks for the position."""


@dataclass(frozen=True, slots=True)
class SatelliteNow:
    """One satellite as last listed."""

    satellite: str
    """``G07``; ``?58`` where the system is not known."""
    elevation_deg: float | None
    azimuth_deg: float | None
    used: bool
    cn0_dbhz: dict[str, float] = field(default_factory=dict)
    """By signal label (``G1``); a signal listed without a level is not in it."""


@dataclass(frozen=True, slots=True)
class LineNow:
    """One sentence of the bounded history, for the inspector."""

    sequence: int
    raw: bytes
    """Address to last field, without start character and checksum; untrusted: show through ``printable``."""


@dataclass(frozen=True, slots=True, kw_only=True)
class ReceiverState:
    """Frozen view of the latest values; None: never stated, or empty when last stated."""

    axis_ms: int | None = None
    utc_ms: int | None = None
    dated: bool = False
    received_s: float | None = None
    """Host arrival of the last byte."""
    quality: int | None = None
    latitude_deg: float | None = None
    longitude_deg: float | None = None
    altitude_m: float | None = None
    separation_m: float | None = None
    satellites_used: int | None = None
    pdop: float | None = None
    hdop: float | None = None
    vdop: float | None = None
    correction_age_s: float | None = None
    station: int | None = None
    speed_mps: float | None = None
    course_deg: float | None = None
    heading_deg: float | None = None
    last_fix_axis_ms: int | None = None
    """Time of the latest epoch with a fix."""
    satellites: tuple[SatelliteNow, ...] = ()
    """By system, then number."""
    lines: tuple[LineNow, ...] = ()
    """The latest sentences, oldest first, at most 200."""
    texts: tuple[str, ...] = ()
    """The latest TXT messages, made printable, at most 20."""
    datum: str | None = None
    """From DTM."""


class Receiver:
    """The latest of everything, for one stream. Small work per burst; of a large block only the end counts."""

    def __init__(self) -> None:
        self._newest = -1  # sequence of the last sentence
        self._latest: dict[tuple[str, str], tuple[int, Rows]] = {}  # by group and formatter: sequence and the row
        self._whole_gns = -1  # sequence of the last GNS of the combined solution
        self._received_s = math.nan
        self._now: EpochBatch | None = None  # the latest epoch alone
        self._last_fix_axis_ms: int | None = None
        self._in_view = InView()
        self._unseen: Block | None = None  # the last block, before its satellites are looked at
        self._used_closed: dict[int, set[int]] = {}  # by system index, of the last closed epoch with GSA
        self._used_opened: dict[int, set[int]] = {}
        self._dop: tuple[float | None, float | None, float | None] = (
            None,
            None,
            None,
        )  # position, horizontal, vertical
        self._lines: deque[LineNow] = deque(maxlen=MOST_LINES)
        self._texts: deque[str] = deque(maxlen=MOST_TEXTS)
        self._datum: str | None = None

    def update(self, block: Block) -> None:
        """Take in what one chunk has brought."""
        if not math.isnan(block.received_s):
            self._received_s = block.received_s
        self._take_epochs(block.closed, block.opened)
        if not len(block.sentences):
            return
        self._newest = int(block.sentences.sequence[-1])
        self._take_values(block.columns)
        if len(block.sentences) < LATEST_SENTENCES:
            self._take_unseen()
        self._unseen = block

    def _take_unseen(self) -> None:
        block, self._unseen = self._unseen, None
        if block is None:
            return
        self._take_lines(block.sentences)
        last = int(block.sentences.sequence[-1])
        first = max(int(block.sentences.sequence[0]), last + 1 - LATEST_SENTENCES)
        self._in_view.update(block.columns, first, last + 1 - first)

    def _take_lines(self, sentences: Sentences) -> None:
        for row in range(max(0, len(sentences) - MOST_LINES), len(sentences)):
            raw = sentences.buffer[sentences.start[row] : sentences.end[row]].tobytes()
            self._lines.append(LineNow(int(sentences.sequence[row]), raw))

    def _take_values(self, columns: Columns) -> None:
        tables = {name: table for name, table in columns.tables.items() if len(table)}
        for group, (formatters, reader) in _GROUPS.items():
            for name in formatters:
                if name in tables and self._speaks(tables[name]):
                    row = _last(tables[name])
                    self._latest[group, name] = (int(row.sequence[0]), reader(name, row, row.sequence))
        if "TXT" in tables:
            self._texts.extend(_text(text) for text in tables["TXT"].fields["text"][-MOST_TEXTS:])
        if "DTM" in tables:
            datum = bytes(tables["DTM"].fields["datum"][-1])
            self._datum = printable(datum) if datum else None

    def _speaks(self, table: Table) -> bool:
        """Whether a table's last row replaces what was known: GNS of single systems do not replace the whole one."""
        if table.formatter != "GNS" or (table.talker == WHOLE).any():
            self._whole_gns = int(table.sequence[-1]) if table.formatter == "GNS" else self._whole_gns
            return True
        return self._whole_gns < 0 or self._newest - self._whole_gns > LONGEST_SILENCE

    def _take_epochs(self, closed: EpochBatch, opened: EpochBatch) -> None:
        for batch in (closed, opened):
            if len(batch):
                self._now = batch.part(len(batch) - 1, len(batch))
                fixed = np.flatnonzero((batch.quality > 0) & np.isfinite(batch.latitude_deg))
                if len(fixed):
                    self._last_fix_axis_ms = int(batch.axis_ms[fixed[-1]])
        stated = np.flatnonzero(closed.kinds & _GSA)
        if len(stated):
            self._used_closed = _used(closed, int(stated[-1]))
            self._dop = _dop(closed, int(stated[-1]))
        self._used_opened = {}
        for epoch in np.flatnonzero(opened.kinds & _GSA):
            # A burst may still be coming: what it has not told yet stays as it was.
            self._used_opened.update(_used(opened, int(epoch)))
            if math.isfinite(opened.pdop[epoch]):
                self._dop = _dop(opened, int(epoch))

    def state(self) -> ReceiverState:
        """Return a frozen view of the latest values."""
        self._take_unseen()
        position = self._speaking("position")
        velocity, heading = self._speaking("velocity", "speed_mps"), self._speaking("heading", "heading_deg")
        pdop, hdop, vdop = self._dop
        quality, satellites, station = (position.get(name) for name in ("quality", "satellites_used", "station"))
        axis_ms = utc_ms = None
        if self._now is not None:
            axis_ms = int(self._now.axis_ms[0])
            utc_ms = int(self._now.utc_ms[0]) if self._now.utc_ms[0] >= 0 else None
        return ReceiverState(
            axis_ms=axis_ms,
            utc_ms=utc_ms,
            dated=utc_ms is not None,
            received_s=None if math.isnan(self._received_s) else self._received_s,
            quality=None if quality is None or quality < 0 else int(quality),
            latitude_deg=position.get("latitude_deg"),
            longitude_deg=position.get("longitude_deg"),
            altitude_m=position.get("altitude_m"),
            separation_m=position.get("separation_m"),
            satellites_used=None if satellites is None else int(satellites),
            pdop=pdop,
            hdop=position.get("hdop", hdop),
            vdop=vdop,
            correction_age_s=position.get("correction_age_s"),
            station=None if station is None else int(station),
            speed_mps=velocity.get("speed_mps"),
            course_deg=velocity.get("course_deg"),
            heading_deg=heading.get("heading_deg"),
            last_fix_axis_ms=self._last_fix_axis_ms,
            satellites=self._satellites(),
            lines=tuple(self._lines),
            texts=tuple(self._texts),
            datum=self._datum,
        )

    def _speaking(self, group: str, needed: str | None = None) -> dict[str, float]:
        """Return the values stated by the first sentence type of a group that is recent and has a value ``needed``."""
        for name in _GROUPS[group][0]:
            sequence, rows = self._latest.get((group, name), (-1, None))
            if rows is None or self._newest - sequence > LONGEST_SILENCE:
                continue
            values = {name: float(column[0]) for name, column in rows.columns.items()}
            if needed is None or math.isfinite(values[needed]):
                return {name: value for name, value in values.items() if math.isfinite(value)}
        return {}

    def _satellites(self) -> tuple[SatelliteNow, ...]:
        used = set().union(*(self._used_closed | self._used_opened).values())
        directions: dict[int, tuple[float, float]] = {}
        levels: dict[int, dict[str, float]] = {}
        for group in self._in_view.groups():
            code = group.satellite
            if code not in directions or math.isnan(directions[code][0]):
                directions[code] = (group.elevation_deg, group.azimuth_deg)
            if not math.isnan(group.cn0_dbhz):
                levels.setdefault(code, {})[signal_label(code // SYSTEM_STEP, group.signal)] = group.cn0_dbhz
        return tuple(
            SatelliteNow(label(code), _finite(elevation), _finite(azimuth), code in used, levels.get(code, {}))
            for code, (elevation, azimuth) in sorted(directions.items())
        )


_GROUPS: dict[str, tuple[tuple[str, ...], Callable[[str, Table, Ints], Rows]]] = {
    "position": (LEADING, position_rows),
    "velocity": (("RMC", "VTG"), velocity_rows),
    "heading": (("HDT", "THS"), heading_rows),
}
"""Which sentence types tell what, the preferred one first."""

_GSA = 1 << KINDS.index("GSA")


def _used(batch: EpochBatch, epoch: int) -> dict[int, set[int]]:
    """Satellite codes used in one epoch, by system index."""
    used: dict[int, set[int]] = {}
    for code in batch.used.satellite[batch.used.epoch == epoch].tolist():
        used.setdefault(code // SYSTEM_STEP, set()).add(code)
    return used


def _dop(batch: EpochBatch, epoch: int) -> tuple[float | None, float | None, float | None]:
    return _finite(batch.pdop[epoch]), _finite(batch.hdop[epoch]), _finite(batch.vdop[epoch])


def _last(table: Table) -> Table:
    """The last row as a table; of GNS the last one of the whole solution, where there is one."""
    row = len(table) - 1
    if table.formatter == "GNS" and len(whole := np.flatnonzero(table.talker == WHOLE)):
        row = int(whole[-1])
    return table.rows(slice(row, row + 1))


def _text(field: bytes) -> str:
    """The text of TXT: ``^hh`` stands for one byte of ISO 8859-1."""
    text = re.sub(rb"\^([0-9A-Fa-f]{2})", lambda match: bytes([int(match[1], 16)]), bytes(field))
    return printable(text.decode("latin-1"))


def _finite(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None
