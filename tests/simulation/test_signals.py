"""Levels: what is put in comes out, satellite by satellite and band by band."""

from __future__ import annotations

import math

import numpy as np
import pytest

from gnssmon.configuration import load
from gnssmon.simulation.constellations import GLONASS_CHANNELS, constellation
from gnssmon.simulation.scenario import Scenario
from gnssmon.simulation.signals import Levels, channels, overhead_dbhz, reflections_db, sector

SITE = "title = 't'\n[site]\nlatitude_deg = 10.0\nlongitude_deg = 20.0\nheight_m = 5.0\n"
ALL = [f"{x}" for x in ("G1", "G5", "R1", "R2", "E1", "E5a", "C1", "C2a")]


def scenario(rest: str = "") -> Scenario:
    return load(Scenario, SITE + rest, name="test")


def levels(
    scene: Scenario, *, seconds: int = 600, elevation_deg: float | None = None, azimuth_deg: float = 90.0, seed: int = 3
) -> tuple[Levels, np.ndarray, np.ndarray]:
    """Levels (t, satellites, channels) of satellites that stand still, spread over elevation unless one is given."""
    orbits = constellation("GREC", np.random.default_rng(seed), sidereal_deg=0.0)
    made = Levels(scene, orbits, seed=seed, rng=np.random.default_rng(seed + 1))
    count = len(orbits.number)
    elevation = np.linspace(5.0, 90.0, count) if elevation_deg is None else np.full(count, elevation_deg)
    shape = np.ones((seconds, count))
    out = made.take(np.arange(seconds, dtype=float), shape * azimuth_deg, shape * elevation)
    return made, elevation, out


def test_carriers_and_fringe_periods_per_band():
    """2 m above a reflector the L1 fringe is 0.04757 in sin e: wavelength / (2 h) (diagnosis sheet, section 6, 4)."""
    scene = scenario("[antenna]\nreflector_height_m = 2.0\nreflector_strength = 0.4\n")
    sine = np.linspace(0.1, 0.9, 20_001)
    for label, carrier_mhz in (("G1", 1575.42), ("G5", 1176.45), ("E5a", 1176.45), ("C1", 1561.098), ("R1", 1602.0)):
        channel = channels((label,))[0]
        wavelength_m = channel.wavelength_m(np.zeros(1, dtype=np.int64))
        change_db = reflections_db(scene, wavelength_m, np.zeros((20_001, 1)), np.degrees(np.arcsin(sine))[:, None])
        rising = np.flatnonzero((change_db[:-1, 0] < 0) & (change_db[1:, 0] >= 0))

        period = np.diff(sine[rising]).mean()

        assert period == pytest.approx(299.792458 / carrier_mhz / (2 * 2.0), rel=5e-3)
    assert pytest.approx(0.04757, abs=5e-6) == 299.792458 / 1575.42 / 4


def test_strength_of_a_reflection():
    """A reflected wave of 0.2 of the direct one swings the level by 3.52 dB (methods sheet, section 18)."""
    scene = scenario("[antenna]\nreflector_height_m = 3.0\nreflector_strength = 0.2\n")
    # 0.2 holds at 5 degrees, and within half a fringe about it.
    sine = np.linspace(0.087 - 0.02, 0.087 + 0.02, 4001)
    change_db = reflections_db(scene, np.array([0.1902937]), np.zeros((4001, 1)), np.degrees(np.arcsin(sine))[:, None])

    assert np.ptp(change_db) == pytest.approx(3.52, abs=0.1)


def test_glonass_has_a_carrier_per_satellite():
    """Channels -7 to +6, 1602 + k 9/16 MHz: 1598.0625 to 1605.375 MHz (NMEA sheet, section 4)."""
    carrier_mhz = 299.792458 / channels(("R1",))[0].wavelength_m(np.array([-7, 6]))

    assert carrier_mhz == pytest.approx([1598.0625, 1605.375])
    assert len(GLONASS_CHANNELS) == 24
    assert set(GLONASS_CHANNELS) <= set(range(-7, 7))


def test_level_overhead_is_that_of_the_link_budget():
    """Over many satellites overhead the mean on the first band is the budget's, to the spread's uncertainty."""
    scene = scenario()
    made, _, out = levels(scene, elevation_deg=90.0)
    first = next(i for i, c in enumerate(made.channels) if c.label == "G1")
    per_satellite = out[:, :, first].mean(axis=0)
    per_satellite = per_satellite[np.isfinite(per_satellite)]

    # 31 satellites with a spread of 1 dB.
    assert per_satellite.mean() == pytest.approx(overhead_dbhz(scene), abs=4 / math.sqrt(31))
    assert per_satellite.std() == pytest.approx(1.0, abs=0.4)


def test_gain_falls_towards_the_horizon():
    """Near the horizon levels are lower than high up by about the roll-off (common practice, no source)."""
    for rolloff_db in (0.0, 11.0):
        scene = scenario(f"[antenna]\nrolloff_db = {rolloff_db}\n")
        low, high = (np.nanmean(levels(scene, elevation_deg=e)[2]) for e in (5.0, 90.0))

        # (1 - sin 5)^1.3 = 0.888 of the roll-off; transmitters send alike to 5 and 90 degrees.
        assert high - low == pytest.approx(0.888 * rolloff_db, abs=0.3)


