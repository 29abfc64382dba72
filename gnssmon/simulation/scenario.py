"""Scenario: what a simulated site, antenna, receiver and line are like, and what happens to them.

A scenario is one TOML file; those that come with the program lie in ``scenarios/``. Times of events count from the
start of the run.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from importlib import resources
from pathlib import Path
from typing import Annotated, Literal

from gnssmon.configuration import Duration, load, nearest
from gnssmon.constellations.systems import SIGNALS
from gnssmon.errors import ConfigurationError
from gnssmon.printable import printable
from gnssmon.utc import parse_instant

SLOWEST_HZ, FASTEST_HZ = 0.2, 50.0
SIMULATED_LABELS = tuple(dict.fromkeys(signal.label for signal in SIGNALS if signal.letter in "GREC"))


def start_ms(value: object) -> int:
    """UTC of the run's start, ms since 1970, from ``"2026-03-01T00:00:00Z"``."""
    if not isinstance(value, str):
        raise ConfigurationError('wanted an instant in quotes, such as "2026-03-01T00:00:00Z"')
    instant = parse_instant(value)
    if not instant.dated:
        raise ConfigurationError(f"'{printable(value, 40)}' has no date; wanted such as \"2026-03-01T00:00:00Z\"")
    return instant.ms


@dataclass(frozen=True, slots=True, kw_only=True)
class SiteTruth:
    """Where the mark is."""

    latitude_deg: float
    longitude_deg: float
    height_m: float
    """Ellipsoidal height of the mark."""
    antenna_height_m: float = 0.0
    """Mark to the point that the receiver reports, vertical."""
    separation_m: float = 20.0
    """Geoid separation that the receiver believes in."""
    speed_mps: float = 0.0
    """Slow movement of the antenna, towards ``course_deg``."""
    course_deg: float = 0.0

    def __post_init__(self) -> None:
        if not -90.0 <= self.latitude_deg <= 90.0 or not -180.0 <= self.longitude_deg <= 180.0:
            raise ConfigurationError("latitude lies between -90 and 90, longitude between -180 and 180 degrees")


@dataclass(frozen=True, slots=True, kw_only=True)
class Antenna:
    zenith_dbhz: float = 50.0
    """C/N0 of a satellite of average power overhead on the first band."""
    rolloff_db: float = 9.0
    """Gain at the zenith minus gain at the horizon."""
    tilt_deg: float = 0.0
    tilt_azimuth_deg: float = 0.0
    """Where the antenna leans to."""
    loss_db: float = 0.0
    """Loss before the first amplifier, on all bands, all the time."""
    reflector_height_m: float = 0.0
    """Antenna above a level reflecting ground or roof; 0: none."""
    reflector_strength: float = 0.3
    """Amplitude of the reflection against the direct signal at 5 degrees of elevation."""
    wall_distance_m: float = 0.0
    """Distance of a reflecting wall; 0: none."""
    wall_azimuth_deg: float = 0.0
    wall_strength: float = 0.3


@dataclass(frozen=True, slots=True, kw_only=True)
class Obstacle:
    """Something in the way, from one azimuth clockwise to another, up to an elevation."""

    azimuth_from_deg: float = 0.0
    azimuth_to_deg: float = 360.0
    elevation_deg: float
    loss_db: float = 40.0
    """40 hides a satellite, 5 is a tree."""

    def __post_init__(self) -> None:
        if not 0.0 <= self.elevation_deg <= 90.0:
            raise ConfigurationError("elevation_deg lies between 0 and 90")


Mode = Literal["autonomous", "differential", "rtk"]


@dataclass(frozen=True, slots=True, kw_only=True)
class ReceiverTruth:
    signals: tuple[str, ...] = ("G1", "G5", "R1", "R2", "E1", "E5a", "C1", "C2a")
    """Labels of the signals received, of which the first of a system is the main one."""
    mode: Mode = "autonomous"
    mask_deg: float = 5.0
    """Satellites below are not used."""
    tracking_dbhz: float = 24.0
    """Signals below this are lost."""
    use_dbhz: float = 28.0
    """Satellites whose main signal is below this are not used."""
    time_to_first_fix_s: Duration = 0.0
    """After power-up; 0: the run begins with a fix."""
    float_s: Duration = 30.0
    """From the first corrections to fixed ambiguities."""
    correction_latency_s: float = 1.0
    correction_interval_s: float = 1.0
    bias_east_m: float = 0.0
    bias_north_m: float = 0.0
    bias_up_m: float = 0.0
    """Error of the base or of the mark, in all positions."""
    error_scale: float = 1.0
    station_id: int = 101

    def __post_init__(self) -> None:
        for label in self.signals:
            if label not in SIMULATED_LABELS:
                raise ConfigurationError(
                    f"signal '{printable(label, 20)}' is not simulated; nearest: {nearest(label, SIMULATED_LABELS)}"
                )


Sentence = Literal["GGA", "GNS", "RMC", "GLL", "GSA", "GSV", "GST", "VTG", "ZDA", "TXT"]


