"""C/N0 of every satellite and signal: antenna, chain, obstacles, reflectors, noise, and what happens to them.

Level = level overhead by the link budget + satellite's own power + power over elevation + antenna gain + slow and
common noise, plus the interference of reflected waves, minus losses. A reflection travels further by 2 h sin e (level
ground, h below the antenna) or 2 d cos e cos(a - wall) (wall at distance d) and meets the direct wave with the phase
of that path and half a turn: the level changes by 20 log10 |1 + alpha exp(i phase)|, at each carrier's own wavelength.
Powers over elevation, antenna pattern and noise sizes are start values (common practice, no source).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.constellations.systems import SIGNALS
from gnssmon.simulation.constellations import Orbits
from gnssmon.simulation.happenings import Event
from gnssmon.simulation.link_budget import Stage, cn0_dbhz, loss
from gnssmon.simulation.noise import GaussMarkov
from gnssmon.simulation.scenario import Scenario

Floats = npt.NDArray[np.float64]

LIGHT_MPS = 299_792_458.0
POWER_DBW = -157.0
"""Of a first-band signal at an isotropic antenna, high or very low in the sky: some dB above the systems' minimum."""
SKY_K = 100.0
"""Noise temperature of an antenna under open sky."""
RECEIVER_LOSS_DB = 1.0
SATELLITE_SPREAD_DB = 1.0
SLOW_S, COMMON_S, LEAVES_S = 120.0, 3600.0, 40.0
COMMON_DB = 0.15
"""Drift of the amplifiers with temperature."""
GAIN_POWER = 1.3
BAND_OFFSET_DB = {"1": 0.0, "1C": 0.0, "2": -2.0, "5": 1.0, "5a": 1.5, "5b": 1.0, "2a": 1.0, "2b": 0.5, "3": 0.5}
"""Of a signal's power against the first band; 0 for others."""
SBAS_OFFSET_DB = -4.0
REPEATER_DBHZ, REPEATER_SPREAD_DB = 46.0, 0.7
"""A repeater gives all satellites nearly the same level."""
OPAQUE_DB = 20.0
"""An obstacle with at least this loss is solid; leaves waver."""
WALL_HALF_WIDTH_DEG, WALL_HIGHEST_DEG = 50.0, 50.0
"""A wall mirrors satellites on the antenna's side of it, so far beside its normal and so high."""


@dataclass(frozen=True, slots=True)
class Channel:
    """One signal label as simulated."""

    label: str
    letter: str
    nmea_id: str
    carrier_mhz: float
    spacing_mhz: float
    offset_db: float

    def wavelength_m(self, channel: npt.NDArray[np.int64]) -> Floats:
        """By satellite, from its frequency channel k."""
        return np.asarray(LIGHT_MPS / ((self.carrier_mhz + self.spacing_mhz * channel) * 1e6))


def channels(labels: tuple[str, ...]) -> tuple[Channel, ...]:
    """The signals by label, in the order given; of several with one label the first of the table."""
    rows = []
    for label in labels:
        signal = next(s for s in SIGNALS if s.label == label)
        offset_db = BAND_OFFSET_DB.get(signal.band, 0.0) + (SBAS_OFFSET_DB if signal.letter == "S" else 0.0)
        rows.append(Channel(label, signal.letter, signal.nmea_id, signal.carrier_mhz, signal.spacing_mhz, offset_db))
    return tuple(rows)


def overhead_dbhz(scenario: Scenario) -> float:
    """C/N0 of a first-band satellite of usual power overhead, without reflections, by the link budget."""
    antenna = scenario.antenna
    chain = (
        loss(antenna.loss_before_db),
        Stage(antenna.amplifier_gain_db, antenna.amplifier_noise_db),
        loss(antenna.cable_loss_db),
        Stage(0.0, scenario.receiver.noise_figure_db),
    )
    power_dbw = POWER_DBW + antenna.gain_zenith_dbic
    return cn0_dbhz(power_dbw, chain, antenna_k=SKY_K, receiver_loss_db=RECEIVER_LOSS_DB)


