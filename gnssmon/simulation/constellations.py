"""Nominal satellites: the published layout of each system, every satellite a little off its slot, as real ones are.

Sources. GPS: reference orbit slots of the SPS Performance Standard, and seven more satellites as in service. Galileo:
Walker 24/3/1, 29 599.8 km, 56 degrees (OS SDD). GLONASS: Walker 24/3/1, 25 508 km, 64.8 degrees (ICD); frequency
channels by slot as in service (from memory). BeiDou: its MEO satellites, Walker 24/3/1, 27 906 km, 55 degrees (ICD).
QZSS: three quasi-zenith orbits about 139 degrees east, eccentricity 0.075, 41 degrees, perigee 270 degrees, and one
geostationary satellite (interface specification, from memory). SBAS: geostationary satellites spread along the
equator, numbers and longitudes of our own choice.
"""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]

LETTERS = "GRECJS"
"""Systems that can be simulated."""

GPS_SLOTS = {
    272.847: (268.126, 161.786, 11.676, 41.806),
    332.847: (80.956, 173.336, 309.976, 204.376),
    32.847: (111.876, 11.796, 339.666, 241.556),
    92.847: (135.226, 265.446, 35.156, 167.356),
    152.847: (197.046, 302.596, 66.066, 333.686),
    212.847: (238.886, 345.226, 105.206, 135.346),
}
"""Right ascension of the node: arguments of latitude, degrees."""
GPS_AXIS_M, GPS_INCLINATION_DEG, GPS_MOST_ECCENTRICITY = 26_559_700.0, 55.0, 0.012
GPS_EXTRA = 7

GLONASS_CHANNELS = (1, -4, 5, 6, 1, -4, 5, 6, -2, -7, 0, -1, -2, -7, 0, -1, 4, -3, 3, 2, 4, -3, 3, 2)
"""Frequency channel by slot; satellites opposite each other in a plane share one."""

SYNCHRONOUS_AXIS_M = 42_164_200.0
QUASI_ZENITH_NUMBERS, QUASI_ZENITH_LONGITUDE_DEG = (2, 3, 4), 139.0
QUASI_ZENITH_PERIGEE_DEG, QUASI_ZENITH_INCLINATION_DEG, QUASI_ZENITH_ECCENTRICITY = 270.0, 41.0, 0.075
GEOSTATIONARY = (
    ("J", 7, 127.0),
    ("S", 23, 10.0),
    ("S", 25, 55.0),
    ("S", 28, 85.0),
    ("S", 29, 138.0),
    ("S", 37, 165.0),
    ("S", 31, -120.0),
    ("S", 33, -95.0),
    ("S", 36, -20.0),
)
"""System, number, longitude in degrees."""

PLANES = {
    # system: (first number, axis in metres, inclination, largest eccentricity, node of the first plane)
    "R": (1, 25_508_000.0, 64.8, 0.0015, 20.0),
    "E": (1, 29_599_800.0, 56.0, 0.0005, 60.0),
    "C": (19, 27_906_000.0, 55.0, 0.001, 100.0),
}
"""Walker 24/3/1: planes 120 degrees apart, satellites 45, each plane 15 degrees ahead of the one before."""

SPREAD_INCLINATION_DEG, SPREAD_NODE_DEG, SPREAD_LATITUDE_DEG = 0.7, 2.0, 1.0
"""Standard deviations about the slots."""


@dataclass(frozen=True, slots=True)
class Orbits:
    """Elements at ``orbits.EPOCH_S``; arrays of shape (n,), radians and metres. The node counts from the equinox."""

    letter: npt.NDArray[np.str_]
    number: npt.NDArray[np.int64]
    channel: npt.NDArray[np.int64]
    """Frequency channel k of GLONASS; 0 for others."""
    axis_m: Floats
    eccentricity: Floats
    inclination: Floats
    node: Floats
    perigee: Floats
    anomaly: Floats
    """Mean anomaly."""
    synchronous: npt.NDArray[np.bool_]
    """Kept in step with the earth by its operator."""


