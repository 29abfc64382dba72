"""What really was: the site, what happened when, and what the receiver reported, as sums while it is made."""

from __future__ import annotations

from collections import Counter, defaultdict
from dataclasses import asdict, dataclass, field
from datetime import UTC, datetime
from typing import Any

import numpy as np
import numpy.typing as npt

from gnssmon.simulation.line import BITS_PER_BYTE, Losses
from gnssmon.simulation.position import ERRORS, USUAL_DOP
from gnssmon.simulation.scenario import Scenario
from gnssmon.simulation.signals import Channel, overhead_dbhz
from gnssmon.simulation.viewing import geocentric

Floats = npt.NDArray[np.float64]

SCHEMA = "gnssmon.truth/1"
QUALITY_NAMES = {
    0: "none", 1: "autonomous", 2: "differential", 4: "rtk_fixed", 5: "rtk_float", 6: "estimated"
}  # fmt: skip
MOST_CHANGES = 10_000
"""Of fix quality, and of gaps: a stream that flickers for days should not fill the disk."""
MOST_MINUTES = 14_400
"""Ten days of minute rows; what comes later is added to one last row that is not told."""


@dataclass(slots=True)
class _Minute:
    epochs: int = 0
    fixes: int = 0
    used: int = 0
    pdop: float = 0.0
    levels: float = 0.0
    count: int = 0


@dataclass(slots=True)
class _Sums:
    """Of the epochs of one fix quality."""

    epochs: int = 0
    error_m: Floats = field(default_factory=lambda: np.zeros(3))
    square_m2: Floats = field(default_factory=lambda: np.zeros((3, 3)))

    def facts(self) -> dict[str, Any]:
        if self.epochs < 2:
            return {"epochs": self.epochs, "mean_m": None, "std_m": None}
        mean = self.error_m / self.epochs
        spread = (self.square_m2 / self.epochs - np.outer(mean, mean)) * self.epochs / (self.epochs - 1)
        return {
            "epochs": self.epochs,
            "mean_m": mean.tolist(),
            "std_m": np.sqrt(np.maximum(np.diag(spread), 0.0)).tolist(),
        }


