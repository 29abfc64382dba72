"""Puts sky, levels, fix, errors, sentences and line together: a receiver's bytes, and the truth behind them.

Strategy. Physics runs on whole seconds in blocks of ten minutes, drawn from one random stream per subject; epochs pick
what they need. Blocks are always made whole, so a longer run with the same seed begins with the same bytes.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from typing import Any

import numpy as np
import numpy.typing as npt

from gnssmon.simulation import orbits as sky
from gnssmon.simulation.line import Wire
from gnssmon.simulation.position import Errors, Fixing
from gnssmon.simulation.scenario import Event, Scenario
from gnssmon.simulation.sentences import Listed, Told, Writer
from gnssmon.simulation.signals import Levels
from gnssmon.simulation.truth import Truth

Floats = npt.NDArray[np.float64]

BLOCK_S = 600
SKY_STEP_S = 10
"""Satellites move nearly straight for so long: 7 m off the arc, seen from 20 000 km."""
GEOMETRY_S = 10
GLONASS_OFFSET = 64
HIGHEST_LEVEL = 99
DAY_S = 86_400


def generate(scenario: Scenario, *, duration_s: float | None = None, seed: int = 1) -> Iterator[tuple[float, bytes]]:
    """Bytes of a run with the time (UTC, s since 1970) at which the last of them arrives at the host."""
    return Generator(scenario, duration_s=duration_s, seed=seed).chunks()


@dataclass(frozen=True, slots=True)
class _Second:
    """What the receiver knows in one second of the run."""

    satellites: tuple[Listed, ...]
    used: int
    dops: tuple[float, float, float]


class Generator:
    """One run of a scenario."""

    def __init__(self, scenario: Scenario, *, duration_s: float | None = None, seed: int = 1) -> None:
        self._scenario = scenario
        self._duration_s = scenario.duration_s if duration_s is None else duration_s
        site, stream, receiver = scenario.site, scenario.stream, scenario.receiver
        streams = [np.random.default_rng([seed, i]) for i in range(4)]
        letters = "".join(dict.fromkeys(label[0] for label in receiver.signals))
        self._orbits = sky.constellation(letters, streams[0])
        self._levels = Levels(scenario, self._orbits, streams[1])
        self._errors = Errors(scenario, 1.0 / stream.rate_hz, streams[2])
        self._fixing = Fixing(scenario)
        self._wire = Wire(
            stream.baud, bit_error_rate=stream.bit_error_rate, byte_loss_rate=stream.byte_loss_rate, rng=streams[3]
        )
        ids = {x: tuple(c.nmea_id for c in self._levels.channels if c.letter == x) for x in "GREC" if x in letters}
        self._writer = Writer(stream.version, minute_decimals=stream.minute_decimals, signals=ids)
        self._columns = {x: [i for i, c in enumerate(self._levels.channels) if c.letter == x] for x in ids}
        self._start_s = stream.start_ms / 1000.0
        self._point = (site.latitude_deg, site.longitude_deg, site.height_m + site.antenna_height_m)
        self._site_m = sky.geocentric(*self._point)
        self._axes = sky.local_axes(site.latitude_deg, site.longitude_deg)
        self._metres = _metres_per_degree(*self._point)
        self._truth = Truth(scenario, seed)

    def truth(self) -> dict[str, Any]:
        """The truth of what has been generated so far, ready for JSON."""
        return self._truth.facts(self._wire.losses)

    def chunks(self) -> Iterator[tuple[float, bytes]]:
        """The run, epoch by epoch."""
        rate_hz = self._scenario.stream.rate_hz
        epochs = math.ceil(self._duration_s * rate_hz - 1e-9)
        number = 0
        for block in range(math.ceil(self._duration_s / BLOCK_S)):
            begin_s = block * BLOCK_S
            # Every epoch of the block is made, for the noise to go on alike whatever the length of the run.
            last = math.ceil((begin_s + BLOCK_S) * rate_hz - 1e-9)
            times = np.arange(number, last) / rate_hz
            seconds = self._seconds(begin_s)
            told = [seconds[min(int(t - begin_s), BLOCK_S - 1)] for t in times.tolist()]
            fixes = [self._fix(t, second.used) for t, second in zip(times.tolist(), told, strict=True)]
            quality = np.array([fix[0] for fix in fixes], dtype=np.int64)
            dops = np.array([second.dops for second in told])
            error_m = self._errors.take(quality, dops[:, 1], dops[:, 2])
            for i in range(len(times)):
                if number + i >= epochs:
                    return
                sent = self._epoch(number + i, float(times[i]), told[i], fixes[i], error_m[i])
                if sent is not None:
                    yield sent
            number = last

    def _events(self, kind: str) -> list[Event]:
        return [event for event in self._scenario.event if event.kind == kind]

    def _active(self, kind: str, time_s: float) -> bool:
        return any(event.active(time_s) > 0.0 for event in self._events(kind))

    def _seconds(self, begin_s: int) -> list[_Second]:
        """Satellites of every second of a block."""
        receiver = self._scenario.receiver
        coarse = np.arange(0, BLOCK_S + 1, SKY_STEP_S, dtype=np.float64)
        position = sky.positions(self._orbits, begin_s + coarse, self._start_s)
        time_s = np.arange(BLOCK_S, dtype=np.float64)
        left = (time_s // SKY_STEP_S).astype(np.intp)
        part = (time_s / SKY_STEP_S - left)[:, None, None]
        azimuth, elevation = sky.directions(
            position[left] * (1 - part) + position[left + 1] * part, self._site_m, self._axes
        )
        level = self._levels.take(begin_s + time_s, azimuth, elevation)
        shown = np.where(level >= receiver.tracking_dbhz, np.rint(np.clip(level, 0, HIGHEST_LEVEL)), 0.0)
        shown = np.nan_to_num(shown).astype(np.int64)
        main = np.array([self._columns[letter][0] for letter in self._orbits.letter.tolist()])
        main_level = np.take_along_axis(level, main[None, :, None], axis=2)[:, :, 0]
        used = np.nan_to_num(main_level) >= receiver.use_dbhz
        used &= elevation >= receiver.mask_deg
        listed = elevation >= 0.0
        whole_elevation = np.rint(elevation).astype(np.int64)
        whole_azimuth = (np.rint(azimuth).astype(np.int64)) % 360
        names = [
            (letter, number + GLONASS_OFFSET if letter == "R" else number, self._columns[letter])
            for letter, number in zip(self._orbits.letter.tolist(), self._orbits.number.tolist(), strict=True)
        ]
        seconds = []
        dops = (math.inf, math.inf, math.inf)
        for i in range(BLOCK_S):
            if i % GEOMETRY_S == 0 or (used[i] != used[i - 1]).any():
                dops = sky.dops(azimuth[i, used[i]], elevation[i, used[i]])
            satellites = []
            e, a, u, s = whole_elevation[i].tolist(), whole_azimuth[i].tolist(), used[i].tolist(), shown[i].tolist()
            for j in np.flatnonzero(listed[i]).tolist():
                letter, number, columns = names[j]
                satellites.append(Listed(letter, number, e[j], a[j], u[j], tuple(s[j][c] for c in columns)))
            seconds.append(_Second(tuple(satellites), int(used[i].sum()), dops))
        return seconds

    def _fix(self, time_s: float, used: int) -> tuple[int, float]:
        return self._fixing.step(
            time_s,
            used,
            powered=not self._active("power_cycle", time_s),
            blocked=self._active("no_fix", time_s),
            corrections=not self._active("no_corrections", time_s),
        )

    def _epoch(
        self, number: int, time_s: float, second: _Second, fix: tuple[int, float], error_m: Floats
    ) -> tuple[float, bytes] | None:
        scenario = self._scenario
        stream, receiver, site = scenario.stream, scenario.receiver, scenario.site
        if self._active("silence", time_s) or self._active("power_cycle", time_s):
            self._truth.silent()
            return None
        quality, age_s = fix
        offset_m = np.array([receiver.bias_east_m, receiver.bias_north_m, receiver.bias_up_m])
        for event in self._events("jump"):
            offset_m = offset_m + event.active(time_s) * np.array([event.east_m, event.north_m, event.up_m])
        course = math.radians(site.course_deg)
        moved_m = site.speed_mps * time_s * np.array([math.sin(course), math.cos(course), 0.0])
        east_m, north_m, up_m = (error_m + offset_m + moved_m).tolist()
        clock, date = self._clock(time_s)
        pdop, hdop, vdop = second.dops
        told = Told(
            clock=clock,
            date=date,
            quality=quality,
            latitude_deg=self._point[0] + north_m / self._metres[0],
            longitude_deg=_wrapped(self._point[1] + east_m / self._metres[1]),
            altitude_m=self._point[2] + up_m - site.separation_m,
            separation_m=site.separation_m,
            used=(min(second.used, 12) if stream.capped else second.used) if quality else 0,
            pdop=pdop,
            hdop=hdop,
            vdop=vdop,
            age_s=age_s,
            station=receiver.station_id,
            speed_mps=site.speed_mps,
            course_deg=site.course_deg,
            sigma_m=(hdop * 0.7, hdop * 0.7, vdop * 0.7),
            satellites=second.satellites if quality else _unused(second.satellites),
        )
        kinds: tuple[str, ...] = stream.sentences
        if number % stream.satellites_every:
            kinds = tuple(kind for kind in kinds if kind != "GSV")
        text = next((e.text for e in self._events("text") if e.active(time_s) and time_s % 10.0 < 1e-6), "")
        sentences = self._writer.epoch(told, (*kinds, "TXT") if text else kinds, text=text)
        self._truth.epoch(time_s, quality, error_m + offset_m, second.used, second.dops)
        if "GSV" in kinds:
            self._tell_levels(second)
        noise = sum(event.rate * event.active(time_s) for event in self._events("bit_errors"))
        arrival_s, data = self._wire.send(
            time_s + stream.latency_s, sentences, binary=stream.binary_bytes_per_epoch, bit_errors=noise
        )
        return self._start_s + arrival_s, data

    def _tell_levels(self, second: _Second) -> None:
        for letter, columns in self._columns.items():
            for place, channel in enumerate(columns):
                levels = [s.levels[place] for s in second.satellites if s.letter == letter and s.levels[place]]
                if levels:
                    self._truth.level(self._levels.channels[channel].label, float(sum(levels)), len(levels))

    def _clock(self, time_s: float) -> tuple[str, tuple[int, int, int]]:
        """Time of day and date as the receiver prints them, a leap second and clock jumps included."""
        stream = self._scenario.stream
        shown_s = time_s + sum(e.seconds * e.active(time_s) for e in self._events("clock_jump"))
        leaping = False
        if stream.leap_second:
            midnight_s = DAY_S - self._start_s % DAY_S
            leaping = midnight_s <= shown_s < midnight_s + 1.0
            shown_s -= 1.0 if shown_s >= midnight_s else 0.0
        hundredths = round((self._start_s + shown_s) * 100)
        whole, fraction = divmod(hundredths, 100)
        when = datetime.fromtimestamp(whole, UTC)
        day = when + timedelta(weeks=stream.week_offset)
        second = 60 if leaping else when.second
        return f"{when.hour:02d}{when.minute:02d}{second:02d}.{fraction:02d}", (day.day, day.month, day.year)


def _unused(satellites: tuple[Listed, ...]) -> tuple[Listed, ...]:
    return tuple(Listed(s.letter, s.number, s.elevation, s.azimuth, False, s.levels) for s in satellites)


def _metres_per_degree(latitude_deg: float, longitude_deg: float, height_m: float) -> tuple[float, float]:
    """Metres per degree of latitude and longitude: the radii of curvature of WGS 84 at this height."""
    e2 = sky.FLATTENING * (2 - sky.FLATTENING)
    latitude = math.radians(latitude_deg)
    w2 = 1 - e2 * math.sin(latitude) ** 2
    meridian = sky.EARTH_RADIUS_M * (1 - e2) / w2**1.5
    prime = sky.EARTH_RADIUS_M / math.sqrt(w2)
    return math.radians(1) * (meridian + height_m), math.radians(1) * (prime + height_m) * math.cos(latitude)


def _wrapped(longitude_deg: float) -> float:
    return (longitude_deg + 180.0) % 360.0 - 180.0
