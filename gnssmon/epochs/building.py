"""From the rows of some epochs to the epochs themselves: which row counts, where nothing was stated."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.constellations.identity import SYSTEM_STEP, satellite_codes
from gnssmon.constellations.systems import LETTERS
from gnssmon.epochs.batch import EpochBatch, Ints, SignalRows, UsedRows
from gnssmon.epochs.dates import Placed, day_of_epoch, place
from gnssmon.epochs.rows import Column, Rows
from gnssmon.epochs.statements import LEADING


@dataclass(frozen=True, slots=True)
class Known:
    """What earlier epochs of the stream have told."""

    placed: Placed
    """The last of them in time."""
    presence: Ints
    """In how many of them each of the LEADING sentences came, with or without a time in it."""


@dataclass(frozen=True, slots=True)
class Built:
    """Epochs, and what the ones after them need to know: arrays per epoch, shape (n,) or (n, LEADING)."""

    batch: EpochBatch
    placed: Placed
    presence: Ints
    """Known presence with every epoch up to and with this one."""

    def known(self, count: int) -> Known:
        """Return what the first ``count`` epochs, at least one, have told."""
        return Known(self.placed.before(count), self.presence[count - 1])


def build(
    rows: Mapping[str, Rows], first: int, count: int, known: Known, continued: set[int], ambiguous_from: int | None
) -> Built:
    """Put together the ``count`` epochs from number ``first`` on.

    ``rows`` by group as in ``statements``, none of an epoch outside; ``continued`` numbers the epochs that only go on
    with one that was cut; ``ambiguous_from`` is the first epoch in which a bare satellite number need not be GPS.
    """

    def winners(group: str) -> Ints:
        return rows[group].winners(first, count) if group in rows else np.full(count, -1, dtype=np.int64)

    def stated(group: str, name: str, winner: Ints) -> Column:
        return rows[group].chosen(name, winner, np.nan) if group in rows else np.full(count, np.nan)

    def numbers(group: str, name: str, winner: Ints, kind: type[np.signedinteger]) -> Column:
        value = np.clip(np.nan_to_num(stated(group, name, winner), nan=-1.0), -1, np.iinfo(kind).max)
        column: Column = value.astype(kind)
        return column

    position, velocity, sigma, dop = winners("position"), winners("velocity"), winners("sigma"), winners("dop")
    placed = _placed(rows, first, count, known.placed)
    presence = known.presence + np.cumsum(_marks(rows, "presence", first, count), axis=0)
    hdop = stated("position", "hdop", position)
    ledger = _ledger(rows, first, count)
    batch = EpochBatch(
        axis_ms=placed.axis_ms,
        utc_ms=placed.utc_ms,
        counted=_counted(rows, first, presence, continued),
        received_s=ledger["received_s"],
        completed_s=ledger["completed_s"],
        position_received_s=stated("position", "received_s", position),
        size=ledger["size"],
        kinds=_kinds(rows, first, count),
        quality=numbers("position", "quality", position, np.int8),
        latitude_deg=stated("position", "latitude_deg", position),
        longitude_deg=stated("position", "longitude_deg", position),
        altitude_m=stated("position", "altitude_m", position),
        separation_m=stated("position", "separation_m", position),
        satellites_used=numbers("position", "satellites_used", position, np.int16),
        pdop=stated("dop", "pdop", dop),
        hdop=np.where(hdop > 0, hdop, stated("dop", "hdop", dop)),
        vdop=stated("dop", "vdop", dop),
        correction_age_s=stated("position", "correction_age_s", position),
        station=numbers("position", "station", position, np.int32),
        speed_mps=stated("velocity", "speed_mps", velocity),
        course_deg=stated("velocity", "course_deg", velocity),
        heading_deg=stated("heading", "heading_deg", winners("heading")),
        sigma_east_m=stated("sigma", "sigma_east_m", sigma),
        sigma_north_m=stated("sigma", "sigma_north_m", sigma),
        sigma_up_m=stated("sigma", "sigma_up_m", sigma),
        signals=_signals(rows, first),
        used=_used(rows, first, ambiguous_from),
    )
    return Built(batch, placed, presence)


def _ledger(rows: Mapping[str, Rows], first: int, count: int) -> dict[str, Column]:
    received, completed = np.full(count, np.nan), np.full(count, np.nan)
    size = np.zeros(count, dtype=np.int64)
    if "ledger" in rows:
        at, came = rows["ledger"].epoch - first, rows["ledger"].columns["received_s"]
        received[at[::-1]] = came[::-1]  # the first one stays
        completed[at] = came  # the last one stays
        size += np.bincount(at, weights=rows["ledger"].columns["size"], minlength=count).astype(np.int64)
    return {"received_s": received, "completed_s": completed, "size": size}


def _placed(rows: Mapping[str, Rows], first: int, count: int, before: Placed) -> Placed:
    time_ms = np.full(count, -1, dtype=np.int64)
    day = time_ms.copy()
    if "time" in rows:
        time_ms = rows["time"].chosen("time_ms", rows["time"].winners(first, count), -1, np.int64)
    if "date" in rows:
        winner = rows["date"].winners(first, count)
        day = rows["date"].chosen("day", winner, -1, np.int64)
        stated_ms = rows["date"].chosen("time_ms", winner, -1, np.int64)
        day = np.where(day >= 0, day_of_epoch(day, stated_ms, time_ms), -1)
    return place(before, time_ms, day)


def _marks(rows: Mapping[str, Rows], group: str, first: int, count: int) -> npt.NDArray[np.bool_]:
    """Which of the LEADING sentences epochs have, shape (count, LEADING)."""
    marks = np.zeros((count, len(LEADING)), dtype=bool)
    if group in rows:
        marks[rows[group].epoch - first, rows[group].columns["kind"]] = True
    return marks


def _counted(rows: Mapping[str, Rows], first: int, presence: Ints, continued: set[int]) -> npt.NDArray[np.bool_]:
    """The leading sentence of an epoch is judged by all that came up to the end of the epoch after it: a log that
    begins in the middle of a burst must not take the first sentence it sees for the leading one."""
    count = len(presence)
    so_far = presence[np.minimum(np.arange(count) + 1, count - 1)]
    leading = np.argmax(2 * so_far >= so_far.max(axis=1, keepdims=True, initial=0), axis=1)
    timed = {"position": rows["position"].where(rows["position"].columns["timed"])} if "position" in rows else {}
    counted: npt.NDArray[np.bool_] = _marks(timed, "position", first, count)[np.arange(count), leading]
    counted[[number - first for number in continued if 0 <= number - first < count]] = False
    return counted


def _kinds(rows: Mapping[str, Rows], first: int, count: int) -> Ints:
    kinds = np.zeros(count, dtype=np.int64)
    if "kinds" in rows:
        np.bitwise_or.at(kinds, rows["kinds"].epoch - first, rows["kinds"].columns["bit"])
    return kinds


def _signals(rows: Mapping[str, Rows], first: int) -> SignalRows:
    if "signals" not in rows:
        return _NO_SIGNALS
    columns = rows["signals"].columns
    return SignalRows(
        (rows["signals"].epoch - first).astype(np.int32),
        columns["satellite"],
        columns["signal"],
        columns["elevation_deg"],
        columns["azimuth_deg"],
        columns["cn0_dbhz"],
    )


def _used(rows: Mapping[str, Rows], first: int, ambiguous_from: int | None) -> UsedRows:
    """Each satellite once an epoch, sorted by epoch and code: some receivers repeat GSA for every signal."""
    if "used" not in rows or not len(rows["used"]):
        return _NO_USED
    epoch, columns = rows["used"].epoch, rows["used"].columns
    # The epoch after decides along, for receivers that list their satellites behind their GSA.
    plain: bool | npt.NDArray[np.bool_] = True if ambiguous_from is None else epoch + 1 < ambiguous_from
    satellite = satellite_codes(columns["named"], columns["number"], plain_is_gps=plain)
    key = np.sort((epoch - first) * _CODES + satellite)
    key = key[np.flatnonzero(np.diff(key, prepend=-1))]
    return UsedRows((key // _CODES).astype(np.int32), (key % _CODES).astype(np.int32))


_CODES = len(LETTERS) * SYSTEM_STEP
_INT32, _FLOAT32 = np.empty(0, dtype=np.int32), np.empty(0, dtype=np.float32)
_NO_SIGNALS = SignalRows(_INT32, _INT32, np.empty(0, dtype=np.int16), _FLOAT32, _FLOAT32, _FLOAT32)
_NO_USED = UsedRows(_INT32, _INT32)
