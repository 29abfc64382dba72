"""Scenario: what a simulated site, antenna, receiver and line are like, and what happens to them.

A scenario is one TOML file; those that come with the program lie in ``scenarios/``. Times of events count from the
start of the run.
"""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass, field
from importlib import resources
from pathlib import Path
from typing import Annotated, Literal

from gnssmon.configuration import Duration, contents, load, nearest
from gnssmon.errors import ConfigurationError
from gnssmon.printable import printable
from gnssmon.simulation.happenings import Event, known_label
from gnssmon.utc import parse_instant

SLOWEST_HZ, FASTEST_HZ = 0.2, 50.0


def start_ms(value: object) -> int:
    """UTC of the run's start, ms since 1970, from ``"2026-03-01T00:00:00Z"``."""
    if not isinstance(value, str):
        raise ConfigurationError('wanted an instant in quotes, such as "2026-03-01T00:00:00Z"')
    instant = parse_instant(value)
    if not instant.dated:
        raise ConfigurationError(f"'{printable(value, 40)}' has no date; wanted such as \"2026-03-01T00:00:00Z\"")
    return instant.ms


def _between(low: float, high: float, **values: float) -> None:
    for name, value in values.items():
        if not low <= value <= high:
            raise ConfigurationError(f"{name} = {value:g} lies between {low:g} and {high:g}")


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
    """Movement of the antenna, towards ``course_deg``; some kilometres at most, over which the sky is held the same."""
    course_deg: float = 0.0

    def __post_init__(self) -> None:
        _between(-89.9, 89.9, latitude_deg=self.latitude_deg)
        _between(-180.0, 180.0, longitude_deg=self.longitude_deg)
        _between(-1000.0, 20_000.0, height_m=self.height_m)
        _between(0.0, 50.0, speed_mps=self.speed_mps)


@dataclass(frozen=True, slots=True, kw_only=True)
class Antenna:
    """The antenna, what follows it up to the receiver, and what reflects beside it."""

    gain_zenith_dbic: float = 3.0
    rolloff_db: float = 11.0
    """Gain at the zenith minus gain at the horizon."""
    tilt_deg: float = 0.0
    tilt_azimuth_deg: float = 0.0
    """Where the antenna leans to."""
    loss_before_db: float = 0.0
    """Before the amplifier: a wet connector, a lossy adaptor."""
    amplifier_gain_db: float = 28.0
    """Negative, with a noise figure as large: an amplifier without supply, which only lets some of the signal leak."""
    amplifier_noise_db: float = 1.5
    cable_loss_db: float = 3.0
    """Behind the amplifier."""
    band_loss_db: dict[str, float] = field(default_factory=dict)
    """By label: loss of C/N0 in an antenna or filter that is not made for that band."""
    reflector_height_m: float = 0.0
    """Antenna above a level reflecting ground or roof; 0: none."""
    reflector_strength: float = 0.3
    """Amplitude of the reflection against the direct signal at 5 degrees of elevation."""
    wall_distance_m: float = 0.0
    """Distance of a reflecting wall; 0: none."""
    wall_azimuth_deg: float = 0.0
    wall_strength: float = 0.3

    def __post_init__(self) -> None:
        _between(0.0, 60.0, loss_before_db=self.loss_before_db, cable_loss_db=self.cable_loss_db)
        _between(0.0, 0.95, reflector_strength=self.reflector_strength, wall_strength=self.wall_strength)
        _between(0.0, 100.0, reflector_height_m=self.reflector_height_m, wall_distance_m=self.wall_distance_m)
        for label in self.band_loss_db:
            known_label(label)


@dataclass(frozen=True, slots=True, kw_only=True)
class Obstacle:
    """Something in the way, from one azimuth clockwise to another, up to an elevation."""

    azimuth_from_deg: float = 0.0
    azimuth_to_deg: float = 360.0
    elevation_deg: float
    loss_db: float = 40.0
    """40 hides a satellite, 5 is a tree."""

    def __post_init__(self) -> None:
        _between(0.0, 90.0, elevation_deg=self.elevation_deg)
        _between(0.0, 100.0, loss_db=self.loss_db)


Mode = Literal["autonomous", "differential", "rtk"]


