"""The reflector's height comes back from the sentences: the published method, applied to whole decibels.

Larson et al. 2008, Nievinski & Larson 2014: the power of detrended levels over 4 pi h sin e / wavelength peaks at the
height of the antenna over the reflecting surface, whatever the band. Written here with numpy alone.
"""

from __future__ import annotations

import re
from collections import defaultdict
from dataclasses import replace

import numpy as np
import pytest

from gnssmon.simulation import orbits as motion
from gnssmon.simulation.generator import Generator
from gnssmon.simulation.scenario import load_scenario
from gnssmon.simulation.viewing import directions, geocentric, local_axes

DURATION_S = 2 * 3600
MEAN_S = 10
"""Levels are averaged over so long, as the method does."""
HEIGHTS_M = np.arange(0.4, 8.0, 0.02)
BANDS = {"1": 299.792458 / 1575.42, "7": 299.792458 / 1176.45}
"""Signal id of GPS: wavelength, m."""


WHOLE = load_scenario("roof_reflector")
SCENARIO = replace(
    WHOLE,
    receiver=replace(WHOLE.receiver, signals=("G1", "G5")),
    stream=replace(WHOLE.stream, sentences=("GGA", "GSV")),
)
"""GPS alone, and only what is needed here: the test is quicker."""


@pytest.fixture(scope="module")
def levels() -> dict[str, dict[int, list[tuple[int, int]]]]:
    """Signal id → GPS number → (second of the run, C/N0), from the bytes."""
    run = Generator(SCENARIO, duration_s=float(DURATION_S), seed=6)
    data = b"".join(part for _, part in run.chunks()).decode("ascii")
    found: dict[str, dict[int, list[tuple[int, int]]]] = {signal: defaultdict(list) for signal in BANDS}
    for match in re.finditer(r"\$GPGGA,(\d\d)(\d\d)(\d\d)|\$GPGSV,\d,\d,\d\d,([\d,]*),(\d)\*", data):
        if match[1]:
            second = int(match[1]) * 3600 + int(match[2]) * 60 + int(match[3])
            continue
        fields = match[4].split(",")
        for number, level in zip(fields[::4], fields[3::4], strict=True):
            if level:
                found[match[5]][int(number)].append((second, int(level)))
    return found


@pytest.mark.parametrize("signal", list(BANDS))
def test_height_comes_back(levels, signal):
    """2.0 m within 5 cm, on each band by itself."""
    scenario, site = SCENARIO, SCENARIO.site
    orbits = Generator(scenario, seed=6)._orbits
    point = (site.latitude_deg, site.longitude_deg, site.height_m)
    power, arcs = np.zeros(len(HEIGHTS_M)), 0
    for number, rows in levels[signal].items():
        time_s, level = np.array(rows, dtype=float).T
        satellite = int(np.flatnonzero((orbits.letter == "G") & (orbits.number == number))[0])
        position = motion.positions(orbits, scenario.stream.start_ms / 1000.0 + time_s)[:, satellite]
        _, elevation = directions(position, geocentric(*point), local_axes(*point[:2]))
        low = (elevation > 5.0) & (elevation < 30.0)
        rising = np.gradient(elevation) > 0
        for arc in (low & rising, low & ~rising):
            blocks = int(arc.sum()) // MEAN_S
            if blocks < 90:
                continue
            sine, mean = (
                values[arc][: blocks * MEAN_S].reshape(blocks, MEAN_S).mean(axis=1)
                for values in (np.sin(np.radians(elevation)), level)
            )
            if np.ptp(sine) < 0.15:
                continue
            rest = mean - np.polyval(np.polyfit(sine, mean, 2), sine)
            wave = np.exp(4j * np.pi * HEIGHTS_M[:, None] * sine / BANDS[signal])
            power += np.abs(wave @ rest) ** 2 / (len(rest) * rest.var())
            arcs += 1

    assert arcs >= 5
    assert HEIGHTS_M[np.argmax(power)] == pytest.approx(scenario.antenna.reflector_height_m, abs=0.05)
