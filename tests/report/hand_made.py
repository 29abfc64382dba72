"""A snapshot made by hand: a static site of our own invention, six hours, four signals; every part can be replaced."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from gnssmon.acceptance.criteria import load_criteria
from gnssmon.acceptance.verdict import judge
from gnssmon.alarms.states import AlarmEvent
from gnssmon.diagnosis.finding import Finding
from gnssmon.quantities import Estimate, exact
from gnssmon.receiver import ReceiverState, SatelliteNow
from gnssmon.snapshot import Snapshot, SourceFacts, StreamFacts
from gnssmon.statistics.pictures import (
    CELL_BLOCKED,
    CELL_MIXED,
    CELL_OPEN,
    CELL_UNKNOWN,
    CELL_UNREACHABLE,
    FixPicture,
    LevelPicture,
    Pictures,
    ScatterPicture,
    SkyPicture,
    StreamPicture,
    TimingPicture,
    Track,
)
from gnssmon.statistics.subject import Site, Span

MINUTES = 360
START_MS = 1_747_719_000_000
"""2025-05-20T05:30:00Z."""


def estimates() -> dict[str, Estimate]:
    """What six good hours give, a few unknown ones among them."""
    return {
        "stream.completeness": exact(0.99981, 21_600),
        "stream.epochs": exact(21_596.0, 21_600),
        "stream.gaps": exact(4.0),
        "stream.duration_s": exact(21_599.0),
        "stream.checksum_failure_share": exact(0.00002),
        "stream.longest_gap_s": exact(2.0),
        "fix.time_to_first_fix_s": exact(0.0),
        "fix.longest_outage_s": exact(0.0),
        "fix.share_none": Estimate(0.0, (0.0, 0.0017), 0.95, 21_600, 2160.0),
        "satellites.used_min": exact(14.0),
        "satellites.used_mean": Estimate(19.2, (18.7, 19.7), 0.95, 21_600, 40.0),
        "cn0.strongest4_mean_dbhz": Estimate(49.6, (49.3, 49.9), 0.95, 21_600, 60.0),
        "cn0.mean_dbhz.G1": Estimate(43.2, (42.9, 43.5), 0.95, 180_000, 60.0),
        "cn0.mean_dbhz": Estimate(42.2, (41.9, 42.5), 0.95, 500_000, 60.0),
        "dop.hdop_median": Estimate(0.71, (0.68, 0.74), 0.95, 21_600, 20.0),
        "dop.pdop_max": exact(1.9),
        "scatter.r95_m": Estimate(1.31, (1.12, 1.62), 0.95, 21_600, 30.0),
        "scatter.vertical_95_m": Estimate(2.2, (1.9, 2.9), 0.95, 21_600, 30.0),
        "scatter.cep50_m": Estimate(0.61, (0.52, 0.75), 0.95, 21_600, 30.0),
        "scatter.east_std_m": Estimate(0.47, (0.40, 0.61), 0.95, 21_600, 30.0),
        "scatter.mean_latitude_deg": Estimate(-33.41, (-33.410004, -33.409996), 0.95, 21_600, 12.0),
        "sky.obstructed_share": Estimate(0.06, (0.04, 0.09), 0.95, 400, 300.0),
        "sky.mask_deg": Estimate(tuple(None if k > 30 else 10.0 for k in range(36))),
        "reference.east_m": Estimate(None),
        "timing.nonsense": Estimate(math.nan, (math.nan, math.inf)),
    }


def scatter(seed: int = 5) -> ScatterPicture:
    generator = np.random.default_rng(seed)
    slow = np.cumsum(generator.normal(0.0, 0.05, (MINUTES, 3)), axis=0)
    slow -= slow.mean(axis=0)
    slow *= np.array([0.4, 0.6, 1.0]) / slow.std(axis=0)
    row = np.sort(generator.integers(0, MINUTES, 4000))
    points = slow[row] + generator.normal(0.0, 0.2, (4000, 3))
    radius = np.hypot(points[:, 0], points[:, 1])
    return ScatterPicture(
        axis_ms=START_MS + row * 60_000,
        east_m=points[:, 0],
        north_m=points[:, 1],
        up_m=points[:, 2],
        quality=np.where(row % 90 < 5, 1, 2).astype(np.int8),
        origin=(-33.41, 148.25, 312.4),
        about="mean",
        mean_m=(0.0, 0.0, 0.0),
        ellipse_m=(0.65, 0.44, 22.0),
        cep50_m=float(np.quantile(radius, 0.5)),
        r95_m=float(np.quantile(radius, 0.95)),
        minute=START_MS // 60_000 + np.arange(MINUTES),
        minute_mean_m=slow,
    )


def sky() -> SkyPicture:
    azimuth_from, azimuth_to, low, high, state = [], [], [], [], []
    for ring in range(9):
        count = max(4, round(36 * math.cos(math.radians(ring * 10 + 5))))
        for cell in range(count):
            azimuth_from.append(cell * 360.0 / count)
            azimuth_to.append((cell + 1) * 360.0 / count)
            low.append(ring * 10.0)
            high.append(ring * 10.0 + 10.0)
            middle = (azimuth_from[-1] + azimuth_to[-1]) / 2
            hidden = 60 < middle < 130 and ring < 3
            hole = (middle > 315 or middle < 45) and ring < 5
            unseen = 200 < middle < 215 and ring == 1
            state.append(
                CELL_UNREACHABLE
                if hole
                else CELL_UNKNOWN
                if unseen
                else CELL_BLOCKED
                if hidden and ring < 2
                else CELL_MIXED
                if hidden
                else CELL_OPEN
            )
    horizon = np.full(36, 5.0)
    horizon[6:13] = [12, 18, 24, 26, 25, 20, 13]
    horizon[20:22] = np.nan
    return SkyPicture(
        azimuth_from_deg=np.array(azimuth_from),
        azimuth_to_deg=np.array(azimuth_to),
        elevation_from_deg=np.array(low),
        elevation_to_deg=np.array(high),
        state=np.array(state, dtype=np.uint8),
        residual_db=np.zeros(len(state)),
        horizon_deg=horizon,
        horizon_low_deg=horizon - 2.0,
        horizon_high_deg=horizon + 3.0,
        tracks=tuple(_track(number) for number in range(30)),
        mask_deg=10.0,
    )


def _track(number: int) -> Track:
    turn = np.linspace(-80.0, 80.0, 120)
    azimuth = (number * 37.0 + turn * (1 if number % 2 else -1)) % 360.0
    elevation = (20.0 + (number * 23) % 68) * np.cos(np.radians(turn * 1.1))
    hidden = (azimuth > 60) & (azimuth < 130) & (elevation < 22)
    above = elevation > 0
    return Track(f"{'GREC'[number % 4]}{number + 1:02d}", azimuth[above], elevation[above], ~hidden[above])


def levels() -> LevelPicture:
    elevation = np.arange(18) * 5.0 + 2.5
    signals = ("G1", "G5", "E1", "E5a", "C2a")
    mean = np.array([35.0 + k + 13.0 * np.sqrt(np.sin(np.radians(elevation))) for k in range(len(signals))])
    mean[:, 0] = np.nan
    level = 45.0 + 0.2 * np.random.default_rng(1).normal(size=(len(signals), MINUTES)) + np.arange(5)[:, None]
    level[0, 200:] -= 4.0
    return LevelPicture(
        signals=signals,
        elevation_deg=elevation,
        mean_dbhz=mean,
        low_dbhz=mean - 4.0,
        high_dbhz=mean + 3.0,
        count=np.where(np.isnan(mean), 0, 5000).astype(np.int64),
        minute=START_MS // 60_000 + np.arange(MINUTES),
        level_dbhz=level,
    )


def fix() -> FixPicture:
    minute = START_MS // 60_000 + np.arange(MINUTES)
    by_quality = np.zeros((MINUTES, 9), dtype=np.int64)
    by_quality[:, 2] = 60
    by_quality[::90, 1], by_quality[::90, 2] = 25, 35
    by_quality[120:124, 0], by_quality[120:124, 2] = 30, 30
    return FixPicture(
        minute=minute,
        by_quality=by_quality,
        used_mean=19.0 + 3.0 * np.sin(np.arange(MINUTES) / 40.0),
        hdop_mean=0.7 + 0.05 * np.cos(np.arange(MINUTES) / 40.0),
        correction_age_max_s=np.full(MINUTES, 5.0),
    )


def pictures() -> Pictures:
    minute = START_MS // 60_000 + np.arange(MINUTES)
    full = np.full(MINUTES, 60, dtype=np.int64)
    return Pictures(
        scatter=scatter(),
        sky=sky(),
        level=levels(),
        fix=fix(),
        stream=StreamPicture(
            minute=minute,
            epochs=full,
            bytes=full * 2000,
            checksum_failures=full * 0,
            gaps=((START_MS + 120 * 60_000, 2.0),),
        ),
        timing=TimingPicture(minute=minute, delay_median_s=full * 0.001, delay_95_s=full * 0.002),
    )


def empty_pictures() -> Pictures:
    """What a stream without a single sentence gives."""
    none, whole = np.empty(0), np.empty(0, dtype=np.int64)
    nothing = np.full(36, np.nan)
    return Pictures(
        scatter=ScatterPicture(
            axis_ms=whole,
            east_m=none,
            north_m=none,
            up_m=none,
            quality=np.empty(0, dtype=np.int8),
            origin=None,
            about="mean",
            mean_m=None,
            ellipse_m=None,
            cep50_m=math.nan,
            r95_m=math.nan,
            minute=whole,
            minute_mean_m=np.empty((0, 3)),
        ),
        sky=SkyPicture(
            azimuth_from_deg=none,
            azimuth_to_deg=none,
            elevation_from_deg=none,
            elevation_to_deg=none,
            state=np.empty(0, dtype=np.uint8),
            residual_db=none,
            horizon_deg=nothing,
            horizon_low_deg=nothing,
            horizon_high_deg=nothing,
            tracks=(),
            mask_deg=10.0,
        ),
        level=LevelPicture(
            signals=(),
            elevation_deg=np.arange(18) * 5.0 + 2.5,
            mean_dbhz=np.empty((0, 18)),
            low_dbhz=np.empty((0, 18)),
            high_dbhz=np.empty((0, 18)),
            count=np.empty((0, 18), dtype=np.int64),
            minute=whole,
            level_dbhz=np.empty((0, 0)),
        ),
        fix=FixPicture(
            minute=whole,
            by_quality=np.empty((0, 9), dtype=np.int64),
            used_mean=none,
            hdop_mean=none,
            correction_age_max_s=none,
        ),
        stream=StreamPicture(minute=whole, epochs=whole, bytes=whole, checksum_failures=whole, gaps=()),
        timing=TimingPicture(minute=whole, delay_median_s=none, delay_95_s=none),
    )


HOSTILE = "</script><script>alert(1)</script>\x1b[31m\u202e'\"&{{7*7}}"
"""Markup, a terminal sequence, a bidirectional override and a template in one text."""


def snapshot(criteria: str = "autonomous", **changes: Any) -> Snapshot:
    """The hand-made site, judged by a preset; ``changes`` replace fields of the snapshot."""
    known = changes.get("estimates", estimates())
    facts: dict[str, Any] = {
        "span": Span(START_MS, START_MS + MINUTES * 60_000),
        "window": "since start",
        "utc_offset_ms": 0,
        "source": SourceFacts(label="hill_6h.nmea.gz", kind="log", size=48_123_456, sha256="5f" * 32),
        "site": Site(reference_text="-33.41 148.25 312.40 in EPSG:4979, antenna 1.5 m above"),
        "receiver": ReceiverState(quality=2, satellites=(SatelliteNow("G07", 45.0, 120.0, True, {"G1": 47.0}),)),
        "stream": StreamFacts(
            bytes=48_123_456,
            sentences=734_400,
            unverified=0,
            checksum_failures=14,
            malformed=2,
            non_nmea_bytes=0,
            by_type={"GGA": 21_596, "RMC": 21_596, "GSV": 500_000},
            talkers={"GN": 100_000, "GP": 300_000},
            first_utc="2025-05-20T05:30:00.000Z",
            last_utc="2025-05-20T11:29:59.000Z",
        ),
        "estimates": known,
        "pictures": pictures(),
        "verdict": judge(load_criteria(criteria), lambda confidence: known, duration_s=MINUTES * 60.0),
        "findings": (
            Finding(
                code="sky-blocked",
                severity="warning",
                summary="Satellites stay without signal below about 22 degrees between azimuth 60 and 130 degrees "
                "(east); at most 10 is asked for.",
                evidence={"azimuth_from_deg": 60, "azimuth_to_deg": 130, "elevation_deg": 22.0, "note": "x"},
                advice="Look from the antenna's place in that direction: a building, a tree, a mast or metal nearby.",
                source="no obstruction above 10 degrees: IGS CORS Guidelines 1.1.0",
            ),
            Finding(code="single-system", severity="info", summary="Signals of one satellite system only."),
        ),
        "alarms": (
            AlarmEvent(
                quantity="fix.share_none",
                severity="serious",
                limit=0.99,
                worst=1.0,
                raised_ms=START_MS + 7_200_000,
                cleared_ms=None,
                raised_utc="2025-05-20T07:30:00.000Z",
                cleared_utc=None,
                note="No position for 7 s.",
            ),
        ),
    }
    return Snapshot(**(facts | changes))