def test_tilt_turns_the_pattern():
    """An antenna that leans by 20 degrees gains on that side what it loses on the other."""
    scene = scenario("[antenna]\ntilt_deg = 20.0\ntilt_azimuth_deg = 90.0\n")
    east, west, north = (np.nanmean(levels(scene, elevation_deg=20.0, azimuth_deg=a)[2]) for a in (90.0, 270.0, 0.0))

    # cos theta = sin(20 +- 20) = 0.643 and 0: -11 (1 - cos theta)^1.3.
    assert east - west == pytest.approx(11.0 * (1 - (1 - math.sin(math.radians(40))) ** 1.3), abs=0.3)
    assert west < north < east


def test_interference_falls_on_its_bands_alone():
    """A jammer on G1 and E1 takes its depth from them, from its start to its end, and nothing from the others."""
    event = "[[event]]\nkind = 'interference'\nat = '100s'\nfor = '50s'\ndepth_db = 12.0\nbands = ['G1', 'E1']\n"
    made, _, jammed = levels(scenario(event), elevation_deg=60.0)
    _, _, clear = levels(scenario(), elevation_deg=60.0)
    fall = np.nanmean(clear - jammed, axis=1)

    for i, channel in enumerate(made.channels):
        expected = 12.0 if channel.label in ("G1", "E1") else 0.0
        assert fall[100:150, i] == pytest.approx(expected, abs=1.5)
        assert fall[:100, i] == pytest.approx(0.0, abs=1e-9)
        assert fall[150:, i] == pytest.approx(0.0, abs=1e-9)


def test_shapes_of_an_event():
    """Step, ramp, passing and flicker: within 0 and 1, nothing outside their time, and the mean of each shape."""
    time_s = np.arange(0.0, 4000.0)
    for shape, mean in (("step", 1.0), ("ramp", 0.5), ("passing", 0.18 * math.sqrt(2 * math.pi)), ("flicker", 0.375)):
        event = f"[[event]]\nkind = 'cable_loss'\nat = '500s'\nfor = '3000s'\nshape = '{shape}'\n"
        strength = scenario(event).event[0].strength(time_s, (1, 0))

        assert strength.min() >= 0.0
        assert strength.max() <= 1.0
        assert not strength[:500].any()
        assert not strength[3500:].any()
        assert strength[500:3500].mean() == pytest.approx(mean, abs=0.05)


def test_flicker_is_a_function_of_time_and_seed():
    """Asked in pieces or at once, the answer is the same; another seed gives another."""
    event = scenario("[[event]]\nkind = 'cable_loss'\nat = '0s'\nshape = 'flicker'\n").event[0]
    time_s = np.arange(0.0, 400.0, 0.5)
    whole = event.strength(time_s, (1, 0))

    assert np.concatenate([event.strength(part, (1, 0)) for part in np.split(time_s, 8)]).tolist() == whole.tolist()
    assert event.strength(time_s, (2, 0)).tolist() != whole.tolist()


def test_repeated_event():
    """Every 10 minutes for one: it holds in six minutes of an hour, and says when."""
    event = scenario("[[event]]\nkind = 'silence'\nat = '2m'\nfor = '1m'\nevery = '10m'\n").event[0]

    assert event.strength(np.arange(3600.0), (1, 0)).sum() == 360
    assert event.occurrences(3600.0) == [(120.0 + 600 * i, 180.0 + 600 * i) for i in range(6)]


def test_repeater_makes_levels_equal():
    """Ten satellites between 8 and 85 degrees have nearly one level (diagnosis sheet, section 1, 19)."""
    scene = scenario("[[event]]\nkind = 'repeater'\nat = '0s'\n")
    _, elevation, out = levels(scene)
    first = out[:, :, 0].mean(axis=0)
    good = np.isfinite(first)

    slope = np.polyfit(np.sin(np.radians(elevation[good])), first[good], 1)[0]

    assert first[good].std() < 1.2
    assert abs(slope) < 2.0


def test_solid_and_leafy_obstacles():
    """A wall takes what it is said to take; leaves take less, and waver."""
    where = "azimuth_from_deg = 350.0\nazimuth_to_deg = 10.0\nelevation_deg = 30.0\n"
    clear = levels(scenario(), elevation_deg=20.0, azimuth_deg=0.0)[2]
    for loss_db, wavers in ((40.0, False), (6.0, True)):
        scene = scenario(f"[[obstacle]]\n{where}loss_db = {loss_db}\n")
        fall = np.nanmean(clear - levels(scene, elevation_deg=20.0, azimuth_deg=0.0)[2], axis=2)
        beside = levels(scene, elevation_deg=20.0, azimuth_deg=20.0)[2]
        above = levels(scene, elevation_deg=31.0, azimuth_deg=0.0)[2]

        # A weaker level is noisier as well: single seconds differ; half minutes tell leaves from noise.
        half_minutes = fall.reshape(20, 30, -1).mean(axis=1)
        assert fall.mean() == pytest.approx(loss_db, abs=0.8)
        assert (half_minutes.std() > 1.2) == wavers
        assert np.nanmean(beside) > np.nanmean(clear) - 1.0
        assert np.nanmean(above) > np.nanmean(clear)


def test_sector_through_north():
    """From 350 to 10 degrees holds 0 and not 180; a full turn holds all."""
    assert sector(np.array([0.0, 355.0, 9.9, 10.0, 180.0, 349.0]), 350.0, 10.0).tolist() == [True] * 3 + [False] * 3
    assert sector(np.array([0.0, 123.0]), 0.0, 360.0).all()


def test_other_systems_have_no_such_signal():
    """A GLONASS satellite has no G1; below the horizon nothing has a level."""
    made, _, out = levels(scenario())
    assert [c.label for c in made.channels] == ALL
    assert np.isfinite(out[0]).sum(axis=1).tolist() == [2] * out.shape[1]
    assert not np.isfinite(levels(scenario(), elevation_deg=-1.0)[2]).any()