class Levels:
    """Makes C/N0, second by second, block by block."""

    def __init__(self, scenario: Scenario, orbits: Orbits, *, seed: int, rng: np.random.Generator) -> None:
        self._scenario = scenario
        self._seed = seed
        self._rng = rng
        self.channels = channels(scenario.receiver.signals)
        count, width = len(orbits.number), len(self.channels)
        self._overhead_dbhz = overhead_dbhz(scenario)
        self._power_db = rng.normal(0.0, SATELLITE_SPREAD_DB, count)
        self._flat_db = rng.normal(0.0, REPEATER_SPREAD_DB, count)
        self._wavelength_m = [channel.wavelength_m(orbits.channel) for channel in self.channels]
        self._absent = np.array([[x != channel.letter for channel in self.channels] for x in orbits.letter.tolist()])
        band_loss = scenario.antenna.band_loss_db
        self._fixed_db = np.array([c.offset_db - band_loss.get(c.label, 0.0) for c in self.channels])
        self._slow = GaussMarkov(count * width, time_constant_s=SLOW_S, step_s=1.0, rng=rng)
        self._common = GaussMarkov(1, time_constant_s=COMMON_S, step_s=1.0, rng=rng)
        self._leaves = GaussMarkov(count, time_constant_s=LEAVES_S, step_s=1.0, rng=rng)

    def take(self, time_s: Floats, azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
        """C/N0, dB-Hz, shape (t, satellites, channels); NaN where the satellite's system has no such signal or it is
        below the horizon. ``time_s`` (t,) is whole seconds of the run; angles have shape (t, satellites)."""
        steps, count, width = len(time_s), azimuth_deg.shape[1], len(self.channels)
        elevation = np.maximum(elevation_deg, 0.0)
        base = self._overhead_dbhz + self._power_db + _over_elevation(elevation)
        base = base + self._gain(azimuth_deg, elevation) + COMMON_DB * self._common.take(steps)
        base = base - self._hidden(time_s, azimuth_deg, elevation)
        slow_db = 0.35 + 2.0 * np.exp(-elevation / 15.0)
        slow = self._slow.take(steps).reshape(steps, count, width)
        white = self._rng.standard_normal((steps, count, width))
        level = base[:, :, None] + slow_db[:, :, None] * slow + self._fixed_db
        reflects = bool(self._scenario.antenna.reflector_height_m or self._scenario.antenna.wall_distance_m)
        for i in range(width if reflects else 0):
            level[:, :, i] += reflections_db(self._scenario, self._wavelength_m[i], azimuth_deg, elevation)
        level -= self._losses(time_s)[:, None, :]
        repeated = self._strongest("repeater", time_s)
        if repeated.any():
            # One transmitter for all: the sky's shape is gone.
            even = REPEATER_DBHZ + self._flat_db[None, :, None] + 0.2 * slow
            level = np.where(repeated[:, None, None] > 0.0, even, level)
        level += 0.6 * 10.0 ** ((45.0 - np.clip(level, 15.0, 60.0)) / 40.0) * white
        level[:, self._absent] = np.nan
        return np.where(elevation_deg[:, :, None] > 0.0, level, np.nan)

    def _events(self, *kinds: str) -> list[tuple[int, Event]]:
        return [(i, event) for i, event in enumerate(self._scenario.event) if event.kind in kinds]

    def _strongest(self, kind: str, time_s: Floats) -> Floats:
        strength = np.zeros(len(time_s))
        for i, event in self._events(kind):
            strength = np.maximum(strength, event.strength(time_s, (self._seed, i)))
        return strength

    def _gain(self, azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
        """Of the antenna against its boresight: -rolloff (1 - cos theta)^1.3."""
        antenna = self._scenario.antenna
        tilt, lean = math.radians(antenna.tilt_deg), math.radians(antenna.tilt_azimuth_deg)
        elevation, azimuth = np.radians(elevation_deg), np.radians(azimuth_deg)
        cosine = np.sin(elevation) * math.cos(tilt) + np.cos(elevation) * math.sin(tilt) * np.cos(azimuth - lean)
        return -antenna.rolloff_db * np.maximum(0.0, 1.0 - cosine) ** GAIN_POWER

    def _hidden(self, time_s: Floats, azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
        """Loss behind obstacles, dB, shape (t, satellites); thin ones waver."""
        hidden = np.zeros(azimuth_deg.shape)
        leaves = self._leaves.take(len(time_s))
        for obstacle in self._scenario.obstacle:
            behind = sector(azimuth_deg, obstacle.azimuth_from_deg, obstacle.azimuth_to_deg)
            behind &= elevation_deg < obstacle.elevation_deg
            solid = obstacle.loss_db >= OPAQUE_DB
            wavering = obstacle.loss_db if solid else np.abs(obstacle.loss_db * (1.0 + 0.5 * leaves))
            hidden = np.where(behind, np.maximum(hidden, wavering), hidden)
        for i, event in self._events("blockage"):
            behind = sector(azimuth_deg, event.azimuth_from_deg, event.azimuth_to_deg)
            behind &= elevation_deg < event.elevation_deg
            hidden = hidden + event.depth_db * event.strength(time_s, (self._seed, i))[:, None] * behind
        return hidden

    def _losses(self, time_s: Floats) -> Floats:
        """Loss by interference and in the cable, dB, shape (t, channels)."""
        lost = np.zeros((len(time_s), len(self.channels)))
        for i, event in self._events("interference", "cable_loss"):
            depth_db = event.depth_db * event.strength(time_s, (self._seed, i))
            for j, channel in enumerate(self.channels):
                if not event.bands or channel.label in event.bands:
                    lost[:, j] += depth_db
        return lost


def reflections_db(scenario: Scenario, wavelength_m: Floats, azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
    """Change of level by the waves from reflector and wall, dB, shape as the angles (last axis: satellites)."""
    antenna = scenario.antenna
    sine = np.sin(np.radians(elevation_deg))
    total = np.ones(elevation_deg.shape, dtype=complex)
    if antenna.reflector_height_m:
        # A rough surface reflects less at steep incidence.
        strength = antenna.reflector_strength * np.exp(-(sine - 0.087) / 0.25)
        total += strength * _wave(2.0 * antenna.reflector_height_m * sine, wavelength_m)
    if antenna.wall_distance_m:
        away = np.radians(azimuth_deg - antenna.wall_azimuth_deg)
        seen = (np.cos(away) < -math.cos(math.radians(WALL_HALF_WIDTH_DEG))) & (elevation_deg < WALL_HIGHEST_DEG)
        path_m = -2.0 * antenna.wall_distance_m * np.cos(np.radians(elevation_deg)) * np.cos(away)
        total += np.where(seen, antenna.wall_strength * _wave(path_m, wavelength_m), 0.0)
    return np.asarray(20.0 * np.log10(np.maximum(np.abs(total), 1e-3)))


def _wave(path_m: Floats, wavelength_m: Floats) -> npt.NDArray[np.complex128]:
    return np.asarray(np.exp(1j * (2.0 * math.pi * path_m / wavelength_m + math.pi)))


def _over_elevation(elevation_deg: Floats) -> Floats:
    """Received power over elevation: 0 dB at 5 and 90 degrees, +2 dB at 40 (two parabolas)."""
    low = 2.0 - 2.0 * ((40.0 - elevation_deg) / 35.0) ** 2
    high = 2.0 - 2.0 * ((elevation_deg - 40.0) / 50.0) ** 2
    return np.where(elevation_deg < 40.0, low, high)


def sector(azimuth_deg: Floats, from_deg: float, to_deg: float) -> npt.NDArray[np.bool_]:
    """Which azimuths lie clockwise from one to another; a full turn holds all."""
    width = (to_deg - from_deg) % 360.0 or 360.0
    inside: npt.NDArray[np.bool_] = (azimuth_deg - from_deg) % 360.0 < width
    return inside
