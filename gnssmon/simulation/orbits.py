"""Where satellites are: Kepler's laws, the secular effects of the earth's flattening, and the earth's rotation.

Secular rates of node, perigee and mean anomaly: Vallado, Fundamentals of Astrodynamics, ch. 9. Sidereal time: IAU
1982, linear part (Astronomical Almanac, section B), with UTC for UT1: at most 0.9 s or 0.004 degrees off.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from gnssmon.simulation.constellations import Orbits

Floats = npt.NDArray[np.float64]

MU = 3.986004418e14
EARTH_RADIUS_M = 6_378_137.0
J2 = 1.08262668e-3
DAY_S = 86_400.0
UNIX_J2000_DAYS = 10_957.5
"""Days from 1970-01-01T00 to 2000-01-01T12."""
SIDEREAL_RATE = np.radians(360.98564736629) / DAY_S
"""The earth's rotation against the equinox, radians per second."""

EPOCH_S = 1_767_225_600.0
"""2026-01-01T00:00:00Z: when the nominal slots hold. The sky of other days follows from it by the laws of motion."""

KEPLER_STEPS = 12
"""Enough for e = 0.075 to reach 1e-13: each step multiplies the error by e."""


def sidereal_angle(utc_s: Floats | float) -> Floats:
    """Angle of the Greenwich meridian from the equinox, radians: 280.46061837 + 360.98564736629 (JD - J2000)."""
    days = np.asarray(utc_s) / DAY_S - UNIX_J2000_DAYS
    return np.radians(np.mod(280.46061837 + 360.98564736629 * days, 360.0))


def positions(orbits: Orbits, utc_s: Floats) -> Floats:
    """Earth-fixed positions, m, shape (len(utc_s), n, 3); ``utc_s`` counts from 1970."""
    return earth_fixed(orbits, utc_s - EPOCH_S, sidereal_angle(utc_s))


def earth_fixed(orbits: Orbits, elapsed_s: Floats, greenwich: Floats) -> Floats:
    """Earth-fixed positions, m, shape (t, n, 3), so long after the epoch of the elements.

    ``greenwich`` is the angle of the Greenwich meridian from the equinox at each time, radians, shape (t,).
    """
    t = elapsed_s[:, None]
    motion = np.sqrt(MU / orbits.axis_m**3)
    flat = 1.5 * J2 * (EARTH_RADIUS_M / (orbits.axis_m * (1 - orbits.eccentricity**2))) ** 2 * motion
    cosine = np.cos(orbits.inclination)
    root = np.sqrt(1 - orbits.eccentricity**2)
    node_rate = -flat * cosine
    perigee_rate = flat * (2.0 - 2.5 * (1 - cosine**2))
    mean_rate = motion + flat * root * (1 - 1.5 * (1 - cosine**2))
    # An operator holds the perigee of a synchronous orbit, and its period to the earth's rotation.
    perigee_rate = np.where(orbits.synchronous, 0.0, perigee_rate)
    mean_rate = np.where(orbits.synchronous, SIDEREAL_RATE - node_rate, mean_rate)

    mean = orbits.anomaly + mean_rate * t
    eccentric = mean
    for _ in range(KEPLER_STEPS):
        eccentric = mean + orbits.eccentricity * np.sin(eccentric)
    radius = orbits.axis_m * (1 - orbits.eccentricity * np.cos(eccentric))
    true = np.arctan2(root * np.sin(eccentric), np.cos(eccentric) - orbits.eccentricity)
    latitude = orbits.perigee + perigee_rate * t + true
    longitude = orbits.node + node_rate * t - greenwich[:, None]
    x, y = radius * np.cos(latitude), radius * np.sin(latitude)
    return np.stack(
        [
            x * np.cos(longitude) - y * cosine * np.sin(longitude),
            x * np.sin(longitude) + y * cosine * np.cos(longitude),
            y * np.sin(orbits.inclination),
        ],
        axis=2,
    )
