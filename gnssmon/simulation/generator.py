"""Puts sky, levels, fix, errors, sentences and line together: a receiver's bytes, and the truth behind them.

Strategy. Physics runs on whole seconds in blocks of ten minutes, drawn from one random stream per subject; epochs pick
what they need. Blocks are always made whole, so a longer run with the same seed begins with the same bytes.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, replace
from datetime import UTC, datetime, timedelta
from typing import Any

import numpy as np
import numpy.typing as npt

from gnssmon.simulation import orbits as motion
from gnssmon.simulation.constellations import LETTERS, constellation
from gnssmon.simulation.line import Wire
from gnssmon.simulation.position import ERRORS, USUAL_DOP, Fixing, Wandering
from gnssmon.simulation.scenario import Scenario
from gnssmon.simulation.sentences import NUMBER_OFFSET, Listed, Told, Writer
from gnssmon.simulation.signals import Levels
from gnssmon.simulation.timeline import Timeline
from gnssmon.simulation.tracking import Tracking
from gnssmon.simulation.truth import Truth
from gnssmon.simulation.viewing import directions, dops, geocentric, local_axes, metres_per_degree

Floats = npt.NDArray[np.float64]

BLOCK_S = 600
SKY_STEP_S = 10
"""Satellites move nearly straight for so long: 7 m off the arc, seen from 20 000 km."""
GEOMETRY_S = 10
"""Dilution of precision is computed so often, and whenever a satellite comes or goes."""
TIME_SHARE = 0.4
"""After a cold start the receiver knows the time after this part of the time to first fix."""
HIGHEST_LEVEL = 99
CAP = 12
TEXT_S = 10.0
DAY_S = 86_400


def generate(scenario: Scenario, *, duration_s: float | None = None, seed: int = 1) -> Iterator[tuple[float, bytes]]:
    """Pieces of a run's bytes, each with the time (UTC, s since 1970) at which its last byte arrives at the host.

    ``duration_s`` without: the scenario's own. The same seed gives the same bytes; a longer run begins with them.
    """
    return Generator(scenario, duration_s=duration_s, seed=seed).chunks()


@dataclass(frozen=True, slots=True)
class _Second:
    """What the receiver knows in one second of the run."""

    satellites: tuple[Listed, ...]
    used: int
    dops: tuple[float, float, float]
    level_sum: Floats
    level_count: npt.NDArray[np.int64]


class Generator:
    """One run of a scenario."""

    def __init__(self, scenario: Scenario, *, duration_s: float | None = None, seed: int = 1) -> None:
        self._scenario = scenario
        self._seed = seed
        self._duration_s = scenario.duration_s if duration_s is None else duration_s
        site, stream, receiver = scenario.site, scenario.stream, scenario.receiver
        streams = [np.random.default_rng([seed, i]) for i in range(5)]
        letters = "".join(x for x in LETTERS if any(label[0] == x for label in receiver.signals))
        sidereal_deg = math.degrees(float(motion.sidereal_angle(motion.EPOCH_S)))
        self._orbits = constellation(letters, streams[0], sidereal_deg=sidereal_deg)
        self._levels = Levels(scenario, self._orbits, seed=seed, rng=streams[1])
        self._columns = {x: [i for i, c in enumerate(self._levels.channels) if c.letter == x] for x in letters}
        main = np.array([self._columns[letter][0] for letter in self._orbits.letter.tolist()])
        self._tracking = Tracking(receiver, main, self._orbits.letter != "S", streams[4])
        self._wandering = Wandering(receiver.error_scale, 1.0 / stream.rate_hz, streams[2])
        self._fixing = Fixing(receiver)
        self._wire = Wire(
            stream.baud,
            bit_error_rate=stream.bit_error_rate,
            byte_loss_rate=stream.byte_loss_rate,
            jitter_s=stream.jitter_s,
            rng=streams[3],
        )
        signals = tuple((channel.letter, channel.nmea_id) for channel in self._levels.channels)
        self._writer = Writer(stream.version, minute_decimals=stream.minute_decimals, signals=signals)
        self._start_s = stream.start_ms / 1000.0
        self._midnight_s = DAY_S - self._start_s % DAY_S
        self._point = (site.latitude_deg, site.longitude_deg, site.height_m + site.antenna_height_m)
        self._site_m = geocentric(*self._point)
        self._axes = local_axes(site.latitude_deg, site.longitude_deg)
        self._metres = metres_per_degree(site.latitude_deg, self._point[2])
        self._names = [
            (letter, number + NUMBER_OFFSET.get(letter, 0), self._columns[letter])
            for letter, number in zip(self._orbits.letter.tolist(), self._orbits.number.tolist(), strict=True)
        ]
        self._held_m: Floats | None = None
        self._latest: Told | None = None
        self._repeated: Told | None = None
        """While the receiver is frozen: what it says again and again."""
        self._powered_s = 0.0
        self._truth = Truth(scenario, seed, self._levels.channels)

    def truth(self) -> dict[str, Any]:
        """The truth of what has been generated so far, ready for JSON."""
        return self._truth.facts(self._wire.losses)

    def chunks(self) -> Iterator[tuple[float, bytes]]:
        """The run's bytes, an epoch or less at a time."""
        rate_hz = self._scenario.stream.rate_hz
        epochs = math.ceil(self._duration_s * rate_hz - 1e-9)
        number = 0
        for block in range(math.ceil(self._duration_s / BLOCK_S)):
            begin_s = block * BLOCK_S
            # Every epoch of the block is made, for the noise to go on alike whatever the length of the run.
            last = math.ceil((begin_s + BLOCK_S) * rate_hz - 1e-9)
            times = np.arange(number, last) / rate_hz
            seconds = self._seconds(begin_s)
            told = [seconds[min(int(t - begin_s + 1e-9), BLOCK_S - 1)] for t in times.tolist()]
            state = Timeline(self._scenario, self._seed, times)
            fixes = []
            for i, time_s in enumerate(times.tolist()):
                fix = self._fixing.step(
                    time_s,
                    told[i].used if math.hypot(*told[i].dops) <= self._scenario.receiver.pdop_mask else 0,
                    powered=not state.on("power_cycle", i),
                    blocked=state.on("no_fix", i),
                    corrections=not state.on("no_corrections", i),
                )
                fixes.append((*fix, self._fixing.settled))
            quality = np.array([fix[0] for fix in fixes], dtype=np.int64)
            error_m = self._wandering.take(quality, np.array([second.dops for second in told])) + state.offset_m
            for i in range(min(len(times), epochs - number)):
                yield from self._epoch(number + i, i, state, told[i], fixes[i], error_m[i])
            number = last

    def _seconds(self, begin_s: int) -> list[_Second]:
        """Satellites of every second of a block."""
        coarse = np.arange(0, BLOCK_S + 1, SKY_STEP_S, dtype=np.float64)
        position = motion.positions(self._orbits, self._start_s + begin_s + coarse)
        time_s = np.arange(BLOCK_S, dtype=np.float64)
        left = (time_s // SKY_STEP_S).astype(np.intp)
        part = (time_s / SKY_STEP_S - left)[:, None, None]
        between = position[left] * (1 - part) + position[left + 1] * part
        azimuth, elevation = directions(between, self._site_m, self._axes)
        run_s = begin_s + time_s
        level = self._levels.take(run_s, azimuth, elevation)
        powered = ~Timeline(self._scenario, self._seed, run_s).flags("power_cycle")
        tracked, used = self._tracking.take(run_s, level, elevation, powered)
        shown = np.where(tracked, np.rint(np.clip(level, 1, HIGHEST_LEVEL)), 0.0).astype(np.int64)
        listed = elevation >= 0.0
        whole_elevation = np.rint(elevation).astype(np.int64)
        whole_azimuth = np.rint(azimuth).astype(np.int64) % 360
        level_sum, level_count = shown.sum(axis=1).astype(np.float64), (shown > 0).sum(axis=1)
        seconds = []
        dop = (math.inf, math.inf, math.inf)
        for i in range(BLOCK_S):
            if i % GEOMETRY_S == 0 or (used[i] != used[i - 1]).any():
                dop = dops(azimuth[i, used[i]], elevation[i, used[i]])
            e, a, u, s = whole_elevation[i].tolist(), whole_azimuth[i].tolist(), used[i].tolist(), shown[i].tolist()
            satellites = []
            for j in np.flatnonzero(listed[i]).tolist():
                letter, number, columns = self._names[j]
                levels = s[j]
                satellites.append(Listed(letter, number, e[j], a[j], u[j], tuple([levels[c] for c in columns])))
            seconds.append(_Second(tuple(satellites), int(used[i].sum()), dop, level_sum[i], level_count[i]))
        return seconds

    def _epoch(
        self, number: int, i: int, state: Timeline, second: _Second, fix: tuple[int, float, bool], error_m: Floats
    ) -> list[tuple[float, bytes]]:
        stream = self._scenario.stream
        time_s = float(state.time_s[i])
        if state.on("power_cycle", i):
            self._powered_s = time_s
            self._held_m = None
        if state.on("silence", i) or state.on("power_cycle", i):
            self._truth.silent(time_s)
            return []
        quality, age_s, settled = fix
        if self._scenario.receiver.static_hold and quality:
            self._held_m = error_m if self._held_m is None else self._held_m
            error_m = self._held_m
        told = self._tell(time_s, state, i, second, quality, age_s, error_m)
        if not settled:
            told = self._strange(told, time_s)
        self._repeated = self._latest if state.on("frozen", i) else None
        self._latest = told = self._repeated or told
        kinds: tuple[str, ...] = stream.sentences
        if number % stream.satellites_every:
            kinds = tuple(kind for kind in kinds if kind != "GSV")
        text = state.text(i) if math.fmod(time_s, TEXT_S) < 0.5 / stream.rate_hz else ""
        sentences = self._writer.epoch(told, (*kinds, "TXT") if text and "TXT" not in kinds else kinds, text=text)
        if told is self._repeated:
            self._truth.silent(time_s)  # sentences come, but nothing new is told
        else:
            self._truth.epoch(time_s, quality, age_s, error_m=error_m, used=second.used, dops=second.dops)
            if "GSV" in kinds:
                self._truth.levels(time_s, second.level_sum, second.level_count)
        pieces = self._wire.send(
            time_s + stream.latency_s,
            sentences,
            binary=stream.binary_bytes_per_epoch,
            bit_errors=state.bit_errors[i],
        )
        return [(self._host_s(arrival_s), data) for arrival_s, data in pieces]

    def _tell(
        self, time_s: float, state: Timeline, i: int, second: _Second, quality: int, age_s: float, error_m: Floats
    ) -> Told:
        scenario = self._scenario
        receiver, site = scenario.receiver, scenario.site
        course = math.radians(site.course_deg)
        moved_m = site.speed_mps * time_s
        east_m, north_m, up_m = error_m.tolist()
        east_m, north_m = east_m + moved_m * math.sin(course), north_m + moved_m * math.cos(course)
        clock, date = self._clock(time_s, float(state.clock_s[i]))
        edop, ndop, vdop = second.dops
        size_m = ERRORS[quality].std_m() * receiver.error_scale / USUAL_DOP if quality else math.nan
        used = second.used if quality else 0
        return Told(
            clock=clock,
            date=date,
            quality=quality,
            latitude_deg=self._point[0] + north_m / self._metres[0],
            longitude_deg=(self._point[1] + east_m / self._metres[1] + 180.0) % 360.0 - 180.0,
            altitude_m=self._point[2] + up_m - site.separation_m,
            separation_m=site.separation_m,
            used=min(used, CAP) if scenario.stream.capped else used,
            pdop=math.hypot(edop, ndop, vdop),
            hdop=math.hypot(edop, ndop),
            vdop=vdop,
            age_s=age_s,
            station=state.station(i),
            speed_mps=site.speed_mps,
            course_deg=site.course_deg,
            sigma_m=(size_m * edop, size_m * ndop, size_m * vdop),
            satellites=second.satellites if quality else tuple(replace(s, used=False) for s in second.satellites),
        )

    def _strange(self, told: Told, time_s: float) -> Told:
        """The same while time and sky are still unknown: after a cold start."""
        heard = tuple(replace(s, elevation=None, azimuth=None) for s in told.satellites if any(s.levels))
        timed = time_s - self._powered_s >= TIME_SHARE * self._scenario.receiver.time_to_first_fix_s
        return replace(told, satellites=heard, clock=told.clock if timed else "", date=told.date if timed else None)

    def _clock(self, time_s: float, ahead_s: float) -> tuple[str, tuple[int, int, int]]:
        """Time of day and date as the receiver prints them, a leap second and clock jumps included."""
        stream = self._scenario.stream
        shown_s = time_s + ahead_s
        leaping = False
        if stream.leap_second and shown_s >= self._midnight_s:
            leaping = shown_s < self._midnight_s + 1.0
            shown_s -= 1.0
        whole, fraction = divmod(round((self._start_s + shown_s) * 100), 100)
        when = datetime.fromtimestamp(whole, UTC)
        day = when + timedelta(weeks=stream.week_offset)
        second = 60 if leaping else when.second
        return f"{when.hour:02d}{when.minute:02d}{second:02d}.{fraction:02d}", (day.day, day.month, day.year)

    def _host_s(self, arrival_s: float) -> float:
        """Time of arrival by a host whose clock stands still during a leap second, as POSIX time has to."""
        if self._scenario.stream.leap_second and arrival_s >= self._midnight_s:
            arrival_s = max(self._midnight_s, arrival_s - 1.0)
        return self._start_s + arrival_s
