"""The sky: nominal constellations, propagated with Kepler's laws and the secular effects of the earth's flattening.

Nominal parameters: GPS slots of the SPS Performance Standard (reference orbit slots), Galileo Walker 24/3/1 at 56
degrees (OS SDD), GLONASS Walker 24/3/1 at 64.8 degrees (ICD), BeiDou MEO Walker 24/3/1 at 55 degrees (ICD). Each
satellite is moved a little off its slot, as real ones are. The slots hold at 00:00 UTC of the day on which a run
starts: this is a nominal sky, not an ephemeris. Secular rates: Vallado, Fundamentals of Astrodynamics, ch. 9. Sidereal
time: IAU 1982, linear part (Astronomical Almanac, B).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]

MU = 3.986004418e14
EARTH_RADIUS_M = 6_378_137.0
FLATTENING = 1 / 298.257223563
J2 = 1.08262668e-3
DAY_S = 86_400.0
UNIX_J2000_DAYS = 10_957.5
"""Days from 1970-01-01T00 to 2000-01-01T12."""

GPS_SLOTS = {
    272.847: (268.126, 161.786, 11.676, 41.806),
    332.847: (80.956, 173.336, 309.976, 204.376),
    32.847: (111.876, 11.796, 339.666, 241.556),
    92.847: (135.226, 265.446, 35.156, 167.356),
    152.847: (197.046, 302.596, 66.066, 333.686),
    212.847: (238.886, 345.226, 105.206, 135.346),
}
"""Right ascension of the node: arguments of latitude, degrees."""


@dataclass(frozen=True, slots=True)
class Orbits:
    """Elements at 00:00 UTC of the starting day; arrays of shape (n,), radians and metres."""

    letter: npt.NDArray[np.str_]
    number: npt.NDArray[np.int64]
    axis_m: Floats
    eccentricity: Floats
    inclination: Floats
    node: Floats
    perigee: Floats
    anomaly: Floats


def constellation(letters: str, rng: np.random.Generator) -> Orbits:
    """The satellites of the systems named (``GREC``), each near its slot."""
    rows: list[tuple[str, int, float, float, float, float, float]] = []
    gps = [(node, u) for node, latitudes in GPS_SLOTS.items() for u in latitudes]
    gps += [(float(rng.uniform(0, 360)), float(rng.uniform(0, 360))) for _ in range(7)]
    rows += [("G", i + 1, 26_559_700.0, 55.0, 0.012, node, u) for i, (node, u) in enumerate(gps)]
    for letter, axis_m, inclination, most, raan in (
        ("R", 25_508_000.0, 64.8, 0.0015, 20.0),
        ("E", 29_599_800.0, 56.0, 0.0005, 60.0),
        ("C", 27_906_000.0, 55.0, 0.001, 100.0),
    ):
        first = 19 if letter == "C" else 1
        for i in range(24):
            plane, slot = divmod(i, 8)
            rows.append(
                (letter, first + i, axis_m, inclination, most, raan + 120.0 * plane, 45.0 * slot + 15.0 * plane)
            )
    values = np.array([row[2:] for row in rows])
    count = len(rows)
    eccentricity = rng.uniform(0.0, values[:, 2])
    perigee = rng.uniform(0.0, 360.0, count)
    latitude = values[:, 4] + rng.normal(0.0, 1.0, count)
    orbits = Orbits(
        letter=np.array([row[0] for row in rows]),
        number=np.array([row[1] for row in rows]),
        axis_m=values[:, 0],
        eccentricity=eccentricity,
        inclination=np.radians(values[:, 1] + rng.normal(0.0, 0.7, count)),
        node=np.radians(values[:, 3] + rng.normal(0.0, 2.0, count)),
        perigee=np.radians(perigee),
        anomaly=np.radians(latitude - perigee),
    )
    chosen = np.isin(orbits.letter, list(letters))
    fields = (getattr(orbits, name)[chosen] for name in Orbits.__slots__)
    return Orbits(*fields)


def positions(orbits: Orbits, time_s: Floats, start_utc_s: float) -> Floats:
    """Earth-fixed positions, m, shape (len(time_s), n, 3); ``time_s`` counts from ``start_utc_s`` (since 1970)."""
    midnight = math.floor(start_utc_s / DAY_S) * DAY_S
    t = (time_s + (start_utc_s - midnight))[:, None]
    motion = np.sqrt(MU / orbits.axis_m**3)
    flat = 1.5 * J2 * (EARTH_RADIUS_M / (orbits.axis_m * (1 - orbits.eccentricity**2))) ** 2 * motion
    cosine = np.cos(orbits.inclination)
    node = orbits.node - flat * cosine * t
    perigee = orbits.perigee + flat * (2.0 - 2.5 * (1 - cosine**2)) * t
    root = np.sqrt(1 - orbits.eccentricity**2)
    mean = orbits.anomaly + (motion + flat * root * (1 - 1.5 * (1 - cosine**2))) * t
    eccentric = mean.copy()
    for _ in range(6):  # Kepler's equation; e is below 0.02: converges to 1e-12
        eccentric = mean + orbits.eccentricity * np.sin(eccentric)
    radius = orbits.axis_m * (1 - orbits.eccentricity * np.cos(eccentric))
    true = np.arctan2(root * np.sin(eccentric), np.cos(eccentric) - orbits.eccentricity)
    u = perigee + true
    longitude = node - sidereal_angle(midnight + t)
    x, y = radius * np.cos(u), radius * np.sin(u)
    return np.stack(
        [
            x * np.cos(longitude) - y * np.cos(orbits.inclination) * np.sin(longitude),
            x * np.sin(longitude) + y * np.cos(orbits.inclination) * np.cos(longitude),
            y * np.sin(orbits.inclination),
        ],
        axis=2,
    )


def sidereal_angle(utc_s: Floats) -> Floats:
    """Angle of the Greenwich meridian from the equinox, radians: 280.46061837 + 360.98564736629 (JD - J2000)."""
    days = utc_s / DAY_S - UNIX_J2000_DAYS
    return np.radians(np.mod(280.46061837 + 360.98564736629 * days, 360.0))


def geocentric(latitude_deg: float, longitude_deg: float, height_m: float) -> Floats:
    """Earth-fixed position of a site on WGS 84, m, shape (3,)."""
    latitude, longitude = math.radians(latitude_deg), math.radians(longitude_deg)
    e2 = FLATTENING * (2 - FLATTENING)
    n = EARTH_RADIUS_M / math.sqrt(1 - e2 * math.sin(latitude) ** 2)
    return np.array(
        [
            (n + height_m) * math.cos(latitude) * math.cos(longitude),
            (n + height_m) * math.cos(latitude) * math.sin(longitude),
            (n * (1 - e2) + height_m) * math.sin(latitude),
        ]
    )


def local_axes(latitude_deg: float, longitude_deg: float) -> Floats:
    """Rows: unit vectors east, north, up in the earth-fixed frame, shape (3, 3)."""
    latitude, longitude = math.radians(latitude_deg), math.radians(longitude_deg)
    return np.array(
        [
            [-math.sin(longitude), math.cos(longitude), 0.0],
            [
                -math.sin(latitude) * math.cos(longitude),
                -math.sin(latitude) * math.sin(longitude),
                math.cos(latitude),
            ],
            [math.cos(latitude) * math.cos(longitude), math.cos(latitude) * math.sin(longitude), math.sin(latitude)],
        ]
    )


def directions(satellites_m: Floats, site_m: Floats, axes: Floats) -> tuple[Floats, Floats]:
    """Azimuth and elevation, degrees, shape as ``satellites_m`` without its last axis."""
    local = (satellites_m - site_m) @ axes.T
    azimuth = np.degrees(np.arctan2(local[..., 0], local[..., 1])) % 360.0
    elevation = np.degrees(np.arctan2(local[..., 2], np.hypot(local[..., 0], local[..., 1])))
    return azimuth, elevation


def dops(azimuth_deg: Floats, elevation_deg: Floats) -> tuple[float, float, float]:
    """PDOP, HDOP, VDOP of satellites with one receiver clock; infinite where they do not suffice."""
    azimuth, elevation = np.radians(azimuth_deg), np.radians(elevation_deg)
    design = np.column_stack(
        [
            np.cos(elevation) * np.sin(azimuth),
            np.cos(elevation) * np.cos(azimuth),
            np.sin(elevation),
            np.ones(len(azimuth)),
        ]
    )
    if len(azimuth) < 4 or np.linalg.matrix_rank(design) < 4:
        return math.inf, math.inf, math.inf
    q = np.diag(np.linalg.inv(design.T @ design))
    return math.sqrt(q[:3].sum()), math.sqrt(q[0] + q[1]), math.sqrt(q[2])
