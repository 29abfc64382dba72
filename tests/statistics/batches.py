"""Epoch batches made to order, and cut."""

from __future__ import annotations

import dataclasses
from typing import Any

import numpy as np

from gnssmon.epochs.batch import EpochBatch, SignalRows, UsedRows

_APART = ("signals", "used")


def make_batch(axis_ms: Any, **columns: Any) -> EpochBatch:
    """Counted epochs at these times; columns not given are unknown (quality 1, no signals)."""
    count = len(axis_ms)
    unknown = np.full(count, np.nan)
    values: dict[str, Any] = {
        field.name: unknown for field in dataclasses.fields(EpochBatch) if field.name not in _APART
    }
    values |= {
        "axis_ms": np.asarray(axis_ms, dtype=np.int64),
        "utc_ms": np.full(count, -1, dtype=np.int64),
        "counted": np.ones(count, dtype=bool),
        "size": np.full(count, 80, dtype=np.int64),
        "kinds": np.ones(count, dtype=np.int64),
        "quality": np.ones(count, dtype=np.int8),
        "satellites_used": np.full(count, -1, dtype=np.int16),
        "station": np.full(count, -1, dtype=np.int32),
        "signals": SignalRows(*(np.empty(0, dtype=kind) for kind in ("i4", "i4", "i2", "f4", "f4", "f4"))),
        "used": UsedRows(np.empty(0, dtype=np.int32), np.empty(0, dtype=np.int32)),
    }
    kinds = {"quality": np.int8, "station": np.int32, "satellites_used": np.int16, "counted": bool}
    values |= {name: np.asarray(column, dtype=kinds.get(name, np.float64)) for name, column in columns.items()}
    return EpochBatch(**values)


def part(batch: EpochBatch, start: int, stop: int) -> EpochBatch:
    """Epochs ``start`` to ``stop`` of a batch without signals."""
    columns = {
        field.name: getattr(batch, field.name)[start:stop]
        for field in dataclasses.fields(EpochBatch)
        if field.name not in _APART
    }
    return dataclasses.replace(batch, **columns)
