"""A sky made to order: satellites on circular orbits, as epoch batches with signals.

Independent of the simulator and of the code under test. Orbits: Walker constellations with the radii and inclinations
of the interface documents (GPS 26 560 km at 55 deg, GLONASS 25 508 km at 64.8 deg, Galileo 29 600 km at 56 deg, BeiDou
27 906 km at 55 deg), Earth turning at 7.2921151467e-5 rad/s, all angles rounded to whole degrees as NMEA carries them.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Iterator
from typing import Any

import numpy as np

from gnssmon.epochs.batch import EpochBatch, SignalRows, UsedRows
from tests.statistics.batches import make_batch

MU, EARTH_RATE, EARTH_M = 3.986004418e14, 7.2921151467e-5, 6_371_000.0
# System index in "GRECJIS?", orbit radius m, inclination deg, satellites, planes, rows of SIGNALS.
SYSTEMS = (
    (0, 26_559_700.0, 55.0, 30, 6, (0, 4, 6)),
    (1, 25_508_000.0, 64.8, 24, 3, (8, 10)),
    (2, 29_599_800.0, 56.0, 24, 3, (18, 12, 13)),
    (3, 27_906_000.0, 55.0, 24, 3, (19, 21, 23)),
)
Hidden = Callable[[Any, Any], Any]


@dataclasses.dataclass(frozen=True)
class Sky:
    """Directions of every satellite at every epoch, shape (n, satellites), degrees."""

    code: Any
    azimuth_deg: Any
    elevation_deg: Any
    signals: tuple[tuple[int, ...], ...]


def directions(time_s: Any, *, latitude_deg: float = 48.0, systems: int = 4) -> Sky:
    """Where the satellites stand, seen from longitude 11 deg east."""
    lat, lon = np.radians(latitude_deg), np.radians(11.0)
    up = np.array([np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)])
    east = np.array([-np.sin(lon), np.cos(lon), 0.0])
    north = np.cross(up, east)
    code, azimuth, elevation, signals = [], [], [], []
    for index, radius, inclination, count, planes, rows in SYSTEMS[:systems]:
        i = np.radians(inclination)
        rate = np.sqrt(MU / radius**3)
        for number in range(count):
            plane, place = divmod(number, count // planes)
            node = 2 * np.pi * plane / planes + 0.3 * index - EARTH_RATE * time_s
            u = 2 * np.pi * (place / (count // planes) + plane / count) + 0.7 * index + rate * time_s
            x = np.cos(u) * np.cos(node) - np.sin(u) * np.cos(i) * np.sin(node)
            y = np.cos(u) * np.sin(node) + np.sin(u) * np.cos(i) * np.cos(node)
            z = np.sin(u) * np.sin(i)
            ray = radius * np.stack([x, y, z], axis=-1) - EARTH_M * up
            ray /= np.linalg.norm(ray, axis=-1, keepdims=True)
            code.append(index * 1024 + number + 1)
            azimuth.append(np.degrees(np.arctan2(ray @ east, ray @ north)) % 360.0)
            elevation.append(np.degrees(np.arcsin(ray @ up)))
            signals.append(rows)
    return Sky(np.array(code), np.stack(azimuth, axis=1), np.stack(elevation, axis=1), tuple(signals))


def nothing_hidden(azimuth_deg: Any, elevation_deg: Any) -> Any:
    return np.zeros(np.shape(azimuth_deg), dtype=bool)


def level(elevation_deg: Any) -> Any:
    """Noiseless C/N0 against elevation, dB-Hz."""
    return 30.0 + 20.0 * np.sin(np.radians(np.clip(elevation_deg, 0.0, 90.0)))


def sky_batch(
    axis_ms: Any,
    *,
    latitude_deg: float = 48.0,
    systems: int = 4,
    signals: int = 3,
    hidden: Hidden = nothing_hidden,
    list_hidden: bool = True,
    noise_db: float = 1.0,
    seed: int = 1,
    lowest_deg: float = 2.0,
    offsets_db: dict[int, float] | None = None,
    **columns: Any,
) -> EpochBatch:
    """Epochs at these times with the satellites in view; where ``hidden`` says so a satellite has no level (or, with
    ``list_hidden`` off, is not listed). ``offsets_db``: per satellite code, added to its level."""
    axis_ms = np.asarray(axis_ms, dtype=np.int64)
    rng = np.random.default_rng(seed)
    sky = directions(axis_ms / 1000.0, latitude_deg=latitude_deg, systems=systems)
    azimuth, elevation = np.rint(sky.azimuth_deg) % 360.0, np.rint(sky.elevation_deg)
    in_view = elevation >= lowest_deg
    blocked = hidden(azimuth, elevation)
    own = np.zeros(len(sky.code))
    for code, offset in (offsets_db or {}).items():
        own[sky.code == code] = offset
    parts = []
    most = max(len(rows) for rows in sky.signals)
    for s in range(min(signals, most)):
        has = np.array([len(rows) > s for rows in sky.signals])
        row = np.array([rows[s] if len(rows) > s else -1 for rows in sky.signals])
        shown = in_view & has if list_hidden else in_view & has & ~blocked
        epoch, column = np.nonzero(shown)
        cn0 = np.rint(level(elevation[epoch, column]) - 2.0 * s + own[column] + rng.normal(0, noise_db, len(epoch)))
        cn0[blocked[epoch, column]] = np.nan
        parts.append((epoch, sky.code[column], row[column], elevation[epoch, column], azimuth[epoch, column], cn0))
    joined = [np.concatenate(column) for column in zip(*parts, strict=True)]
    order = np.argsort(joined[0], kind="stable")
    kinds = ("i4", "i4", "i2", "f4", "f4", "f4")
    rows = SignalRows(*(column[order].astype(kind) for column, kind in zip(joined, kinds, strict=True)))
    used_epoch, used_column = np.nonzero(in_view & ~blocked & (elevation >= 5))
    used = UsedRows(used_epoch.astype(np.int32), sky.code[used_column].astype(np.int32))
    count = np.bincount(used_epoch, minlength=len(axis_ms))
    given = {
        "satellites_used": np.minimum(count, 99),
        "latitude_deg": np.full(len(axis_ms), latitude_deg),
        "longitude_deg": np.full(len(axis_ms), 11.0),
        "hdop": np.full(len(axis_ms), 0.7),
        "pdop": np.full(len(axis_ms), 1.3),
    } | columns
    return dataclasses.replace(make_batch(axis_ms, **given), signals=rows, used=used)


def blocks(
    hours: float, *, step_ms: int = 1000, epochs: int = 2000, begin_ms: int = 0, **kind: Any
) -> Iterator[EpochBatch]:
    """A long stream, block by block."""
    axis_ms = begin_ms + np.arange(0, int(hours * 3_600_000), step_ms)
    for first in range(0, len(axis_ms), epochs):
        yield sky_batch(axis_ms[first : first + epochs], seed=first, **kind)