@dataclass(frozen=True, slots=True, kw_only=True)
class StreamTruth:
    start_ms: Annotated[int, start_ms] = field(default=1_772_323_200_000, metadata={"key": "start"})
    """2026-03-01T00:00:00Z."""
    version: Literal["2.3", "3.01", "4.0", "4.11"] = "4.11"
    rate_hz: float = 1.0
    sentences: tuple[Sentence, ...] = ("GGA", "RMC", "VTG", "GST", "GLL", "ZDA", "GSA", "GSV")
    satellites_every: int = 1
    """Satellite sentences come with every n-th epoch."""
    baud: int = 115_200
    latency_s: float = 0.05
    """From the instant of the fix to its first byte."""
    minute_decimals: int = 7
    capped: bool = False
    """GGA counts no more than twelve satellites."""
    bit_error_rate: float = 0.0
    byte_loss_rate: float = 0.0
    binary_bytes_per_epoch: int = 0
    leap_second: bool = False
    """The first midnight of the run has a second 23:59:60 before it."""
    week_offset: int = 0
    """Weeks added to the date: -1024 for a receiver behind its rollover."""

    def __post_init__(self) -> None:
        if not SLOWEST_HZ <= self.rate_hz <= FASTEST_HZ:
            raise ConfigurationError(f"rate_hz = {self.rate_hz:g} lies between {SLOWEST_HZ} and {FASTEST_HZ:g}")
        if not 300 <= self.baud <= 4_000_000:
            raise ConfigurationError(f"baud = {self.baud} lies between 300 and 4000000")
        if not 2 <= self.minute_decimals <= 9:
            raise ConfigurationError("minute_decimals lies between 2 and 9")
        if self.satellites_every < 1:
            raise ConfigurationError("satellites_every is a whole number from 1 on")


Kind = Literal[
    "interference", "cable_loss", "blockage", "repeater", "no_corrections", "no_fix", "silence", "jump", "clock_jump",
    "power_cycle", "bit_errors", "text"
]  # fmt: skip


@dataclass(frozen=True, slots=True, kw_only=True)
class Event:
    """Something that happens, from ``at`` on for a time."""

    kind: Kind
    at_s: Duration = field(metadata={"key": "at"})
    for_s: Duration = field(default=1e12, metadata={"key": "for"})
    """Without: to the end."""
    every_s: Duration = field(default=0.0, metadata={"key": "every"})
    """Comes again after so long; 0: once."""
    depth_db: float = 10.0
    """Loss of C/N0, for interference, cable_loss, blockage."""
    shape: Literal["step", "ramp"] = "step"
    """Ramp: grows to its full depth over its duration."""
    bands: tuple[str, ...] = ()
    """Labels that interference falls on; none: all."""
    azimuth_from_deg: float = 0.0
    azimuth_to_deg: float = 360.0
    elevation_deg: float = 90.0
    """Of a blockage."""
    east_m: float = 0.0
    north_m: float = 0.0
    up_m: float = 0.0
    """Of a jump of the position."""
    seconds: float = 0.0
    """Of a clock jump."""
    rate: float = 1e-4
    """Of bit errors."""
    text: str = ""

    def active(self, time_s: float) -> float:
        """Strength from 0 to 1 at a time of the run."""
        since = time_s - self.at_s
        if since < 0.0:
            return 0.0
        if self.every_s > 0.0:
            since %= self.every_s
        if since >= self.for_s:
            return 0.0
        return since / self.for_s if self.shape == "ramp" else 1.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Scenario:
    title: str
    teaches: str = ""
    name: str = ""
    healthy: bool = False
    """A site that should be accepted."""
    duration_s: Duration = field(default=3600.0, metadata={"key": "duration"})
    """Of a run where the user names none."""
    speed: float = 1.0
    """How much faster than real time the demonstration runs."""
    site: SiteTruth
    antenna: Antenna = field(default_factory=Antenna)
    obstacle: tuple[Obstacle, ...] = ()
    receiver: ReceiverTruth = field(default_factory=ReceiverTruth)
    stream: StreamTruth = field(default_factory=StreamTruth)
    event: tuple[Event, ...] = ()


def scenario_names() -> tuple[str, ...]:
    """Names of the scenarios that come with the program."""
    found = (entry.name for entry in (resources.files("gnssmon.simulation") / "scenarios").iterdir())
    return tuple(sorted(name.removesuffix(".toml") for name in found if name.endswith(".toml")))


def load_scenario(name_or_path: str) -> Scenario:
    """A scenario by name, or from a TOML file. Raises ConfigurationError."""
    if name_or_path in scenario_names():
        text = (resources.files("gnssmon.simulation") / "scenarios" / f"{name_or_path}.toml").read_text("utf-8")
        return load(Scenario, text, name=f"scenario '{name_or_path}'")
    path = Path(name_or_path)
    if not path.is_file():
        raise ConfigurationError(
            f"there is no scenario and no file '{printable(name_or_path, 100)}'; nearest scenario: "
            f"{nearest(name_or_path, scenario_names())}; all: gnssmon simulate --list"
        )
    return load(Scenario, path)
