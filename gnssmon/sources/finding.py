"""Which ports speak NMEA, and at which rate."""

from __future__ import annotations

DEFAULT_BAUD = 9600
