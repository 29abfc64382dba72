"""Epochs → tables: per epoch or per signal, as CSV, Parquet or GeoJSON.

Written batch by batch into a file beside the one asked for, which takes its name only when all is there.
"""

from __future__ import annotations

import csv
import json
import os
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import IO, Any, Protocol, Self

import numpy as np
import numpy.typing as npt

from gnssmon import utc
from gnssmon.constellations import identity
from gnssmon.epochs.batch import EpochBatch, SignalRows, UsedRows
from gnssmon.errors import ConfigurationError, OutputError
from gnssmon.printable import printable

Columns = dict[str, list[Any]]

EPOCH_COLUMNS: dict[str, Callable[[EpochBatch], npt.NDArray[np.generic]]] = {
    "quality": lambda b: b.quality,
    "latitude_deg": lambda b: b.latitude_deg,
    "longitude_deg": lambda b: b.longitude_deg,
    "altitude_m": lambda b: b.altitude_m,
    "separation_m": lambda b: b.separation_m,
    "ellipsoidal_height_m": lambda b: b.height_m,
    "satellites_used": lambda b: b.satellites_used,
    "pdop": lambda b: b.pdop,
    "hdop": lambda b: b.hdop,
    "vdop": lambda b: b.vdop,
    "correction_age_s": lambda b: b.correction_age_s,
    "station": lambda b: b.station,
    "speed_mps": lambda b: b.speed_mps,
    "course_deg": lambda b: b.course_deg,
    "received_s": lambda b: b.position_received_s,
}
"""Beside ``utc`` and ``axis_ms``; -1 and NaN become empty."""


def epoch_table(batch: EpochBatch) -> Columns:
    """Counted epochs, one row each."""
    rows = np.flatnonzero(batch.counted)
    columns: Columns = {"utc": _instants(batch, rows), "axis_ms": batch.axis_ms[rows].tolist()}
    for name, column in EPOCH_COLUMNS.items():
        columns[name] = _plain(column(batch)[rows])
    return columns