@dataclass(frozen=True, slots=True, kw_only=True)
class ReceiverTruth:
    signals: tuple[str, ...] = ("G1", "G5", "R1", "R2", "E1", "E5a", "C1", "C2a")
    """Labels of the signals received, of which the first of a system is the main one."""
    mode: Mode = "autonomous"
    noise_figure_db: float = 6.0
    mask_deg: float = 5.0
    """Satellites below are not used."""
    tracking_dbhz: float = 24.0
    """Signals below this are lost."""
    use_dbhz: float = 28.0
    """Satellites whose main signal is below this are not used."""
    pdop_mask: float = 20.0
    """With a worse geometry the receiver gives no position."""
    time_to_first_fix_s: Duration = field(default=0.0, metadata={"key": "time_to_first_fix"})
    """After power-up, from cold; 0: the run begins with a fix."""
    reacquisition_s: Duration = field(default=2.0, metadata={"key": "reacquisition"})
    """Of a signal that was lost, once it is strong enough again."""
    float_s: Duration = field(default=30.0, metadata={"key": "float_time"})
    """From the first corrections to fixed ambiguities."""
    correction_latency_s: float = 0.8
    correction_interval_s: float = 1.0
    coasting_s: Duration = field(default=0.0, metadata={"key": "coasting"})
    """For so long after the loss of a fix, positions are estimated from the last ones."""
    static_hold: bool = False
    """The position stands still as long as there is a fix."""
    bias_east_m: float = 0.0
    bias_north_m: float = 0.0
    bias_up_m: float = 0.0
    """Error of the base or of the mark, in all positions."""
    error_scale: float = 1.0
    station_id: int = 101

    def __post_init__(self) -> None:
        for label in self.signals:
            known_label(label)
        if not self.signals or len(set(self.signals)) < len(self.signals):
            raise ConfigurationError("signals names each label once, and one at least")
        _between(0.0, 60.0, tracking_dbhz=self.tracking_dbhz, use_dbhz=self.use_dbhz)
        _between(0.0, 89.0, mask_deg=self.mask_deg)
        _between(0.0, 60.0, correction_latency_s=self.correction_latency_s)
        _between(0.1, 60.0, correction_interval_s=self.correction_interval_s)


Sentence = Literal["GGA", "GNS", "RMC", "GLL", "GSA", "GSV", "GST", "VTG", "ZDA", "TXT"]


@dataclass(frozen=True, slots=True, kw_only=True)
class StreamTruth:
    start_ms: Annotated[int, start_ms] = field(default=1_772_323_200_000, metadata={"key": "start"})
    """2026-03-01T00:00:00Z."""
    version: Literal["2.3", "3.01", "4.0", "4.11"] = "4.11"
    rate_hz: float = 1.0
    sentences: tuple[Sentence, ...] = ("GGA", "RMC", "VTG", "GST", "GLL", "ZDA", "GSA", "GSV")
    """In the order in which they are sent."""
    satellites_every: int = 1
    """GSV comes with every n-th epoch."""
    baud: int = 115_200
    latency_s: float = 0.05
    """From the instant of the fix to its first byte."""
    jitter_s: float = 0.004
    """Mean of what the host's reading adds to the time of arrival, at random."""
    minute_decimals: int = 7
    capped: bool = False
    """GGA counts no more than twelve satellites."""
    bit_error_rate: float = 0.0
    byte_loss_rate: float = 0.0
    binary_bytes_per_epoch: int = 0
    """A binary message of so many bytes between the sentences of each epoch."""
    leap_second: bool = False
    """The first midnight of the run has a second 23:59:60 before it."""
    week_offset: int = 0
    """Weeks added to the date: -1024 for a receiver behind its rollover."""

    def __post_init__(self) -> None:
        _between(SLOWEST_HZ, FASTEST_HZ, rate_hz=self.rate_hz)
        _between(300, 4_000_000, baud=self.baud)
        _between(2, 9, minute_decimals=self.minute_decimals)
        _between(1, 3600, satellites_every=self.satellites_every)
        _between(0.0, 1.0, bit_error_rate=self.bit_error_rate, byte_loss_rate=self.byte_loss_rate)
        _between(0, 1023, binary_bytes_per_epoch=self.binary_bytes_per_epoch)
        _between(0.0, 10.0, latency_s=self.latency_s, jitter_s=self.jitter_s)
        if not self.sentences:
            raise ConfigurationError("sentences names one kind at least")


@dataclass(frozen=True, slots=True, kw_only=True)
class Scenario:
    title: str
    teaches: str = ""
    name: str = ""
    """Filled in when it is loaded: the name by which it was asked for."""
    healthy: bool = False
    """A site that should be accepted."""
    duration_s: Duration = field(default=3600.0, metadata={"key": "duration"})
    """Of a run where the user names none."""
    speed: float = 1.0
    """How much faster than real time a demonstration should run."""
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


def scenario_text(name_or_path: str) -> str:
    """The TOML of a scenario by name, or of a file. Raises ConfigurationError."""
    if name_or_path in scenario_names():
        return (resources.files("gnssmon.simulation") / "scenarios" / f"{name_or_path}.toml").read_text("utf-8")
    path = Path(name_or_path)
    if not path.is_file():
        raise ConfigurationError(
            f"there is no scenario and no file '{printable(name_or_path, 100)}'; nearest scenario: "
            f"{nearest(name_or_path, scenario_names())}; all: gnssmon simulate --list"
        )
    return contents(path)


def load_scenario(name_or_path: str) -> Scenario:
    """A scenario by name, or from a TOML file. Raises ConfigurationError."""
    shown = f"scenario '{name_or_path}'" if name_or_path in scenario_names() else name_or_path
    scenario = load(Scenario, scenario_text(name_or_path), name=shown)
    return dataclasses.replace(scenario, name=scenario.name or Path(name_or_path).stem)
