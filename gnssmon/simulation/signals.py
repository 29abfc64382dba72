"""C/N0 of every satellite and signal: antenna, obstacles, reflectors, noise, and what happens to them.

Level = zenith level of the band + satellite's own power + power over elevation + antenna gain + slow and common noise,
plus the interference of reflected waves, minus losses. A reflection travels further by 2 h sin e (level ground, h below
the antenna) or 2 d cos e cos(a - wall) (wall at distance d) and meets the direct wave with the phase of that path and
half a turn: the level changes by 20 log10 |1 + alpha exp(i phase)|. Powers over elevation, antenna and noise sizes are
start values (common practice, no source).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from gnssmon.constellations.systems import SIGNALS
from gnssmon.simulation.noise import GaussMarkov
from gnssmon.simulation.orbits import Orbits
from gnssmon.simulation.scenario import Scenario

Floats = npt.NDArray[np.float64]

LIGHT_MPS = 299_792_458.0
SATELLITE_SPREAD_DB = 1.0
SLOW_S, COMMON_S, LEAVES_S = 120.0, 3600.0, 40.0
COMMON_DB = 0.15
GAIN_POWER = 1.3
BAND_OFFSET_DB = {"1": 0.0, "1C": 0.0, "2": -2.0, "5": 1.0, "5a": 1.5, "5b": 1.0, "2a": 1.0, "2b": 0.5, "3": 0.5}
"""Of a signal's level against the first band; 0 for others."""
REPEATER_SPREAD_DB = 0.7


@dataclass(frozen=True, slots=True)
class Channel:
    """One signal label as simulated."""

    label: str
    letter: str
    nmea_id: str
    wavelength_m: float
    offset_db: float


def channels(labels: tuple[str, ...]) -> tuple[Channel, ...]:
    """The signals by label, in the order given; of several with one label the first of the table."""
    rows = []
    for label in labels:
        signal = next(s for s in SIGNALS if s.label == label)
        rows.append(
            Channel(
                label,
                signal.letter,
                signal.nmea_id,
                LIGHT_MPS / (signal.carrier_mhz * 1e6),
                BAND_OFFSET_DB.get(signal.band, 0.0),
            )
        )
    return tuple(rows)


