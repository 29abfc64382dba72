"""What really was: the site, what happened when, and what the receiver reported, as sums while it is made."""

from __future__ import annotations

from collections import defaultdict
from datetime import UTC, datetime
from typing import Any

import numpy as np
import numpy.typing as npt

from gnssmon.simulation.line import BITS_PER_BYTE, Losses
from gnssmon.simulation.position import FAST_S, SIZES, SLOW_S, UP_FACTOR
from gnssmon.simulation.scenario import Scenario

QUALITY_NAMES = {0: "none", 1: "autonomous", 2: "differential", 4: "rtk_fixed", 5: "rtk_float"}


class Truth:
    """Adds up as epochs are made; ``facts`` gives one JSON object at the end."""

    def __init__(self, scenario: Scenario, seed: int) -> None:
        self._scenario, self._seed = scenario, seed
        self._epochs = 0
        self._silent = 0
        self._qualities: dict[int, int] = defaultdict(int)
        self._levels: dict[str, list[float]] = defaultdict(lambda: [0.0, 0.0])
        self._error = np.zeros(3)
        self._square = np.zeros((3, 3))
        self._fixes = 0
        self._dops: list[tuple[float, float, float]] = []
        self._used: list[int] = []
        self._changes: list[tuple[float, int]] = []
        self._last_s = 0.0

    def epoch(
        self, time_s: float, quality: int, error_m: npt.NDArray[np.float64], used: int, dops: tuple[float, ...]
    ) -> None:
        """An epoch that was sent."""
        self._epochs += 1
        self._last_s = time_s
        if not self._changes or self._changes[-1][1] != quality:
            self._changes.append((time_s, quality))
        self._qualities[quality] += 1
        if quality:
            self._fixes += 1
            self._error += error_m
            self._square += np.outer(error_m, error_m)
            self._used.append(used)
            self._dops.append((dops[0], dops[1], dops[2]))

    def silent(self) -> None:
        """An epoch that was not sent."""
        self._silent += 1

    def level(self, label: str, total: float, count: int) -> None:
        """Levels sent for a signal."""
        self._levels[label][0] += total
        self._levels[label][1] += count

    def facts(self, losses: Losses) -> dict[str, Any]:
        """Everything, ready for JSON."""
        scenario = self._scenario
        site, stream, antenna = scenario.site, scenario.stream, scenario.antenna
        duration_s = max(self._last_s, 1e-9)
        mean = self._error / self._fixes if self._fixes else np.full(3, np.nan)
        spread = self._square / self._fixes - np.outer(mean, mean) if self._fixes else np.full((3, 3), np.nan)
        scale = self._fixes / (self._fixes - 1) if self._fixes > 1 else np.nan
        dops = np.median(np.array(self._dops), axis=0) if self._dops else np.full(3, np.nan)
        facts: dict[str, Any] = {
            "schema": "gnssmon.truth/1",
            "scenario": scenario.name or scenario.title,
            "seed": self._seed,
            "start_utc": _iso(stream.start_ms / 1000.0),
            "duration_s": self._last_s,
            "mark": [site.latitude_deg, site.longitude_deg, site.height_m],
            "antenna_height_m": site.antenna_height_m,
            "reported_point": [site.latitude_deg, site.longitude_deg, site.height_m + site.antenna_height_m],
            "bias_m": [scenario.receiver.bias_east_m, scenario.receiver.bias_north_m, scenario.receiver.bias_up_m],
            "epochs_due": self._epochs + self._silent,
            "epochs_sent": self._epochs,
            "shares": {
                name: self._qualities.get(code, 0) / self._epochs if self._epochs else None
                for code, name in QUALITY_NAMES.items()
            },
            "quality_changes": [
                {"utc": _iso(stream.start_ms / 1000.0 + at_s), "at_s": at_s, "quality": quality}
                for at_s, quality in self._changes[:10_000]
            ],
            "position_error_mean_m": mean.tolist(),
            "position_error_std_m": np.sqrt(np.maximum(np.diag(spread) * scale, 0.0)).tolist(),
            "error_model": {
                QUALITY_NAMES[code]: {
                    "white_m": size.white_m,
                    "fast_m": size.fast_m,
                    "fast_s": FAST_S.get(code, FAST_S[1]),
                    "slow_m": size.slow_m,
                    "slow_s": SLOW_S.get(code, SLOW_S[1]),
                    "up_factor": UP_FACTOR,
                }
                for code, size in SIZES.items()
            },
            "satellites_used_mean": float(np.mean(self._used)) if self._used else None,
            "pdop_median": dops[0],
            "hdop_median": dops[1],
            "vdop_median": dops[2],
            "cn0_mean_dbhz": {label: total / count for label, (total, count) in sorted(self._levels.items()) if count},
            "cn0_count": {label: int(count) for label, (_, count) in sorted(self._levels.items())},
            "line": {
                "baud": stream.baud,
                "offered_load": losses.offered_bytes
                * BITS_PER_BYTE
                / stream.baud
                / (duration_s + 1.0 / stream.rate_hz),
                "load": losses.sent_bytes * BITS_PER_BYTE / stream.baud / (duration_s + 1.0 / stream.rate_hz),
                "sentences": losses.sentences,
                "missing_sentences": losses.missing_sentences,
                "cut_sentences": losses.cut_sentences,
                "damaged_bits": losses.damaged_bits,
                "lost_bytes": losses.lost_bytes,
                "binary_bytes": losses.binary_bytes,
                "longest_delay_s": losses.longest_delay_s,
            },
            "reflector": None
            if not antenna.reflector_height_m
            else {
                "height_m": antenna.reflector_height_m,
                "fringe_period_sin_elevation_l1": 0.190293672798 / (2.0 * antenna.reflector_height_m),
            },
            "events": [self._event(event) for event in scenario.event],
        }
        told: dict[str, Any] = _without_nan(facts)
        return told

    def _event(self, event: Any) -> dict[str, Any]:
        start_s = self._scenario.stream.start_ms / 1000.0
        end_s = min(event.at_s + event.for_s, self._last_s)
        facts = {
            name: getattr(event, name)
            for name in ("kind", "at_s", "for_s", "every_s", "depth_db", "shape", "bands", "azimuth_from_deg")
        } | {
            name: getattr(event, name)
            for name in ("azimuth_to_deg", "elevation_deg", "east_m", "north_m", "up_m", "seconds", "rate", "text")
        }
        return {"from_utc": _iso(start_s + event.at_s), "to_utc": _iso(start_s + end_s), **facts}


def _iso(utc_s: float) -> str:
    return datetime.fromtimestamp(utc_s, UTC).isoformat(timespec="milliseconds").replace("+00:00", "Z")


def _without_nan(value: Any) -> Any:
    if isinstance(value, dict):
        return {key: _without_nan(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_without_nan(item) for item in value]
    if isinstance(value, float | np.floating):
        return float(value) if np.isfinite(value) else None
    return value