def signal_table(batch: EpochBatch) -> Columns:
    """Satellites and signals as listed, one row each."""
    rows = batch.signals
    instants = _instants(batch, np.arange(len(batch)))
    return {
        "utc": [instants[epoch] for epoch in rows.epoch.tolist()],
        "axis_ms": batch.axis_ms[rows.epoch].tolist(),
        "satellite": _named(rows.satellite.astype(np.int64), identity.label),
        "signal": _named(rows.satellite // identity.SYSTEM_STEP * SIGNAL_STEP + rows.signal + 1, _signal_label),
        "elevation_deg": _plain(rows.elevation_deg),
        "azimuth_deg": _plain(rows.azimuth_deg),
        "cn0_dbhz": _plain(rows.cn0_dbhz),
        "used": np.isin(_pairs(rows), _pairs(batch.used)).tolist(),
    }


SIGNAL_STEP = 1024
"""More than there are rows of ``constellations.systems.SIGNALS``."""


def _signal_label(key: int) -> str:
    system, signal = divmod(key, SIGNAL_STEP)
    return identity.signal_label(system, signal - 1)


def _named(keys: npt.NDArray[np.integer], name: Callable[[int], str]) -> list[str]:
    """The name of each key; few keys are different, and only those are named."""
    different, place = np.unique(keys, return_inverse=True)
    names = [name(key) for key in different.tolist()]
    return [names[i] for i in place.tolist()]


def _pairs(rows: SignalRows | UsedRows) -> npt.NDArray[np.int64]:
    """Epoch and satellite as one number."""
    return rows.epoch.astype(np.int64) << 32 | rows.satellite


def _instants(batch: EpochBatch, rows: npt.NDArray[np.integer]) -> list[str]:
    """ISO 8601 with Z; only the time of day while no date is known."""
    return [
        utc.iso(at_ms) if at_ms >= 0 else utc.time_of_day(axis_ms)
        for at_ms, axis_ms in zip(batch.utc_ms[rows].tolist(), batch.axis_ms[rows].tolist(), strict=True)
    ]


def _plain(column: npt.NDArray[np.generic]) -> list[Any]:
    """Python numbers; None for what was not stated. Single precision is printed with the digits that it holds."""
    known = np.isfinite(column) if np.issubdtype(column.dtype, np.floating) else np.greater_equal(column, 0)
    values: list[Any] = (np.round(column.astype(np.float64), 2) if column.dtype == np.float32 else column).tolist()
    for i in np.flatnonzero(~known).tolist():
        values[i] = None
    return values


class TableFile(Protocol):
    """Takes tables of the same columns, one after the other."""

    def __init__(self, path: Path) -> None: ...
    def write(self, columns: Columns) -> None: ...
    def close(self) -> None: ...


class CsvFile:
    """Comma-separated, a head line, CR LF ends (RFC 4180)."""

    def __init__(self, path: Path) -> None:
        self._file: IO[str] = path.open("w", newline="", encoding="utf-8")
        self._writer = csv.writer(self._file)
        self._begun = False

    def write(self, columns: Columns) -> None:
        if not self._begun:
            self._writer.writerow(columns)
            self._begun = True
        self._writer.writerows(zip(*columns.values(), strict=True))

    def close(self) -> None:
        self._file.close()


class GeoJsonFile:
    """Features with a point each (RFC 7946): longitude, latitude, ellipsoidal height; rows without are left out."""

    def __init__(self, path: Path) -> None:
        self._file: IO[str] = path.open("w", encoding="utf-8")
        self._file.write('{"type": "FeatureCollection", "features": [')
        self._first = True

    def write(self, columns: Columns) -> None:
        names = list(columns)
        for row in zip(*columns.values(), strict=True):
            facts = dict(zip(names, row, strict=True))
            place = [facts.pop("longitude_deg", None), facts.pop("latitude_deg", None)]
            if None in place:
                continue
            height = facts.get("ellipsoidal_height_m")
            place += [] if height is None else [height]
            feature = {"type": "Feature", "geometry": {"type": "Point", "coordinates": place}, "properties": facts}
            self._file.write(("\n" if self._first else ",\n") + json.dumps(feature, allow_nan=False))
            self._first = False

    def close(self) -> None:
        self._file.write("\n]}\n")
        self._file.close()


class ParquetFile:
    """Apache Parquet by pyarrow, an extra of the program's."""

    def __init__(self, path: Path) -> None:
        try:
            import pyarrow
            import pyarrow.parquet
        except ImportError as error:
            raise ConfigurationError(
                "Parquet needs pyarrow: pip install 'gnssmon[parquet]', or export to .csv"
            ) from error
        self._arrow, self._path = pyarrow, path
        self._writer: Any = None

    def write(self, columns: Columns) -> None:
        table = self._arrow.table(
            {name: self._arrow.array(values, self._kind(name)) for name, values in columns.items()}
        )
        if self._writer is None:
            self._writer = self._arrow.parquet.ParquetWriter(self._path, table.schema)
        self._writer.write_table(table)

    def _kind(self, name: str) -> Any:
        if name in ("utc", "satellite", "signal"):
            return self._arrow.string()
        if name == "used":
            return self._arrow.bool_()
        return (
            self._arrow.int64()
            if name in ("axis_ms", "quality", "satellites_used", "station")
            else self._arrow.float64()
        )

    def close(self) -> None:
        if self._writer is None:
            self._arrow.parquet.write_table(self._arrow.table({}), self._path)
        else:
            self._writer.close()


FORMATS: dict[str, type[TableFile]] = {".csv": CsvFile, ".geojson": GeoJsonFile, ".parquet": ParquetFile}
"""By suffix.                                                                          ← a new format's line"""


class Export:
    """A table on its way to a file; complete, or not there at all."""

    def __init__(self, path: Path, *, signals: bool) -> None:
        """Raises ConfigurationError for a suffix that means nothing, OutputError where nothing can be written."""
        suffix = path.suffix.lower()
        if suffix not in FORMATS:
            known = ", ".join(FORMATS)
            raise ConfigurationError(f"'{printable(path.name, 100)}': the suffix tells the format, one of {known}")
        if signals and suffix == ".geojson":
            raise ConfigurationError("signals have no place on a map: export them as .csv or .parquet")
        self._path, self._part = path, path.with_name(f".{path.name}.part")
        self._table = signal_table if signals else epoch_table
        self.rows = 0
        try:
            self._file = FORMATS[suffix](self._part)
        except OSError as error:
            raise OutputError(f"'{printable(str(path), 200)}' cannot be written: {error.strerror}") from error

    def write(self, batch: EpochBatch) -> None:
        """Add a batch's rows. Raises OutputError."""
        columns = self._table(batch)
        count = len(columns["axis_ms"])
        if not count:
            return
        self.rows += count
        try:
            self._file.write(columns)
        except OSError as error:
            raise OutputError(f"'{printable(str(self._path), 200)}' cannot be written: {error.strerror}") from error

    def __enter__(self) -> Self:
        return self

    def __exit__(self, kind: type[BaseException] | None, *_: object) -> None:
        try:
            self._file.close()
            if kind is None:
                os.replace(self._part, self._path)
        except OSError as error:
            raise OutputError(f"'{printable(str(self._path), 200)}' cannot be written: {error.strerror}") from error
        finally:
            self._part.unlink(missing_ok=True)


def batches(batch: EpochBatch, most: int) -> Iterator[EpochBatch]:
    """The batch in portions of at most ``most`` epochs."""
    for begin in range(0, len(batch), most):
        yield batch.part(begin, begin + most)