class Levels:
    """Makes C/N0, second by second, block by block."""

    def __init__(self, scenario: Scenario, orbits: Orbits, rng: np.random.Generator) -> None:
        self._scenario = scenario
        self._orbits = orbits
        self.channels = channels(scenario.receiver.signals)
        count, width = len(orbits.number), len(self.channels)
        self._power_db = rng.normal(0.0, SATELLITE_SPREAD_DB, count)
        self._flat_db = rng.normal(0.0, REPEATER_SPREAD_DB, count)
        self._slow = GaussMarkov(count * width, time_constant_s=SLOW_S, step_s=1.0, rng=rng)
        self._common = GaussMarkov(1, time_constant_s=COMMON_S, step_s=1.0, rng=rng)
        self._leaves = GaussMarkov(count, time_constant_s=LEAVES_S, step_s=1.0, rng=rng)
        self._rng = rng

    def take(self, time_s: Floats, azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
        """C/N0, dB-Hz, shape (t, satellites, channels); NaN where the satellite's system has no such signal or it is
        below the horizon. ``time_s`` (t,) is whole seconds of the run; angles have shape (t, satellites)."""
        antenna = self._scenario.antenna
        steps, count, width = len(time_s), azimuth_deg.shape[1], len(self.channels)
        elevation = np.maximum(elevation_deg, 0.0)
        base = antenna.zenith_dbhz - antenna.loss_db + self._power_db + _over_elevation(elevation)
        base = base + self._gain(azimuth_deg, elevation) + COMMON_DB * self._common.take(steps)
        base = base - self._hidden(time_s, azimuth_deg, elevation)
        slow_db = 0.35 + 2.0 * np.exp(-elevation / 15.0)
        slow = self._slow.take(steps).reshape(steps, count, width)
        white = self._rng.standard_normal((steps, count, width))
        level = base[:, :, None] + slow_db[:, :, None] * slow
        for i, channel in enumerate(self.channels):
            level[:, :, i] += channel.offset_db + self._reflections(channel, azimuth_deg, elevation)
        level -= self._losses(time_s)[:, None, :]
        flat = np.array(
            [max((e.active(t) for e in self._scenario.event if e.kind == "repeater"), default=0.0) for t in time_s]
        )
        if flat.any():
            # One transmitter for all: the sky's shape is gone.
            even = antenna.zenith_dbhz - 4.0 + self._flat_db
            level = np.where(flat[:, None, None] > 0.0, even[None, :, None] + 0.2 * slow, level)
        level += 0.6 * 10.0 ** ((45.0 - np.clip(level, 15.0, 60.0)) / 40.0) * white
        wrong = np.array([[letter != channel.letter for channel in self.channels] for letter in self._orbits.letter])
        level[:, wrong] = np.nan
        return np.where(elevation_deg[:, :, None] > 0.0, level, np.nan)

    def _gain(self, azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
        antenna = self._scenario.antenna
        tilt, lean = math.radians(antenna.tilt_deg), math.radians(antenna.tilt_azimuth_deg)
        elevation, azimuth = np.radians(elevation_deg), np.radians(azimuth_deg)
        cosine = np.sin(elevation) * math.cos(tilt) + np.cos(elevation) * math.sin(tilt) * np.cos(azimuth - lean)
        return -antenna.rolloff_db * np.maximum(0.0, 1.0 - cosine) ** GAIN_POWER

    def _hidden(self, time_s: Floats, azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
        """Loss behind obstacles; thin ones (trees) waver."""
        loss = np.zeros(azimuth_deg.shape)
        leaves = self._leaves.take(len(time_s))
        for obstacle in self._scenario.obstacle:
            behind = _between(azimuth_deg, obstacle.azimuth_from_deg, obstacle.azimuth_to_deg)
            behind &= elevation_deg < obstacle.elevation_deg
            wavering = obstacle.loss_db if obstacle.loss_db >= 20.0 else np.abs(obstacle.loss_db * (1.0 + 0.5 * leaves))
            loss = np.where(behind, np.maximum(loss, wavering), loss)
        for event in self._scenario.event:
            if event.kind == "blockage":
                strength = np.array([event.active(t) for t in time_s])
                behind = _between(azimuth_deg, event.azimuth_from_deg, event.azimuth_to_deg)
                behind &= elevation_deg < event.elevation_deg
                loss = loss + event.depth_db * strength[:, None] * behind
        return loss

    def _losses(self, time_s: Floats) -> Floats:
        """Loss by interference and cable, shape (t, channels)."""
        loss = np.zeros((len(time_s), len(self.channels)))
        for event in self._scenario.event:
            if event.kind not in ("interference", "cable_loss"):
                continue
            strength = np.array([event.active(t) for t in time_s])
            for i, channel in enumerate(self.channels):
                if event.kind == "cable_loss" or not event.bands or channel.label in event.bands:
                    loss[:, i] += event.depth_db * strength
        return loss

    def _reflections(self, channel: Channel, azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
        antenna = self._scenario.antenna
        if not antenna.reflector_height_m and not antenna.wall_distance_m:
            return np.zeros(elevation_deg.shape)
        sine = np.sin(np.radians(elevation_deg))
        total = np.ones(elevation_deg.shape, dtype=complex)
        if antenna.reflector_height_m:
            strength = antenna.reflector_strength * np.exp(-(sine - 0.087) / 0.25)
            path_m = 2.0 * antenna.reflector_height_m * sine
            total += strength * np.exp(1j * (2.0 * math.pi * path_m / channel.wavelength_m + math.pi))
        if antenna.wall_distance_m:
            away = np.radians(azimuth_deg - antenna.wall_azimuth_deg)
            cosine = np.cos(np.radians(elevation_deg)) * np.cos(away)
            # The wall mirrors satellites on the antenna's side of it, up to 50 degrees beside its normal.
            seen = (np.cos(away) < -math.cos(math.radians(50.0))) & (elevation_deg < 50.0)
            path_m = -2.0 * antenna.wall_distance_m * cosine
            wave = antenna.wall_strength * np.exp(1j * (2.0 * math.pi * path_m / channel.wavelength_m + math.pi))
            total += np.where(seen, wave, 0.0)
        return np.asarray(20.0 * np.log10(np.maximum(np.abs(total), 1e-3)))


def _over_elevation(elevation_deg: Floats) -> Floats:
    """Received power over elevation: 0 dB at 5 and 90 degrees, +2 dB at 40 (two parabolas)."""
    low = 2.0 - 2.0 * ((40.0 - elevation_deg) / 35.0) ** 2
    high = 2.0 - 2.0 * ((elevation_deg - 40.0) / 50.0) ** 2
    return np.where(elevation_deg < 40.0, low, high)


def _between(azimuth_deg: Floats, from_deg: float, to_deg: float) -> npt.NDArray[np.bool_]:
    """Which azimuths lie clockwise from one to another; a full turn holds all."""
    width = (to_deg - from_deg) % 360.0 or 360.0
    inside: npt.NDArray[np.bool_] = (azimuth_deg - from_deg) % 360.0 < width
    return inside
