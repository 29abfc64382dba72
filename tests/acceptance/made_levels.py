"""Levels of a made-up sky: satellites that differ, fade slowly, rise and set; a receiver that drifts."""

from __future__ import annotations

from typing import Any

import numpy as np
from scipy.signal import lfilter

PASS_H, PERIOD_H = 5.0, 12.0
STEP_S = 10.0


class Sky:
    """Some satellites, each with its own strength per signal, seen by one receiver whenever asked."""

    def __init__(self, generator: np.random.Generator, satellites: int = 90) -> None:
        self._generator = generator
        self._strength_db = generator.normal(0.0, 0.7, (satellites, 1)) + generator.normal(0.0, 0.7, (satellites, 2))
        self._rise_h = generator.uniform(0.0, PERIOD_H, satellites)
        self._highest_deg = generator.uniform(20.0, 88.0, satellites)

    def log(self, start_h: float, hours: float, *, offset_db: float = 0.0) -> dict[str, Any]:
        """The parts of a result that a comparison of levels reads."""
        random = self._generator
        time_h = start_h + np.arange(0.0, hours, STEP_S / 3600.0)
        drift_db = random.normal(0.0, 0.15)
        seen = 0.0
        total, count = np.zeros((2, 18)), np.zeros((2, 18))
        for satellite in range(len(self._rise_h)):
            since_h = (time_h - self._rise_h[satellite]) % PERIOD_H
            elevation = self._highest_deg[satellite] * np.sin(np.pi * since_h / PASS_H)
            up = (since_h < PASS_H) & (elevation > 0.0)
            seen += up.mean()
            row = (elevation[up] // 5.0).astype(int)
            curve = 35.0 + 13.0 * np.sqrt(np.sin(np.radians(elevation[up])))
            keep = np.exp(-STEP_S / 120.0)  # fades of two minutes, 1 dB
            for signal in (0, 1):
                fading = lfilter([np.sqrt(1 - keep**2)], [1.0, -keep], random.normal(size=len(row)))
                level = curve + self._strength_db[satellite, signal] + fading + random.normal(0.0, 0.5, len(row))
                np.add.at(total[signal], row, np.round(level + drift_db + offset_db))
                np.add.at(count[signal], row, STEP_S)
        mean = np.divide(total * STEP_S, count, out=np.full((2, 18), np.nan), where=count > 0)
        return {
            "quantities": {"satellites.tracked_mean": float(seen)},
            "levels": {
                "elevation_deg": [5.0 * k + 2.5 for k in range(18)],
                "signals": {
                    label: {
                        "mean_dbhz": [None if np.isnan(value) else float(value) for value in mean[row]],
                        "count": [int(value) for value in count[row]],
                    }
                    for row, label in enumerate(("G1", "G5"))
                },
            },
        }
