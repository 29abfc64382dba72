"""One day of the simulated sky at 33° S and 60° N: tracks, and C/N0 over elevation. For a person to look at.

    python tests/benchmarks/sky_pictures.py sky.png

What to see: the hole about the celestial pole (south of a southern site, north of a northern one), rising and setting
arcs elsewhere, levels that climb from the horizon and flatten, and a reflector's ripple with its period in sin e.
"""

from __future__ import annotations

import sys

import matplotlib
import numpy as np

from gnssmon.configuration import load
from gnssmon.simulation import orbits as motion
from gnssmon.simulation.generator import Generator
from gnssmon.simulation.scenario import Scenario

SITES = ((-33.4, 148.25), (60.2, 26.7))
COLOURS = {"G": "tab:blue", "R": "tab:red", "E": "tab:green", "C": "tab:orange"}
NAMES = {"G": "GPS", "R": "GLONASS", "E": "Galileo", "C": "BeiDou MEO"}
SCENE = """
title = "picture"
[site]
latitude_deg = {}
longitude_deg = {}
height_m = 100.0
[antenna]
reflector_height_m = 2.0
reflector_strength = 0.3
"""


def day(latitude_deg: float, longitude_deg: float) -> tuple[np.ndarray, ...]:
    """System letters, azimuth, elevation (t, n) and level of the first two signals (t, n, 2), every 30 s of a day."""
    from gnssmon.simulation.viewing import directions, geocentric, local_axes

    scene = load(Scenario, SCENE.format(latitude_deg, longitude_deg), name="picture")
    run = Generator(scene, seed=1)
    orbits, levels = run._orbits, run._levels
    site_m, axes = geocentric(latitude_deg, longitude_deg, 100.0), local_axes(latitude_deg, longitude_deg)
    parts = []
    for begin in range(0, 86_400, 600):
        time_s = begin + np.arange(600.0)
        azimuth, elevation = directions(motion.positions(orbits, motion.EPOCH_S + time_s), site_m, axes)
        parts.append((azimuth[::30], elevation[::30], levels.take(time_s, azimuth, elevation)[::30, :, :2]))
    azimuth, elevation, level = (np.concatenate(part) for part in zip(*parts, strict=True))
    return orbits.letter, azimuth, elevation, level


def main(path: str) -> None:
    matplotlib.use("Agg")
    from matplotlib import pyplot

    figure = pyplot.figure(figsize=(15, 14))
    for column, (latitude, longitude) in enumerate(SITES):
        letter, azimuth, elevation, level = day(latitude, longitude)
        axes = figure.add_subplot(3, 2, 1 + column, projection="polar")
        axes.set_theta_zero_location("N")
        axes.set_theta_direction(-1)
        for x, colour in COLOURS.items():
            chosen = np.flatnonzero(letter == x)
            up = elevation[:, chosen] > 0
            axes.scatter(
                np.radians(azimuth[:, chosen][up]), 90 - elevation[:, chosen][up], s=0.3, c=colour, label=NAMES[x]
            )
        axes.plot(0 if latitude > 0 else np.pi, 90 - abs(latitude), "k+", ms=14)
        axes.set_rlim(0, 90)
        axes.set_title(f"{abs(latitude)}° {'N' if latitude > 0 else 'S'}, one day; + is the celestial pole")
        axes.legend(loc="lower left", fontsize=7, markerscale=6)

        axes = figure.add_subplot(3, 2, 3 + column)
        gps = np.flatnonzero(letter == "G")
        for band, (name, colour) in enumerate((("L1", "tab:blue"), ("L5", "tab:purple"))):
            axes.plot(elevation[:, gps].ravel(), level[:, gps, band].ravel(), ".", ms=0.6, c=colour, label=name)
        axes.set(xlabel="elevation, degrees", ylabel="C/N0, dB-Hz", xlim=(0, 90), ylim=(25, 60))
        axes.legend(markerscale=8)

        axes = figure.add_subplot(3, 2, 5 + column)
        # The pass of a GPS satellite that climbs highest, from the horizon to 30 degrees.
        best = gps[np.argmax(elevation[:, gps].max(axis=0))]
        top = int(np.argmax(elevation[:, best]))
        rise = top
        while rise > 0 and elevation[rise - 1, best] > 0:
            rise -= 1
        sine = np.sin(np.radians(elevation[rise:top, best]))
        axes.plot(sine, level[rise:top, best, 0], label="L1: period 0.0476")
        axes.plot(sine, level[rise:top, best, 1], label="L5: period 0.0637")
        axes.set(xlabel="sin elevation", ylabel="C/N0, dB-Hz", xlim=(0, 0.6), xticks=np.arange(0, 0.6, 0.0476))
        axes.tick_params(axis="x", labelsize=6)
        axes.grid(axis="x")
        axes.set_title("one rising satellite over a reflector 2 m below", fontsize=9)
        axes.legend()
    figure.tight_layout()
    figure.savefig(path, dpi=75)
    print(path)


if __name__ == "__main__":
    main(sys.argv[1])
