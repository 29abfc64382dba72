"""Chunk: bytes, and when they came."""

from __future__ import annotations

import math
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Chunk:
    """A piece of a receiver's stream, cut anywhere."""

    data: bytes
    """The bytes as received; ``b""`` means: nothing came up to this time."""
    received_s: float = math.nan
    """Host time of arrival, seconds since 1970-01-01 UTC; NaN where a log does not tell."""