class Truth:
    """Adds up as epochs are made; ``facts`` gives one JSON object at the end."""

    def __init__(self, scenario: Scenario, seed: int, channels: tuple[Channel, ...]) -> None:
        self._scenario, self._seed, self._channels = scenario, seed, channels
        self._by_quality: dict[int, _Sums] = defaultdict(_Sums)
        self._all = _Sums()
        self._sent = self._due = 0
        self._level_sum, self._level_count = np.zeros(len(channels)), np.zeros(len(channels), dtype=np.int64)
        self._dops: list[tuple[float, float, float]] = []
        self._dop_epochs: list[int] = []
        """Runs of equal dilutions: geometry is computed once in ten seconds."""
        self._used: Counter[int] = Counter()
        self._ages: Counter[float] = Counter()
        self._changes: list[tuple[float, int]] = []
        self._gaps: list[list[float]] = []
        self._silent = False
        self._minutes: dict[int, _Minute] = defaultdict(_Minute)
        self._last_s = 0.0

    def epoch(
        self, time_s: float, quality: int, age_s: float, *, error_m: Floats, used: int, dops: tuple[float, float, float]
    ) -> None:
        """An epoch that was sent; ``dops``: EDOP, NDOP, VDOP; ``error_m``: reported minus true, east, north, up."""
        self._sent += 1
        self._due += 1
        self._last_s, self._silent = time_s, False
        if (not self._changes or self._changes[-1][1] != quality) and len(self._changes) < MOST_CHANGES:
            self._changes.append((time_s, quality))
        sums = self._by_quality[quality]
        minute = self._minute(time_s)
        minute.epochs += 1
        sums.epochs += 1
        if not quality:
            return
        square_m2 = np.outer(error_m, error_m)
        self._all.epochs += 1
        for s in (sums, self._all):
            s.error_m += error_m
            s.square_m2 += square_m2
        self._used[used] += 1
        if np.isfinite(age_s):
            self._ages[round(age_s, 3)] += 1
        minute.fixes += 1
        minute.used += used
        if not np.isfinite(dops[0]):
            return
        if self._dops and self._dops[-1] == dops:
            self._dop_epochs[-1] += 1
        else:
            self._dops.append(dops)
            self._dop_epochs.append(1)
            minute.pdop = max(minute.pdop, float(np.linalg.norm(dops)))

    def silent(self, time_s: float) -> None:
        """An epoch that was due but not sent."""
        self._due += 1
        self._last_s = time_s
        if not self._silent and len(self._gaps) < MOST_CHANGES:
            self._gaps.append([time_s, time_s, 0])
        self._silent = True
        if self._gaps:
            self._gaps[-1][1] = time_s
            self._gaps[-1][2] += 1

    def levels(self, time_s: float, total: Floats, count: npt.NDArray[np.int64]) -> None:
        """Levels written in an epoch, by channel: their sum in whole dB-Hz, and how many."""
        self._level_sum += total
        self._level_count += count
        minute = self._minute(time_s)
        minute.levels += float(total.sum())
        minute.count += int(count.sum())

    def _minute(self, time_s: float) -> _Minute:
        return self._minutes[min(int(time_s // 60.0), MOST_MINUTES)]

    def facts(self, losses: Losses) -> dict[str, Any]:
        """Everything, ready for JSON; what is not known is null."""
        scenario = self._scenario
        site, receiver = scenario.site, scenario.receiver
        point = (site.latitude_deg, site.longitude_deg, site.height_m + site.antenna_height_m)
        facts: dict[str, Any] = {
            "schema": SCHEMA,
            "simulated": True,
            "scenario": scenario.name,
            "title": scenario.title,
            "healthy": scenario.healthy,
            "seed": self._seed,
            "start_utc": self._utc(0.0),
            "duration_s": self._last_s,
            "interval_s": 1.0 / scenario.stream.rate_hz,
            "site": {
                "mark": [site.latitude_deg, site.longitude_deg, site.height_m],
                "antenna_height_m": site.antenna_height_m,
                "reported_point": list(point),
                "reported_point_ecef_m": geocentric(*point).tolist(),
                "separation_m": site.separation_m,
                "speed_mps": site.speed_mps,
                "course_deg": site.course_deg,
                "bias_m": [receiver.bias_east_m, receiver.bias_north_m, receiver.bias_up_m],
            },
            "epochs": {"due": self._due, "sent": self._sent, "gaps": self._gap_facts()},
            "fix": self._fix_facts(),
            "position_error": self._error_facts(),
            "satellites": self._satellite_facts(),
            "cn0": self._level_facts(),
            "line": self._line_facts(losses),
            "obstacles": [asdict(obstacle) for obstacle in scenario.obstacle],
            "reflector": self._reflector_facts(),
            "events": [self._event_facts(i) for i in range(len(scenario.event))],
            "minutes": self._minute_facts(),
        }
        told: dict[str, Any] = _without_nan(facts)
        return told

    def _utc(self, time_s: float) -> str:
        when = datetime.fromtimestamp(self._scenario.stream.start_ms / 1000.0 + time_s, UTC)
        return when.isoformat(timespec="milliseconds").replace("+00:00", "Z")

    def _gap_facts(self) -> list[dict[str, Any]]:
        return [
            {"from_utc": self._utc(first_s), "to_utc": self._utc(last_s), "from_s": first_s, "epochs": int(missing)}
            for first_s, last_s, missing in self._gaps
        ]

    def _fix_facts(self) -> dict[str, Any]:
        sent = max(self._sent, 1)
        return {
            "share": {name: self._by_quality[q].epochs / sent for q, name in QUALITY_NAMES.items()},
            "changes": [{"utc": self._utc(at_s), "at_s": at_s, "quality": quality} for at_s, quality in self._changes],
            "correction_age_median_s": _median(np.array(list(self._ages)), np.array(list(self._ages.values()))),
            "correction_age_max_s": max(self._ages, default=None),
        }

    def _error_facts(self) -> dict[str, Any]:
        by_quality = {
            name: self._by_quality[q] for q, name in QUALITY_NAMES.items() if q and self._by_quality[q].epochs
        }
        return {
            "axes": ["east", "north", "up"],
            "realised": self._all.facts(),
            "realised_by_quality": {name: sums.facts() for name, sums in by_quality.items()},
            "model_at_usual_dop": {
                QUALITY_NAMES[q]: asdict(size) | {"std_m": size.std_m() * self._scenario.receiver.error_scale}
                for q, size in ERRORS.items()
                if QUALITY_NAMES[q] in by_quality
            },
            "usual_dop": USUAL_DOP,
        }

    def _satellite_facts(self) -> dict[str, Any]:
        facts: dict[str, Any] = {
            "used_mean": sum(n * k for n, k in self._used.items()) / self._used.total() if self._used else None,
            "used_min": min(self._used, default=None),
        }
        if not self._dops:
            return facts | {f"{name}_median": None for name in ("edop", "ndop", "hdop", "vdop", "pdop")}
        dops, epochs = np.array(self._dops), np.array(self._dop_epochs)
        series = {
            "edop": dops[:, 0],
            "ndop": dops[:, 1],
            "hdop": np.hypot(dops[:, 0], dops[:, 1]),
            "vdop": dops[:, 2],
            "pdop": np.linalg.norm(dops, axis=1),
        }
        medians = {f"{name}_median": _median(values, epochs) for name, values in series.items()}
        return facts | medians | {"pdop_max": float(series["pdop"].max()), "hdop_max": float(series["hdop"].max())}

    def _level_facts(self) -> dict[str, Any]:
        count = np.maximum(self._level_count, 1)
        total = int(self._level_count.sum())
        return {
            "overhead_dbhz": overhead_dbhz(self._scenario),
            "mean_dbhz": float(self._level_sum.sum() / total) if total else None,
            "by_signal": {
                channel.label: {
                    "mean_dbhz": float(self._level_sum[i] / count[i]) if self._level_count[i] else None,
                    "count": int(self._level_count[i]),
                    "carrier_mhz": channel.carrier_mhz,
                }
                for i, channel in enumerate(self._channels)
            },
        }

    def _line_facts(self, losses: Losses) -> dict[str, Any]:
        stream = self._scenario.stream
        carried = stream.baud / BITS_PER_BYTE * (self._last_s + 1.0 / stream.rate_hz)
        return {
            "baud": stream.baud,
            "load_offered": losses.offered_bytes / carried,
            "load": losses.sent_bytes / carried,
        } | asdict(losses)

    def _reflector_facts(self) -> dict[str, Any] | None:
        antenna = self._scenario.antenna
        if not antenna.reflector_height_m and not antenna.wall_distance_m:
            return None
        middle = np.zeros(1, dtype=np.int64)
        periods = {
            channel.label: float(channel.wavelength_m(middle)[0]) / (2.0 * antenna.reflector_height_m)
            for channel in self._channels
            if antenna.reflector_height_m
        }
        return {
            "height_m": antenna.reflector_height_m or None,
            "strength": antenna.reflector_strength,
            "period_sin_elevation": periods,
            "wall_distance_m": antenna.wall_distance_m or None,
            "wall_azimuth_deg": antenna.wall_azimuth_deg,
            "wall_strength": antenna.wall_strength,
        }

    def _event_facts(self, place: int) -> dict[str, Any]:
        event = self._scenario.event[place]
        times = [
            {"from_utc": self._utc(begin_s), "to_utc": self._utc(end_s), "from_s": begin_s, "to_s": end_s}
            for begin_s, end_s in event.occurrences(self._last_s)
        ]
        return asdict(event) | {"times": times}

    def _minute_facts(self) -> list[dict[str, Any]]:
        return [
            {
                "utc": self._utc(60.0 * number),
                "epochs": minute.epochs,
                "fixes": minute.fixes,
                "used_mean": minute.used / minute.fixes if minute.fixes else None,
                "pdop_max": minute.pdop or None,
                "cn0_mean_dbhz": minute.levels / minute.count if minute.count else None,
            }
            for number, minute in sorted(self._minutes.items())[:MOST_MINUTES]
        ]


def _median(values: Floats, count: npt.NDArray[np.int64]) -> float | None:
    """Of values that came so many times each."""
    if not len(values):
        return None
    order = np.argsort(values)
    total = np.cumsum(count[order])
    middle = np.searchsorted(total, [(total[-1] + 1) // 2, total[-1] // 2 + 1])
    return float(values[order][middle].mean())


def _without_nan(value: Any) -> Any:
    if isinstance(value, dict):
        return {key: _without_nan(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_without_nan(item) for item in value]
    if isinstance(value, float | np.floating):
        return float(value) if np.isfinite(value) else None
    return value
