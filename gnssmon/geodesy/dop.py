"""Dilution of precision from the directions of the satellites and their clocks.

Row of a satellite at azimuth A, elevation e: [-cos e sin A, -cos e cos A, -sin e, 1 in the column of its clock];
Q = (GᵀG)⁻¹ in east, north, up and clocks; HDOP = √(q11 + q22), VDOP = √q33, PDOP = √(q11 + q22 + q33). R. B. Langley,
"Dilution of precision", GPS World, May 1999 (definitions).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]

WORST = 1000.0
"""A DOP beyond this is no geometry at all: the normal equations are singular to the precision of whole degrees."""


@dataclass(frozen=True, slots=True)
class Dilution:
    """Of each epoch, shape (n,); NaN where the geometry is singular."""

    hdop: Floats
    vdop: Floats
    pdop: Floats
    tdop: Floats
    """Of the first clock."""
    edop: Floats
    ndop: Floats


def dilution(
    azimuth_deg: Floats, elevation_deg: Floats, used: npt.NDArray[np.bool_], clock: npt.NDArray[np.intp]
) -> Dilution:
    """DOP of epochs (n) by satellites (m): angles and ``used`` have shape (n, m); ``clock``, shape (m,), numbers the
    receiver clock that each satellite needs, from 0; clocks that no satellite of an epoch uses are left out of it."""
    azimuth, elevation = np.radians(azimuth_deg), np.radians(elevation_deg)
    clocks = int(clock.max(initial=0)) + 1
    unit = np.stack(
        [-np.cos(elevation) * np.sin(azimuth), -np.cos(elevation) * np.cos(azimuth), -np.sin(elevation)], axis=2
    )
    design = np.zeros((*unit.shape[:2], 3 + clocks))
    design[:, :, :3] = unit
    design[:, np.arange(len(clock)), 3 + clock] = 1.0
    design[~used] = 0.0
    design = np.nan_to_num(design)
    normal = np.einsum("nmi,nmj->nij", design, design)
    idle = normal[:, range(3, 3 + clocks), range(3, 3 + clocks)] == 0.0
    for i in range(clocks):
        normal[idle[:, i], 3 + i, 3 + i] = 1.0
    singular = ~(np.linalg.det(normal) > 1e-9)
    normal[singular] = np.eye(3 + clocks)
    q = np.linalg.inv(normal)
    variance = q[:, range(4), range(4)]
    variance[singular] = np.nan
    with np.errstate(invalid="ignore"):
        variance[~((variance >= 0.0) & (variance < WORST**2)).all(axis=1)] = np.nan
        east, north, up, time = variance.T
        return Dilution(
            hdop=np.sqrt(east + north),
            vdop=np.sqrt(up),
            pdop=np.sqrt(east + north + up),
            tdop=np.sqrt(time),
            edop=np.sqrt(east),
            ndop=np.sqrt(north),
        )
