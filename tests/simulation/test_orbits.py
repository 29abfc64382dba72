"""The sky of the simulator against the law of motion in other hands: SGP4, skyfield, published check values."""

from __future__ import annotations

import math

import numpy as np
import pytest
from sgp4.api import WGS84, Satrec
from skyfield.api import EarthSatellite, load, wgs84

from gnssmon.simulation import orbits as motion
from gnssmon.simulation.constellations import GPS_SLOTS, Orbits, constellation
from gnssmon.simulation.viewing import directions, dops, geocentric, local_axes, metres_per_degree

DAY_S = 86_400.0
SIDEREAL_DEG = math.degrees(float(motion.sidereal_angle(motion.EPOCH_S)))


def sky(letters: str, seed: int = 7) -> Orbits:
    return constellation(letters, np.random.default_rng(seed), sidereal_deg=SIDEREAL_DEG)


def one(**elements: float) -> Orbits:
    """A single satellite."""
    whole = {"letter": np.array(["E"]), "number": np.array([1]), "channel": np.array([0])}
    return Orbits(**whole, synchronous=np.array([False]), **{key: np.array([value]) for key, value in elements.items()})


def separation_deg(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    cosine = (a * b).sum(axis=-1) / np.linalg.norm(a, axis=-1) / np.linalg.norm(b, axis=-1)
    return np.degrees(np.arccos(np.clip(cosine, -1.0, 1.0)))


def test_check_values_of_the_reference_sheet():
    """A circular Galileo orbit gives the printed positions and angles (methods sheet, section 18: own computation)."""
    orbits = one(
        axis_m=29_599_800.0,
        eccentricity=0.0,
        inclination=math.radians(56),
        node=math.radians(10),
        perigee=0.0,
        anomaly=math.radians(30),
    )
    t = np.array([0.0, 3600.0, 7200.0])
    site_m = geocentric(48.0, 11.0, 0.0)

    position = motion.earth_fixed(orbits, t, 7.2921151467e-5 * t)
    azimuth, elevation = directions(position[:, 0], site_m, local_axes(48.0, 11.0))

    assert position[0, 0] == pytest.approx([23807625.8, 12601596.5, 12269673.2], abs=0.1)
    assert site_m == pytest.approx([4197160.825, 815845.419, 4716876.330], abs=1e-3)
    assert azimuth == pytest.approx([144.37497, 97.97718, 58.75411], abs=2e-5)
    assert elevation == pytest.approx([56.10073, 68.66155, 55.60867], abs=2e-5)


@pytest.mark.parametrize("letters", ["G", "R", "E", "C"])
def test_a_day_of_orbits_against_sgp4(letters):
    """Within a day a satellite stays within 0.1 degrees of where SGP4 takes it from the same mean elements.

    SGP4 also knows the moon, the sun and higher terms of the earth's field: that is the difference that remains.
    """
    orbits = sky(letters)
    chosen = range(0, len(orbits.number), 7)
    utc_s = motion.EPOCH_S + np.arange(0.0, DAY_S + 1, 3600.0)
    ours = motion.positions(orbits, utc_s)
    timescale = load.timescale(builtin=True)
    times = timescale.utc(2026, 1, 1, 0, 0, utc_s - motion.EPOCH_S)
    from skyfield.framelib import itrs

    for i in chosen:
        e, inclination = orbits.eccentricity[i], orbits.inclination[i]
        n = math.sqrt(motion.MU / orbits.axis_m[i] ** 3)
        flat = 1.5 * motion.J2 * (motion.EARTH_RADIUS_M / (orbits.axis_m[i] * (1 - e**2))) ** 2 * n
        kozai = n + flat * math.sqrt(1 - e**2) * (1 - 1.5 * math.sin(inclination) ** 2)
        record = Satrec()
        days = motion.EPOCH_S / DAY_S + 2440587.5 - 2433281.5
        turn = 2 * math.pi
        record.sgp4init(
            WGS84, "i", 1, days, 0.0, 0.0, 0.0, e, orbits.perigee[i] % turn, inclination, orbits.anomaly[i] % turn,
            kozai * 60.0, orbits.node[i] % turn,
        )  # fmt: skip
        theirs = EarthSatellite.from_satrec(record, timescale).at(times).frame_xyz(itrs).m.T

        assert separation_deg(ours[:, i], theirs).max() < 0.1


@pytest.mark.parametrize(
    ("latitude", "longitude", "height"), [(-33.4, 148.25, 331.0), (60.2, 26.7, 40.0), (0.0, -75.0, 0.0), (78.0, 15, 10)]
)
def test_azimuth_and_elevation_against_skyfield(latitude, longitude, height):
    """Directions from any site agree with skyfield's to 0.001 degrees."""
    from skyfield.framelib import itrs
    from skyfield.positionlib import Geocentric, build_position
    from skyfield.units import Distance

    orbits = sky("GREC")
    utc_s = np.array([motion.EPOCH_S + 12_345.0])
    position = motion.positions(orbits, utc_s)[0]
    azimuth, elevation = directions(position, geocentric(latitude, longitude, height), local_axes(latitude, longitude))
    timescale = load.timescale(builtin=True)
    time = timescale.utc(2026, 1, 1, 0, 0, 12_345.0)
    site = wgs84.latlon(latitude, longitude, height)
    rotation = itrs.rotation_at(time).T

    for i in range(0, len(orbits.number), 5):
        satellite = build_position(Distance(m=rotation @ position[i]).au, t=time, center=399)
        assert isinstance(satellite, Geocentric)
        altitude, bearing, _ = (satellite - site.at(time)).altaz()
        assert elevation[i] == pytest.approx(altitude.degrees, abs=1e-3)
        assert math.cos(math.radians(elevation[i])) * (
            (azimuth[i] - bearing.degrees + 180) % 360 - 180
        ) == pytest.approx(0.0, abs=1e-3)


def test_sidereal_angle_of_an_almanac_example():
    """Greenwich mean sidereal time on 1987-04-10 at 0h UT is 13h 10m 46.3668s (Meeus, example 12.a)."""
    angle = math.degrees(float(motion.sidereal_angle(545_011_200.0)))

    assert angle / 15.0 == pytest.approx(13 + 10 / 60 + 46.3668 / 3600, abs=1e-6)


def test_the_sky_repeats_after_the_published_times():
    """GPS in 86 155 s, Galileo in ten days less 2440 s, and so on (methods sheet, section 1; Agnew & Larson 2007)."""
    for letter, repeat_s, mismatch_deg in (
        ("G", 86_155.0, 1.0), ("E", 861_560.0, 1.5), ("R", 689_250.0, 1.5), ("C", 603_100.0, 1.5)
    ):  # fmt: skip
        orbits = sky(letter)
        both = motion.positions(orbits, motion.EPOCH_S + np.array([1000.0, 1000.0 + repeat_s]))

        assert np.median(separation_deg(both[0], both[1])) < mismatch_deg


def test_layout_of_the_constellations():
    """Numbers of satellites, planes, and semi-axes are the published ones."""
    orbits = sky("GRECJS")
    counts = {letter: int((orbits.letter == letter).sum()) for letter in "GRECJS"}

    assert counts == {"G": 31, "R": 24, "E": 24, "C": 24, "J": 4, "S": 8}
    assert len(GPS_SLOTS) == 6
    assert {len(slots) for slots in GPS_SLOTS.values()} == {4}
    assert orbits.eccentricity.max() <= 0.075
    # Periods: half a sidereal day; 11 h 15 m 44 s; 14 h 4 m 45 s; 12 h 53 m 24 s (interface documents).
    for letter, period_s in (("G", 43_082.0), ("R", 40_544.0), ("E", 50_685.0), ("C", 46_404.0)):
        axis_m = orbits.axis_m[orbits.letter == letter][0]
        assert 2 * math.pi * math.sqrt(axis_m**3 / motion.MU) == pytest.approx(period_s, rel=1e-3)


def test_what_is_drawn_for_one_system_does_not_depend_on_the_others():
    """Galileo alone is the Galileo of all systems."""
    alone, among = sky("E"), sky("GRECJS")

    assert alone.anomaly.tolist() == among.anomaly[among.letter == "E"].tolist()


def test_geostationary_satellites_stand_still():
    """Over a month none moves by more than a hundredth of a degree, and each stands over its longitude."""
    orbits = sky("S")
    position = motion.positions(orbits, motion.EPOCH_S + np.array([0.0, 30 * DAY_S]))

    assert separation_deg(position[0], position[1]).max() < 0.01
    longitude = np.degrees(np.arctan2(position[0, :, 1], position[0, :, 0]))
    assert sorted(np.round(longitude).astype(int).tolist()) == [-120, -95, -20, 10, 55, 85, 138, 165]


def test_quasi_zenith_satellites_follow_one_another_over_one_longitude():
    """A figure of eight about 139 degrees east: in turns one of three stands high over 36 degrees north all day."""
    orbits = sky("J")
    utc_s = motion.EPOCH_S + np.arange(0.0, DAY_S, 600.0)
    position = motion.positions(orbits, utc_s)[:, :3]
    _, elevation = directions(position, geocentric(36.0, 139.0, 0.0), local_axes(36.0, 139.0))

    assert elevation.max(axis=1).min() > 60.0
    longitude = np.degrees(np.arctan2(position[..., 1], position[..., 0]))
    assert longitude.min() > 110.0
    assert longitude.max() < 170.0


@pytest.mark.parametrize(
    ("latitude", "pole_azimuth", "hole_deg"), [(-33.4, 180.0, 26.3), (60.2, 0.0, 33.3), (33.4, 0.0, 26.3)]
)
def test_hole_about_the_pole(latitude, pole_azimuth, hole_deg):
    """In a day no satellite comes near the celestial pole; towards the equator every part of the sky is crossed.

    A satellite of inclination i never stands over a latitude beyond i. The radius of the hole is where a ray from the
    site, so far from the pole towards the equator, meets the sphere of Galileo's orbit at latitude 57.5 degrees (56
    and two standard deviations of the spread).
    """
    orbits = sky("GEC")
    utc_s = motion.EPOCH_S + np.arange(0.0, DAY_S, 120.0)
    position = motion.positions(orbits, utc_s)
    axes = local_axes(latitude, 148.25)
    azimuth, elevation = directions(position, geocentric(latitude, 148.25, 0.0), axes)
    azimuth, elevation = azimuth[elevation > 5.0], elevation[elevation > 5.0]

    # The pole itself stands at the elevation of the latitude.
    pole = np.array([0.0, 0.0, math.copysign(1.0, latitude)]) @ axes.T
    ray = np.stack(
        [
            np.cos(np.radians(elevation)) * np.sin(np.radians(azimuth)),
            np.cos(np.radians(elevation)) * np.cos(np.radians(azimuth)),
            np.sin(np.radians(elevation)),
        ],
        axis=1,
    )
    nearest_deg = separation_deg(ray, pole).min()
    opposite = np.abs((azimuth - pole_azimuth + 180) % 360 - 180) > 150

    assert nearest_deg == pytest.approx(hole_deg, abs=2.5)
    assert elevation[opposite].min() < 6.0
    for band in range(10, 80, 10):
        assert (opposite & (elevation >= band) & (elevation < band + 10)).any()


def test_dilution_of_precision_of_the_reference_sheet():
    """One satellite overhead, three at 19.47 degrees 120 degrees apart: P 2.12132, H 1.22474, V 1.73205 (sheet, 18)."""
    edop, ndop, vdop = dops(np.array([0.0, 0, 120, 240]), np.array([90.0, 19.4712206, 19.4712206, 19.4712206]))

    assert math.hypot(edop, ndop) == pytest.approx(1.22474, abs=1e-5)
    assert vdop == pytest.approx(1.73205, abs=1e-5)
    assert math.hypot(edop, ndop, vdop) == pytest.approx(2.12132, abs=1e-5)
    assert dops(np.zeros(3), np.full(3, 45.0)) == (math.inf, math.inf, math.inf)


def test_metres_per_degree():
    """One minute of latitude at 45 degrees is 1852.2 m, at 50 degrees 1853.8 m, of longitude there 1194.9 m (NMEA
    sheet, section 8, computed with pyproj)."""
    assert metres_per_degree(45.0, 0.0)[0] / 60 == pytest.approx(1852.2, abs=0.05)
    assert metres_per_degree(50.0, 0.0)[0] / 60 == pytest.approx(1853.8, abs=0.05)
    assert metres_per_degree(50.0, 0.0)[1] / 60 == pytest.approx(1194.9, abs=0.05)