def constellation(letters: str, rng: np.random.Generator, *, sidereal_deg: float) -> Orbits:
    """The satellites of the systems named, each near its slot.

    ``sidereal_deg`` is the angle of the Greenwich meridian at the epoch: it places satellites that stand over a
    longitude. What is drawn for one system does not depend on which others are asked for.
    """
    rows = [*_gps(rng), *_walker(), *_synchronous(sidereal_deg)]
    count = len(rows)
    values = np.array([row[3:] for row in rows])
    loose = ~values[:, 6].astype(bool)
    eccentricity = np.where(loose, rng.uniform(0.0, 1.0, count), 1.0) * values[:, 1]
    perigee_deg = np.where(loose, rng.uniform(0.0, 360.0, count), values[:, 4])
    inclination_deg = values[:, 2] + loose * rng.normal(0.0, SPREAD_INCLINATION_DEG, count)
    node_deg = values[:, 3] + loose * rng.normal(0.0, SPREAD_NODE_DEG, count)
    latitude_deg = values[:, 5] + loose * rng.normal(0.0, SPREAD_LATITUDE_DEG, count)
    orbits = Orbits(
        letter=np.array([row[0] for row in rows]),
        number=np.array([row[1] for row in rows]),
        channel=np.array([row[2] for row in rows]),
        axis_m=values[:, 0],
        eccentricity=eccentricity,
        inclination=np.radians(inclination_deg),
        node=np.radians(node_deg),
        perigee=np.radians(perigee_deg),
        anomaly=np.radians(latitude_deg - perigee_deg),
        synchronous=~loose,
    )
    chosen = np.isin(orbits.letter, list(letters))
    return Orbits(*(getattr(orbits, field.name)[chosen] for field in fields(Orbits)))


Row = tuple[str, int, int, float, float, float, float, float, float, bool]
"""System, number, channel, axis, (largest) eccentricity, inclination, node, perigee, argument of latitude, in step."""


def _gps(rng: np.random.Generator) -> list[Row]:
    places = [(node, latitude) for node, latitudes in GPS_SLOTS.items() for latitude in latitudes]
    places += [(float(rng.uniform(0, 360)), float(rng.uniform(0, 360))) for _ in range(GPS_EXTRA)]
    return [
        ("G", i + 1, 0, GPS_AXIS_M, GPS_MOST_ECCENTRICITY, GPS_INCLINATION_DEG, node, 0.0, latitude, False)
        for i, (node, latitude) in enumerate(places)
    ]


def _walker() -> list[Row]:
    rows: list[Row] = []
    for letter, (first, axis_m, inclination_deg, eccentricity, node_deg) in PLANES.items():
        for i in range(24):
            plane, slot = divmod(i, 8)
            node, latitude = node_deg + 120.0 * plane, 45.0 * slot + 15.0 * plane
            channel = GLONASS_CHANNELS[i] if letter == "R" else 0
            rows.append((letter, first + i, channel, axis_m, eccentricity, inclination_deg, node, 0.0, latitude, False))
    return rows


def _synchronous(sidereal_deg: float) -> list[Row]:
    rows: list[Row] = []
    for i, number in enumerate(QUASI_ZENITH_NUMBERS):
        node_deg = 120.0 * i
        # One ground track for all: node + argument of latitude = sidereal angle + longitude, on the mean.
        latitude_deg = sidereal_deg + QUASI_ZENITH_LONGITUDE_DEG - node_deg
        rows.append(
            (
                "J", number, 0, SYNCHRONOUS_AXIS_M, QUASI_ZENITH_ECCENTRICITY, QUASI_ZENITH_INCLINATION_DEG, node_deg,
                QUASI_ZENITH_PERIGEE_DEG, latitude_deg, True,
            )
        )  # fmt: skip
    for letter, number, longitude_deg in GEOSTATIONARY:
        rows.append((letter, number, 0, SYNCHRONOUS_AXIS_M, 0.0, 0.0, 0.0, 0.0, sidereal_deg + longitude_deg, True))
    return rows
